/* care/history.c - what scrubs have found in one container over time */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/history.h"

#include "base/fault.h"
#include "base/memory.h"
#include "care/append.h"
#include "guard/hash.h"

#include <errno.h>
#include <fcntl.h>
#include <inttypes.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

/* Of a file that has grown beyond all measure the end is read. A path gets three times as long at most. */
enum { READ_BYTES_MAX = 1 << 22, LINE_ROOM = FIRN_CORE_WORDS_ROOM + 1024, STEM_BYTES = 80, PATH_BYTES_MAX = 3 * 4096 };

static const char first_word[] = "firn-history 1 ";

/* ---- one line ---- */

static const struct field { const char *key; size_t at; enum { SIGNED, COUNT, FLAG } kind; } fields[] = {
    { "began", offsetof(struct firn_history_entry, began), SIGNED },
    { "at", offsetof(struct firn_history_entry, at), SIGNED },
    { "bytes", offsetof(struct firn_history_entry, file_bytes), COUNT },
    { "blocks", offsetof(struct firn_history_entry, blocks), COUNT },
    { "reached", offsetof(struct firn_history_entry, reached), COUNT },
    { "done", offsetof(struct firn_history_entry, done), FLAG },
    { "mended", offsetof(struct firn_history_entry, mended), COUNT },
    { "bits", offsetof(struct firn_history_entry, mended_bits), COUNT },
    { "rebuilt", offsetof(struct firn_history_entry, rebuilt), COUNT },
    { "lost", offsetof(struct firn_history_entry, lost), COUNT },
    { "unreadable", offsetof(struct firn_history_entry, unreadable), COUNT },
    { "written", offsetof(struct firn_history_entry, written), COUNT },
    { "places", offsetof(struct firn_history_entry, places), COUNT },
    { "left", offsetof(struct firn_history_entry, left), COUNT },
    { "title", offsetof(struct firn_history_entry, title_damaged), FLAG },
    { "cut", offsetof(struct firn_history_entry, end_missing), FLAG },
};

enum { FIELDS = sizeof fields / sizeof fields[0] };

static void write_entry(const struct firn_history_entry *entry, const struct firn_core *core, struct firn_text *text)
{
    const char *base = (const char *)entry;

    firn_text_add(text, "id=");
    firn_text_add_hex(text, entry->id, sizeof entry->id);
    for (size_t i = 0; i < FIELDS; i++) {
        const char *value = base + fields[i].at;

        if (fields[i].kind == SIGNED)
            firn_text_add(text, " %s=%" PRId64, fields[i].key, *(const int64_t *)(const void *)value);
        else if (fields[i].kind == COUNT)
            firn_text_add(text, " %s=%" PRIu64, fields[i].key, *(const uint64_t *)(const void *)value);
        else
            firn_text_add(text, " %s=%d", fields[i].key, *(const bool *)value);
    }
    firn_text_add(text, " core=");
    firn_core_write(core, text);
    firn_text_add(text, "\n");
}

static bool read_field(struct firn_history_entry *entry, const char *key, size_t key_bytes, const char *value)
{
    for (size_t i = 0; i < FIELDS; i++) {
        char *place = (char *)entry + fields[i].at;
        uint64_t number;

        if (strlen(fields[i].key) != key_bytes || memcmp(fields[i].key, key, key_bytes) != 0)
            continue;
        if (firn_text_parse_count(value, &number) != FIRN_OK || number > INT64_MAX)
            return false;
        if (fields[i].kind == SIGNED)
            *(int64_t *)(void *)place = (int64_t)number;
        else if (fields[i].kind == COUNT)
            *(uint64_t *)(void *)place = number;
        else
            *(bool *)place = number != 0;
        return true;
    }
    return true;      /* a later version may know more */
}

/* Takes a line apart, in place. Returns false when it is no entry. */
static bool read_entry(char *line, struct firn_history_entry *entry, struct firn_core *core)
{
    bool identified = false;
    char *rest = NULL;

    *entry = (struct firn_history_entry){ .at = 0 };
    firn_core_start(core, 0);
    for (char *word = strtok_r(line, " ", &rest); word != NULL; word = strtok_r(NULL, " ", &rest)) {
        char *value = strchr(word, '=');

        if (value == NULL)
            return false;
        *value++ = '\0';
        if (strcmp(word, "id") == 0)
            identified = strlen(value) == 2 * sizeof entry->id
                && firn_text_parse_hex(value, sizeof entry->id, entry->id) == FIRN_OK;
        else if (strcmp(word, "core") == 0) {
            if (firn_core_read(core, value) != FIRN_OK)
                return false;
        } else if (!read_field(entry, word, strlen(word), value))
            return false;
    }
    core->blocks = entry->blocks;
    return identified && entry->blocks > 0 && entry->reached <= entry->blocks && entry->began <= entry->at;
}

/* ---- all lines ---- */

static bool same_container(const struct firn_history_entry *one, const struct firn_history_entry *other)
{
    return memcmp(one->id, other->id, sizeof one->id) == 0;
}

/* The next part of a scrub stands for all parts before it. FIRN_OK or FIRN_NO_MEMORY. */
static enum firn_status take(struct firn_history *history, const struct firn_history_entry *entry,
                             const struct firn_core *core)
{
    void *entries = history->entries;
    enum firn_status status = firn_memory_grow(history->memory, &entries, &history->capacity, history->count + 1,
                                               sizeof *entry);
    struct firn_history_entry *newest;

    history->entries = entries;
    if (status != FIRN_OK)
        return status;
    newest = history->count == 0 ? NULL : &history->entries[history->count - 1];
    history->core = *core;
    history->core.places = entry->places;
    history->core.places_lost = entry->left;      /* for all that a later part can do about it */
    if (newest != NULL && newest->began == entry->began && same_container(newest, entry) && !newest->done) {
        *newest = *entry;
        return FIRN_OK;
    }
    if (history->count == FIRN_HISTORY_MAX) {
        memmove(history->entries, history->entries + 1, (FIRN_HISTORY_MAX - 1) * sizeof history->entries[0]);
        history->count--;
    }
    history->entries[history->count++] = *entry;
    return FIRN_OK;
}

static enum firn_status take_lines(struct firn_history *history, char *bytes)
{
    enum firn_status status = FIRN_OK;
    char *rest = NULL, *line = strtok_r(bytes, "\n", &rest);

    for (; line != NULL && status == FIRN_OK; line = strtok_r(NULL, "\n", &rest)) {
        struct firn_history_entry entry;
        struct firn_core core;

        if (strncmp(line, first_word, sizeof first_word - 1) != 0 && read_entry(line, &entry, &core))
            status = take(history, &entry, &core);
    }
    return status;
}

static size_t read_end(int descriptor, char *bytes, size_t count, off_t at)
{
    size_t got = 0;

    while (got < count) {
        ssize_t step = pread(descriptor, bytes + got, count - got, at + (off_t)got);

        if (step < 0 && errno == EINTR)
            continue;
        if (step <= 0)
            break;
        got += (size_t)step;
    }
    return got;
}

static enum firn_status read_file(struct firn_history *history)
{
    int descriptor = open(history->file, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
    struct stat facts;
    enum firn_status status;
    off_t at = 0;
    char *bytes;
    size_t got;

    if (descriptor < 0)
        return FIRN_OK;
    if (fstat(descriptor, &facts) != 0 || !S_ISREG(facts.st_mode)) {
        close(descriptor);
        return FIRN_OK;
    }
    if (facts.st_size > READ_BYTES_MAX)
        at = facts.st_size - READ_BYTES_MAX;
    bytes = history->memory->get(history->memory->self, (size_t)(facts.st_size - at) + 1);
    if (bytes == NULL) {
        close(descriptor);
        return FIRN_NO_MEMORY;
    }
    got = read_end(descriptor, bytes, (size_t)(facts.st_size - at), at);
    close(descriptor);
    for (size_t i = 0; i < got; i++)
        if (bytes[i] == '\0')
            bytes[i] = '?';
    bytes[got] = '\0';
    status = take_lines(history, bytes);
    history->memory->put(history->memory->self, bytes);
    return status;
}

/* ---- the file ---- */

/* "quay-1931.firn-0123456789abcdef.history": for people the name, for us the hash of the whole place. */
static enum firn_status name_file(struct firn_history *history, const char *folder)
{
    const char *name = strrchr(history->place, '/') + 1;
    size_t room = strlen(folder) + STEM_BYTES + 32;
    struct firn_text text;

    history->file = history->memory->get(history->memory->self, room);
    if (history->file == NULL)
        return FIRN_NO_MEMORY;
    firn_text_start(&text, history->file, room);
    firn_text_add(&text, "%s/", folder);
    for (size_t i = 0; name[i] != '\0' && i < STEM_BYTES; i++) {
        bool plain = (name[i] >= '0' && name[i] <= '9') || (name[i] >= 'A' && name[i] <= 'Z')
            || (name[i] >= 'a' && name[i] <= 'z') || name[i] == '-' || name[i] == '_' || (name[i] == '.' && i > 0);

        firn_text_add_bytes(&text, plain ? name + i : "_", 1);
    }
    firn_text_add(&text, "-%016" PRIx64 ".history", firn_hash_low((const uint8_t *)history->place,
                                                                  strlen(history->place)));
    return FIRN_OK;
}

enum firn_status firn_history_open(const char *folder, const char *path, const struct firn_memory *memory,
                                   struct firn_history **out, struct firn_fault *fault)
{
    struct firn_history *history = firn_memory_get_zeroed(memory, 1, sizeof *history);
    char *place;
    enum firn_status status = FIRN_OK;

    *out = NULL;
    if (history == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    history->memory = memory;
    place = realpath(path, NULL);
    if (place == NULL)
        status = firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, path);
    if (status == FIRN_OK) {
        history->place = memory->get(memory->self, strlen(place) + 1);
        status = history->place == NULL ? FIRN_NO_MEMORY : FIRN_OK;
    }
    if (status == FIRN_OK)
        strcpy(history->place, place);
    free(place);
    if (status == FIRN_OK && folder != NULL)
        status = name_file(history, folder);
    if (status == FIRN_OK && folder != NULL)
        status = read_file(history);
    if (status != FIRN_OK) {
        firn_history_close(history);
        return status == FIRN_NO_MEMORY ? firn_fault_tell(fault, status, 0, 0, path) : status;
    }
    *out = history;
    return FIRN_OK;
}

void firn_history_close(struct firn_history *history)
{
    if (history == NULL)
        return;
    history->memory->put(history->memory->self, history->file);
    history->memory->put(history->memory->self, history->place);
    history->memory->put(history->memory->self, history->entries);
    history->memory->put(history->memory->self, history);
}

static bool is_new(int descriptor)
{
    return lseek(descriptor, 0, SEEK_END) == 0;
}

static enum firn_status write_first_line(const struct firn_history *history, int descriptor, struct firn_fault *fault)
{
    char line[PATH_BYTES_MAX + sizeof first_word + 2];
    struct firn_text text;

    firn_text_start(&text, line, sizeof line - 1);
    firn_text_add(&text, "%s", first_word);
    for (const char *at = history->place; *at != '\0'; at++)
        if (*at == '\n' || *at == '\r' || *at == '%')
            firn_text_add(&text, "%%%02X", (unsigned)*at);
        else
            firn_text_add_bytes(&text, at, 1);
    firn_text_add(&text, "\n");
    return firn_append_line(descriptor, history->file, line, text.used, fault);
}

enum firn_status firn_history_add(struct firn_history *history, const struct firn_history_entry *entry,
                                  const struct firn_core *core, struct firn_fault *fault)
{
    char line[LINE_ROOM];
    struct firn_text text;
    enum firn_status status;
    int descriptor;

    status = take(history, entry, core);
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, history->place);
    if (history->file == NULL)
        return FIRN_OK;
    firn_text_start(&text, line, sizeof line);
    write_entry(entry, core, &text);
    status = firn_append_open(history->file, &descriptor, fault);
    if (status != FIRN_OK)
        return status;
    if (is_new(descriptor))
        status = write_first_line(history, descriptor, fault);
    if (status == FIRN_OK)
        status = firn_append_line(descriptor, history->file, line, text.used, fault);
    close(descriptor);
    return status;
}

/* ---- asking ---- */

const struct firn_history_entry *firn_history_open_turn(const struct firn_history *history, const uint8_t id[8],
                                                        uint64_t blocks)
{
    const struct firn_history_entry *newest;

    if (history->count == 0)
        return NULL;
    newest = &history->entries[history->count - 1];
    return !newest->done && newest->blocks == blocks && memcmp(newest->id, id, sizeof newest->id) == 0 ? newest : NULL;
}

int64_t firn_history_last_done(const struct firn_history *history)
{
    for (size_t i = history->count; i > 0; i--)
        if (history->entries[i - 1].done)
            return history->entries[i - 1].at;
    return 0;
}

void firn_history_count(struct firn_history_entry *entry, const struct firn_scrub_report *report,
                        const struct firn_core *core, bool repaired)
{
    entry->file_bytes = report->file_bytes + report->extended_bytes;
    entry->reached = report->reached;
    entry->mended += report->mended;
    entry->mended_bits += report->mended_bits;
    entry->rebuilt += report->rebuilt;
    entry->lost += report->lost;
    entry->unreadable += report->unreadable;
    entry->written += report->written;
    entry->title_damaged = report->title == FIRN_SCRUB_TITLE_DAMAGED || report->title == FIRN_SCRUB_TITLE_HEALED;
    entry->end_missing = entry->done && !report->end_known;      /* only the end can tell */
    /* in a part that goes on the core has begun with what earlier parts have left as lost */
    entry->left = repaired ? core->places_lost : entry->left + core->places - entry->places;
    entry->places = core->places;
}

/*
 * Damage that was left where it was is found again, and counts once. What the parts of a scrub that was never finished
 * have found counts with the next one that was.
 */
size_t firn_history_intervals(const struct firn_history *history,
                              struct firn_trend_interval intervals[FIRN_HISTORY_MAX])
{
    const struct firn_history_entry *before = NULL;
    uint64_t left = 0, waiting = 0;
    size_t count = 0;

    for (size_t i = 0; i < history->count; i++) {
        const struct firn_history_entry *entry = &history->entries[i];
        uint64_t fresh = entry->places > left ? entry->places - left : 0;

        if (!same_container(entry, &history->entries[history->count - 1]))
            continue;
        left = entry->left;
        if (!entry->done) {
            waiting += fresh;
            continue;
        }
        if (before != NULL)
            intervals[count++] = (struct firn_trend_interval){ (double)(entry->at - before->at), fresh + waiting };
        before = entry;
        waiting = 0;
    }
    return count;
}

struct firn_trend firn_history_trend(const struct firn_history *history)
{
    struct firn_trend_interval intervals[FIRN_HISTORY_MAX];

    return firn_trend_judge(intervals, firn_history_intervals(history, intervals));
}
