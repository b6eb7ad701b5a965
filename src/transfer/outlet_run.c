/* transfer/outlet_run.c - what the folder outlet and the tar outlet share */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/outlet_run.h"

#include "base/fault.h"
#include "base/memory.h"
#include "base/text.h"

#include <inttypes.h>

enum { HARD_LINK = '1', GAPS_LINE_ROOM = 96 };

/* ---- names ---- */

/* The name of an entry without the slash behind a folder's; false: it is not in stored form. */
static bool safe_name(const char *given, char name[FIRN_STORED_NAME_ROOM])
{
    size_t bytes = strnlen(given, FIRN_STORED_NAME_ROOM);

    while (bytes > 1 && given[bytes - 1] == '/')
        bytes--;
    if (bytes > FIRN_INTAKE_NAME_MAX) {
        name[0] = '\0';
        return false;
    }
    memcpy(name, given, bytes);
    name[bytes] = '\0';
    return firn_stored_name_safe(name);
}

static bool is_chosen(const struct firn_outlet_run *run, const char *name)
{
    return run->options->patterns == NULL || firn_pattern_match(run->options->patterns, name);
}

/* ---- hard links, beforehand ---- */

struct survey {
    struct firn_outlet_run *run;
    enum firn_status status;
};

static enum firn_status note_link(struct firn_outlet_run *run, struct archive_entry *entry)
{
    char name[FIRN_STORED_NAME_ROOM], target[FIRN_STORED_NAME_ROOM];
    struct firn_outlet_target *record;
    void *place;
    enum firn_status status;

    if (!safe_name(archive_entry_pathname(entry), name) || !safe_name(archive_entry_hardlink(entry), target)
        || !is_chosen(run, name))
        return FIRN_OK;
    status = firn_names_add(run->targets, target, strlen(target), &place, NULL);
    if (status != FIRN_OK)
        return status;
    record = place;
    if (record->stand_in != NULL || is_chosen(run, target))
        return FIRN_OK;
    record->stand_in = firn_names_keep(run->targets, name, strlen(name));
    return record->stand_in == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

static bool survey_wants(void *self, const struct firn_item *item)
{
    struct survey *survey = self;
    struct archive_entry *entry;
    enum firn_status status;

    if (survey->status != FIRN_OK)
        return true;      /* so that survey_begin can end the walk */
    if (firn_pax_type(item) != HARD_LINK)
        return false;
    status = firn_pax_entry(survey->run->pax, item, &entry);
    if (status == FIRN_OK)
        status = note_link(survey->run, entry);
    survey->status = status == FIRN_BAD_DATA ? FIRN_OK : status;      /* told of when its turn comes */
    return false;
}

static enum firn_status survey_begin(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes)
{
    (void)item;
    (void)foreseen_lost_bytes;
    return ((struct survey *)self)->status;
}

static enum firn_status survey_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    (void)item;
    (void)outcome;
    return ((struct survey *)self)->status;
}

enum firn_status firn_outlet_run_start(struct firn_outlet_run *run, struct firn_reader *reader,
                                       const struct firn_outlet_options *options, struct firn_fault *fault,
                                       struct firn_outlet_report *report)
{
    struct survey survey = { .run = run };
    const struct firn_reader_visitor visitor = {
        .self = &survey, .wants = survey_wants, .begin = survey_begin, .end = survey_end
    };
    struct firn_reader_walk_report walked;
    enum firn_status status;

    *report = (struct firn_outlet_report){ 0 };
    *run = (struct firn_outlet_run){ .options = options, .memory = options->memory, .fault = fault, .report = report };
    status = firn_pax_make(run->memory, &run->pax);
    if (status == FIRN_OK)
        status = firn_names_make(run->memory, sizeof(struct firn_outlet_target), &run->targets);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, "");
    status = firn_reader_walk(reader, &visitor, fault, &walked);
    return status == FIRN_OK ? survey.status : status;
}

enum firn_status firn_outlet_run_walk(struct firn_outlet_run *run, struct firn_reader *reader,
                                      const struct firn_reader_visitor *visitor)
{
    struct firn_reader_walk_report walked = { 0 };
    enum firn_status status = firn_reader_walk(reader, visitor, run->fault, &walked);

    run->report->items_unknown = walked.items_unknown;
    run->report->cut_short = walked.cut_short;
    return status;
}

void firn_outlet_run_end(struct firn_outlet_run *run)
{
    firn_pax_free(run->pax);
    firn_names_free(run->targets);
    run->memory->put(run->memory->self, run->ranges);
    run->pax = NULL;
    run->targets = NULL;
    run->ranges = NULL;
}

/* ---- findings ---- */

static void tell(struct firn_outlet_run *run, const struct firn_outlet_finding *finding)
{
    run->report->findings[finding->kind]++;
    if (run->options->finding != NULL)
        run->options->finding(run->options->self, finding);
}

void firn_outlet_run_tell(struct firn_outlet_run *run, enum firn_outlet_kind kind, int os_error, const char *detail)
{
    tell(run, &(struct firn_outlet_finding){
        .kind = kind, .path = run->name, .number = run->number, .os_error = os_error, .detail = detail
    });
}

void firn_outlet_run_tell_verdict(struct firn_outlet_run *run, enum firn_outlet_verdict verdict,
                                  const struct firn_item *item, bool kept)
{
    bool lossy = verdict == FIRN_OUTLET_IS_LOSSY;

    run->report->lost_bytes += run->lost_bytes;
    tell(run, &(struct firn_outlet_finding){
        .kind = lossy ? FIRN_OUTLET_LOST : FIRN_OUTLET_MISMATCH, .path = run->name, .number = run->number,
        .detail = lossy ? "" : "the bytes do not have the digest in the catalogue", .bytes = item->bytes,
        .lost_bytes = run->lost_bytes, .range_count = run->range_count, .ranges = run->ranges, .kept = kept
    });
}

void firn_outlet_run_progress(const struct firn_outlet_run *run)
{
    if (run->options->progress != NULL)
        run->options->progress(run->options->self, run->report->chosen, run->report->bytes);
}

/* ---- the item at hand ---- */

/* A name that is refused is told of as it stands in the header. */
static bool refuse(struct firn_outlet_run *run, const char *given, const char *detail)
{
    if (run->quiet)
        return false;
    run->report->chosen++;
    tell(run, &(struct firn_outlet_finding){
        .kind = FIRN_OUTLET_REFUSED, .path = given, .number = run->number, .detail = detail
    });
    return false;
}

/* Of a hard link: finds where it leads. False: an earlier item stood in for it. */
static bool resolve_link(struct firn_outlet_run *run, const char *given)
{
    char target[FIRN_STORED_NAME_ROOM];

    run->link = safe_name(given, target) ? firn_names_find(run->targets, target, strlen(target)) : NULL;
    return run->link == NULL || run->link->stand_in == NULL || !run->link->met
           || strcmp(run->link->stand_in, run->name) != 0;
}

bool firn_outlet_run_take(struct firn_outlet_run *run, const struct firn_item *item, enum firn_status *status)
{
    const char *given, *link;

    run->number = item->number;
    run->range_count = 0;
    run->lost_bytes = 0;
    run->target = run->link = NULL;
    *status = firn_pax_entry(run->pax, item, &run->entry);
    if (*status == FIRN_BAD_DATA) {
        *status = FIRN_OK;
        return refuse(run, "", "its metadata makes no sense");
    }
    if (*status != FIRN_OK)
        return false;
    given = archive_entry_pathname(run->entry);
    link = archive_entry_hardlink(run->entry);
    if (!safe_name(given, run->name))
        return (run->name[0] != '\0' && !is_chosen(run, run->name)) ? false
                                                                    : refuse(run, given, "a name that leads elsewhere");
    if (link == NULL) {
        run->target = firn_names_find(run->targets, run->name, strlen(run->name));
        if (run->target != NULL)
            run->target->met = true;
    }
    if (run->target != NULL && run->target->stand_in != NULL)
        memcpy(run->name, run->target->stand_in, strlen(run->target->stand_in) + 1);
    else if (!is_chosen(run, run->name) || (link != NULL && !resolve_link(run, link)))
        return false;
    run->report->chosen += !run->quiet;
    return true;
}

struct firn_outlet_target *firn_outlet_run_link(struct firn_outlet_run *run)
{
    if (run->link != NULL && run->link->written)
        return run->link;
    if (run->link == NULL)
        firn_outlet_run_tell(run, FIRN_OUTLET_REFUSED, 0, "a hard link that leads elsewhere");
    else
        firn_outlet_run_tell(run, FIRN_OUTLET_LINK, 0, "the file it is a hard link to was not given back");
    return NULL;
}

/* Two stretches may share a block, where one ends and the next one begins. */
static void add_blocks(struct firn_outlet_run *run, struct firn_outlet_range *range)
{
    if (run->lost_blocks == 0)
        return;
    if (range->lost_blocks == 0)
        range->first_block = run->first_block;
    else if (range->last_block == run->first_block)
        range->lost_blocks--;
    range->last_block = run->last_block;
    range->lost_blocks += run->lost_blocks;
}

enum firn_status firn_outlet_run_gap(struct firn_outlet_run *run, uint64_t at, uint64_t count,
                                     enum firn_reader_loss why, uint64_t container_at)
{
    struct firn_outlet_range *last = run->range_count == 0 ? NULL : &run->ranges[run->range_count - 1];
    void *array = run->ranges;
    enum firn_status status;

    run->lost_bytes += count;
    if (last != NULL && last->why == why && last->at + last->bytes == at) {
        last->bytes += count;
        add_blocks(run, last);
        return FIRN_OK;
    }
    status = firn_memory_grow(run->memory, &array, &run->range_capacity, run->range_count + 1, sizeof *run->ranges);
    run->ranges = array;
    if (status != FIRN_OK)
        return status;
    run->ranges[run->range_count++] = (struct firn_outlet_range){
        .at = at, .bytes = count, .why = why, .container_at = container_at
    };
    if (why == FIRN_READER_LOSS_BLOCKS)
        add_blocks(run, &run->ranges[run->range_count - 1]);
    return FIRN_OK;
}

void firn_outlet_run_lost_blocks(struct firn_outlet_run *run, uint64_t first, uint64_t last, uint64_t count)
{
    run->first_block = first;
    run->last_block = last;
    run->lost_blocks = count;
}

enum firn_outlet_verdict firn_outlet_run_judge(const struct firn_outlet_run *run,
                                               const struct firn_reader_outcome *outcome)
{
    if (outcome->lost_bytes > 0 || run->lost_bytes > 0)
        return FIRN_OUTLET_IS_LOSSY;
    return outcome->sum_known && !outcome->sum_right ? FIRN_OUTLET_IS_WRONG : FIRN_OUTLET_IS_WHOLE;
}

enum firn_status firn_outlet_run_written(struct firn_outlet_run *run, bool kept)
{
    bool link_kept = run->link != NULL && run->link->incomplete;

    if (link_kept)
        tell(run, &(struct firn_outlet_finding){
            .kind = FIRN_OUTLET_LINK, .path = run->name, .number = run->number,
            .detail = "the file it is a hard link to is not whole", .kept = true
        });
    if (kept || link_kept)
        run->report->kept++;
    else
        run->report->written++;
    if (run->target == NULL)
        return FIRN_OK;
    run->target->incomplete = kept;
    run->target->place = firn_names_keep(run->targets, run->name, strlen(run->name));
    run->target->written = run->target->place != NULL;
    return run->target->written ? FIRN_OK : FIRN_NO_MEMORY;
}

/* ---- gaps ---- */

static const char *word_for(enum firn_reader_loss why)
{
    switch (why) {
    case FIRN_READER_LOSS_BLOCKS:    return "blocks-lost";
    case FIRN_READER_LOSS_WITHDRAWN: return "never-written";
    case FIRN_READER_LOSS_CONTENT:   return "content-wrong";
    }
    return "unknown";
}

enum firn_status firn_outlet_run_gaps(struct firn_outlet_run *run, const struct firn_item *item,
                                      enum firn_outlet_verdict verdict, char **text, size_t *bytes)
{
    size_t room = 4 * FIRN_STORED_NAME_ROOM + (run->range_count + 4) * GAPS_LINE_ROOM;      /* names may be escaped */
    struct firn_text lines;

    *text = run->memory->get(run->memory->self, room);
    if (*text == NULL)
        return FIRN_NO_MEMORY;
    firn_text_start(&lines, *text, room);
    firn_text_add(&lines, "# gaps in ");
    firn_text_add_name(&lines, run->name);
    firn_text_add(&lines, ", %" PRIu64 " bytes, filled with zeros: offset length reason place-in-container\n",
                  item->bytes);
    for (size_t i = 0; i < run->range_count; i++)
        firn_text_add(&lines, "%" PRIu64 " %" PRIu64 " %s %" PRIu64 "\n", run->ranges[i].at, run->ranges[i].bytes,
                      word_for(run->ranges[i].why), run->ranges[i].container_at);
    if (verdict == FIRN_OUTLET_IS_WRONG)
        firn_text_add(&lines, "0 %" PRIu64 " digest-wrong -\n", item->bytes);
    *bytes = lines.used;
    return FIRN_OK;
}
