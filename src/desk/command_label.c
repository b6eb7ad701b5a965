/* desk/command_label.c - the "label" command: a shelf-mark with its check character; one that was typed, checked */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/commands.h"

#include "container/title_value.h"
#include "desk/label_page.h"
#include "desk/opening.h"
#include "desk/trouble.h"

#include <inttypes.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

enum option { CONTAINER, ACCESSION, TITLE, PART, DATE, SVG, REPLACE, PLAIN, SYSTEM, FOLD, ALL };

static const struct firn_args_option options[] = {
    [CONTAINER] = { "container", '\0', "FILE", "new: take accession, title, date, identity from this container" },
    [ACCESSION] = { "accession", '\0', "TEXT", "new: accession number; also the mark, if none is given" },
    [TITLE] = { "title", '\0', "TEXT", "new: title of the collection" },
    [PART] = { "part", '\0', "N/OF", "new: which medium of how many, such as 2/5" },
    [DATE] = { "date", '\0', "DATE", "new: YYYY-MM-DD (default: when it was packed, else today)" },
    [SVG] = { "svg", '\0', "FILE", "new: a label to print, with bars; - is standard output" },
    [REPLACE] = { "replace", '\0', NULL, "new: FILE of --svg may be overwritten" },
    [PLAIN] = { "plain", '\0', NULL, "new: print the mark and nothing else" },
    [SYSTEM] = { "system", '\0', "WORD", "37-2 (default), 37,36 (no *), 11-2 (digits only)" },
    [FOLD] = { "fold", '\0', NULL, "take letter O for 0 and letter I for 1" },
    [ALL] = { "all", '\0', NULL, "check: tell every slip, not only the likeliest" },
};

/* All that one run needs. */
struct labelling {
    const struct firn_args *args;
    struct firn_view *view;
    struct firn_label_rules rules;
    struct firn_label_page page;
    char accession[FIRN_TITLE_VALUE_ROOM], title[FIRN_TITLE_VALUE_ROOM], date[FIRN_TITLE_VALUE_ROOM], part[64];
    uint64_t part_number;
};

/* --- words --- */

static int read_rules(struct labelling *l)
{
    static const struct { const char *word; enum firn_label_system system; } words[] = {
        { "37-2", FIRN_LABEL_MOD_37_2 }, { "37,36", FIRN_LABEL_MOD_37_36 }, { "11-2", FIRN_LABEL_MOD_11_2 }
    };
    const char *word = l->args->values[SYSTEM];

    l->rules = (struct firn_label_rules){ FIRN_LABEL_MOD_37_2, l->args->given[FOLD] };
    if (word == NULL)
        return FIRN_EXIT_SOUND;
    for (size_t i = 0; i < sizeof words / sizeof words[0]; i++)
        if (strcmp(word, words[i].word) == 0) {
            l->rules.system = words[i].system;
            return FIRN_EXIT_SOUND;
        }
    return firn_trouble_usage(l->view, word, "is no system of check characters: 37-2, 37,36 or 11-2");
}

/* What is printed on a label is text: no control characters, UTF-8, of a length that the title page would take too. */
static int read_text(const struct labelling *l, enum option option, char words[FIRN_TITLE_VALUE_ROOM])
{
    const char *given = l->args->values[option];
    size_t left = given == NULL ? 0 : strlen(given);

    if (given == NULL)
        return FIRN_EXIT_SOUND;
    if (left >= FIRN_TITLE_VALUE_ROOM)
        return firn_trouble_usage(l->view, options[option].name, "is longer than 519 bytes");
    memcpy(words, given, left + 1);
    while (left > 0) {
        size_t step = firn_text_utf8(given, left);

        if (step == 0 || (uint8_t)*given < 0x20 || *given == 0x7F)
            return firn_trouble_usage(l->view, options[option].name, "has a control character, or is no UTF-8");
        given += step;
        left -= step;
    }
    return FIRN_EXIT_SOUND;
}

static bool is_day(const char *words)
{
    static const unsigned days[] = { 31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31 };
    unsigned year, month, day, leap;

    if (strlen(words) != 10 || strspn(words, "0123456789") != 4 || words[4] != '-' ||
        strspn(words + 5, "0123456789") != 2 || words[7] != '-' || strspn(words + 8, "0123456789") != 2)
        return false;
    year = (unsigned)strtoul(words, NULL, 10);
    month = (unsigned)strtoul(words + 5, NULL, 10);
    day = (unsigned)strtoul(words + 8, NULL, 10);
    if (month < 1 || month > 12)
        return false;
    leap = month == 2 && year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    return day >= 1 && day <= days[month - 1] + leap;
}

/* Given, else the container's, else today; with SOURCE_DATE_EPOCH today is that day. */
static int read_date(struct labelling *l)
{
    const char *given = l->args->values[DATE], *words = getenv("SOURCE_DATE_EPOCH");
    uint64_t seconds = (uint64_t)time(NULL);
    struct tm utc;
    time_t when;

    if (given != NULL && !is_day(given))
        return firn_trouble_usage(l->view, given, "is no day such as 2026-05-07");
    if (given != NULL)
        memcpy(l->date, given, 11);
    if (l->date[0] != '\0')
        return FIRN_EXIT_SOUND;
    if (words != NULL && *words != '\0' &&
        (firn_text_parse_count(words, &seconds) != FIRN_OK || seconds > INT32_MAX * UINT64_C(100)))
        return firn_trouble_usage(l->view, words, "is no number of seconds in SOURCE_DATE_EPOCH");
    when = (time_t)seconds;
    if (gmtime_r(&when, &utc) != NULL)
        strftime(l->date, sizeof l->date, "%Y-%m-%d", &utc);
    return FIRN_EXIT_SOUND;
}

static int read_part(struct labelling *l)
{
    const char *given = l->args->values[PART], *slash = given == NULL ? NULL : strchr(given, '/');
    char number[8] = "";
    uint64_t of;

    if (given == NULL)
        return FIRN_EXIT_SOUND;
    if (slash != NULL && (size_t)(slash - given) < sizeof number)
        memcpy(number, given, (size_t)(slash - given));
    if (slash == NULL || firn_text_parse_count(number, &l->part_number) != FIRN_OK ||
        firn_text_parse_count(slash + 1, &of) != FIRN_OK || l->part_number < 1 || of > 999999 || l->part_number > of)
        return firn_trouble_usage(l->view, given, "is no part such as 2/5");
    snprintf(l->part, sizeof l->part, "%" PRIu64 " of %" PRIu64, l->part_number, of);
    return FIRN_EXIT_SOUND;
}

/* --- the container --- */

/* Eight bytes in fours of hexadecimal digits, with a check character of their own: MOD 37-2 has all of these digits. */
static void put_fours(const uint8_t bytes[8], char label[FIRN_LABEL_MARK_ROOM])
{
    static const struct firn_label_rules rules = { FIRN_LABEL_MOD_37_2, false };
    char words[32];
    struct firn_text text;

    firn_text_start(&text, words, sizeof words);
    for (unsigned i = 0; i < 8; i += 2) {
        firn_text_add(&text, "%s", i > 0 ? " " : "");
        firn_text_add_hex(&text, bytes + i, 2);
    }
    if (firn_label_make(&rules, words, label, NULL) != FIRN_OK)
        label[0] = '\0';
}

static int read_container(struct labelling *l)
{
    const char *path = l->args->values[CONTAINER];
    const struct firn_reader_layout *layout;
    struct firn_opening opening;
    uint8_t page[FIRN_TITLE_PAGE_BYTES];
    int exit;

    if (path == NULL)
        return FIRN_EXIT_SOUND;
    exit = firn_opening_make(&opening, path, l->args, l->view);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    layout = firn_reader_layout_of(opening.reader);
    exit = firn_opening_remark(l->view, path, layout);
    firn_reader_title_page(opening.reader, page);      /* page 0 if the protected copy is lost: remarked upon above */
    firn_title_value_read(page, "accession", l->accession);
    firn_title_value_read(page, "title", l->title);
    firn_title_value_read(page, "packed on", l->date);
    l->date[10] = '\0';                                /* the day without the hour */
    put_fours(layout->id, l->page.id);
    if (layout->colophon_found)
        put_fours(layout->catalogue_sha256, l->page.digest);
    return firn_opening_leave(&opening, exit);
}

/* --- new --- */

static int refuse(const struct labelling *l, const char *mark, const struct firn_fault *fault)
{
    return firn_trouble_usage(l->view, mark, fault->what);
}

/* The mark as told, else the accession number; parts of one accession get marks of their own. */
static int make_mark(struct labelling *l)
{
    const char *mark = l->args->operand_count > 1 ? l->args->operands[1] : l->accession;
    char words[FIRN_TITLE_VALUE_ROOM + 32];
    struct firn_fault fault = { 0 };

    if (*mark == '\0')
        return firn_trouble_usage(l->view, "MARK", "is missing: give a shelf-mark, or --accession, or --container");
    snprintf(words, sizeof words, "%s", mark);
    if (l->part_number > 0 && l->args->operand_count == 1)
        snprintf(words, sizeof words, "%s.%" PRIu64, mark, l->part_number);
    if (firn_label_make(&l->rules, words, l->page.mark, &fault) != FIRN_OK)
        return refuse(l, words, &fault);
    if (l->rules.fold && strchr("OI", l->page.mark[strlen(l->page.mark) - 1]) != NULL)
        firn_view_note(l->view, "letter", l->page.mark, "its check character is a letter that looks like a digit; "
                                                        "choose another mark if you can");
    return FIRN_EXIT_SOUND;
}

static int show_new(struct labelling *l)
{
    const char *svg = l->args->values[SVG];

    l->page.system = l->rules.system;
    l->page.folded = l->rules.fold && strpbrk(l->page.mark, "OI") == NULL;
    l->page.accession = l->accession;
    l->page.title = l->title;
    l->page.part = l->part;
    l->page.date = l->date;
    if (svg != NULL && strcmp(svg, "-") == 0)
        firn_view_yield_output(l->view);
    if (l->view->json)
        firn_label_page_json(&l->page, l->view);
    else if (l->args->given[PLAIN])
        fprintf(l->view->out, "%s\n", l->page.mark);
    else if (!l->view->quiet)
        firn_label_page_text(&l->page, l->view->out);
    return svg != NULL ? firn_label_page_draw(&l->page, l->view, svg, l->args->given[REPLACE]) : FIRN_EXIT_SOUND;
}

static int make_new(struct labelling *l)
{
    int found, exit;

    if (l->args->operand_count > 2)
        return firn_trouble_usage(l->view, l->args->operands[2], "is a mark too many; quote a mark with blanks in it");
    found = read_container(l);
    if (found >= FIRN_EXIT_USAGE)
        return found;
    exit = read_text(l, ACCESSION, l->accession);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_text(l, TITLE, l->title);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_part(l);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_date(l);
    if (exit == FIRN_EXIT_SOUND)
        exit = make_mark(l);
    if (exit == FIRN_EXIT_SOUND)
        exit = show_new(l);
    return exit == FIRN_EXIT_SOUND ? found : exit;
}

/* --- check --- */

enum { LIKELIEST = 6 };

struct slips {
    struct firn_view *view;
    bool all;
    unsigned told, more;
};

static const char *kind_name(enum firn_label_slip_kind kind)
{
    switch (kind) {
    case FIRN_LABEL_SLIP_NEIGHBOURS: return "neighbours";
    case FIRN_LABEL_SLIP_LOOKALIKE:  return "lookalike";
    case FIRN_LABEL_SLIP_JUMP:       return "jump";
    case FIRN_LABEL_SLIP_SINGLE:     return "single";
    case FIRN_LABEL_SLIP_FAR:        return "far";
    }
    return "unknown";
}

/* "4 and 5 swapped", "I for 1": what the hand did, or the eye. */
static void add_slip(struct firn_text *text, const struct firn_label_slip *slip)
{
    if (slip->first != slip->second)
        firn_text_add(text, "%c and %c swapped%s", slip->wanted, slip->found,
                      slip->kind == FIRN_LABEL_SLIP_NEIGHBOURS ? "" : ", apart");
    else
        firn_text_add(text, "%c for %c%s", slip->found, slip->wanted,
                      slip->kind == FIRN_LABEL_SLIP_LOOKALIKE ? ", which looks alike" : "");
}

static bool tell_slip(void *self, const struct firn_label_slip *slip)
{
    struct slips *s = self;
    char words[80];
    struct firn_text text;

    if (s->told >= LIKELIEST && !s->all) {
        s->more++;
        return true;
    }
    s->told++;
    firn_text_start(&text, words, sizeof words);
    add_slip(&text, slip);
    if (!s->view->json) {
        fprintf(s->view->out, "  %-*s %s\n", FIRN_LABEL_MARK_MAX / 2, slip->label, words);
        return true;
    }
    firn_view_begin(s->view, "slip", NULL);
    firn_view_words(s->view, "kind", NULL, kind_name(slip->kind));
    firn_view_count(s->view, "first", NULL, slip->first);
    firn_view_count(s->view, "second", NULL, slip->second);
    firn_view_words(s->view, "words", NULL, words);
    firn_view_words(s->view, "mark", NULL, slip->label);
    firn_view_end(s->view);
    return true;
}

static void show_verdict(struct labelling *l, const struct firn_label_verdict *verdict, const char *typed)
{
    const char check[2] = { verdict->check, '\0' }, expected[2] = { verdict->expected, '\0' };

    if (l->view->json) {
        firn_view_begin(l->view, "check", NULL);
        firn_view_words(l->view, "typed", NULL, typed);
        firn_view_words(l->view, "mark", NULL, verdict->label);
        firn_view_switch(l->view, "valid", verdict->valid);
        firn_view_words(l->view, "check", NULL, check);
        firn_view_words(l->view, "expected", NULL, expected);
        firn_view_words(l->view, "system", NULL, firn_label_system_name(l->rules.system));
        firn_view_end(l->view);
    } else if (verdict->valid && !l->view->quiet) {
        fprintf(l->view->out, "%s: right\n", verdict->label);
    } else if (!verdict->valid) {
        fprintf(l->view->out, "%s: WRONG: its check character is %s, the rest of it asks for %s\n", verdict->label,
                check, expected);
    }
}

static int check_one(struct labelling *l, const char *typed)
{
    struct slips slips = { .view = l->view, .all = l->args->given[ALL] };
    struct firn_label_verdict verdict;
    struct firn_fault fault = { 0 };

    if (firn_label_check(&l->rules, typed, &verdict, &fault) != FIRN_OK)
        return refuse(l, typed, &fault);
    show_verdict(l, &verdict, typed);
    if (verdict.valid)
        return FIRN_EXIT_SOUND;
    if (!l->view->json && !l->view->quiet)
        fputs("  if it was one slip, likeliest first:\n", l->view->out);
    if (l->view->json || !l->view->quiet)
        firn_label_slips(&l->rules, typed, tell_slip, &slips, &fault);
    if (slips.more > 0 && !l->view->json)
        fprintf(l->view->out, "  and %u more (--all); compare with your list of marks first\n", slips.more);
    return FIRN_EXIT_BAD_DATA;
}

static int check(struct labelling *l)
{
    int worst = FIRN_EXIT_SOUND;

    if (l->args->operand_count < 2)
        return firn_trouble_usage(l->view, "MARK", "is missing: what was typed?");
    for (size_t i = 1; i < l->args->operand_count; i++) {
        int exit = check_one(l, l->args->operands[i]);

        worst = exit > worst ? exit : worst;
    }
    return worst;
}

/* Options of the one are no options of the other. */
static int refuse_foreign(const struct labelling *l, bool is_new)
{
    for (int option = CONTAINER; option <= ALL; option++)
        if (l->args->given[option] && option != SYSTEM && option != FOLD && (option == ALL) == is_new)
            return firn_trouble_usage(l->view, options[option].name, is_new ? "goes with 'label check'"
                                                                            : "goes with 'label new'");
    return FIRN_EXIT_SOUND;
}

static int run(const struct firn_args *args, struct firn_view *view)
{
    struct labelling l = { .args = args, .view = view };
    const char *what = args->operand_count > 0 ? args->operands[0] : "";
    bool is_new = strcmp(what, "new") == 0;
    int exit;

    if (!is_new && strcmp(what, "check") != 0)
        return firn_trouble_usage(view, *what == '\0' ? "WORD" : what, "say 'label new' or 'label check'");
    exit = refuse_foreign(&l, is_new);
    if (exit == FIRN_EXIT_SOUND)
        exit = read_rules(&l);
    if (exit != FIRN_EXIT_SOUND)
        return exit;
    return is_new ? make_new(&l) : check(&l);
}

const struct firn_command firn_command_label = {
    .name = "label",
    .summary = "a shelf-mark with a check character; check one that was typed",
    .usage = "new [MARK] [options]\n"
             "       firn label check MARK... [options]",
    .about = "The check character (ISO/IEC 7064) gives away what hands do to marks. MOD 37-2 sees\n"
             "every single wrong character and every swap up to 35 places apart. MOD 37,36 does\n"
             "without * and lets 0.16 % of swapped neighbours pass. MOD 11-2 is for digits: swaps\n"
             "up to 9 apart. Blanks and - . / : _ do not count. Which marks you give is for your\n"
             "institution's rules to say. check exits 65 when a mark is wrong.\n",
    .example = "  firn label new 'MQ 1931/7' --container quay-1931.firn --svg label.svg\n"
               "  firn label check 'MQ 1913/7-2'\n",
    .options = options, .option_count = sizeof options / sizeof options[0], .run = run
};
