/* transfer/pattern.c - choosing items by name */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/pattern.h"

#include "base/memory.h"
#include "transfer/stored_name.h"

#include <fnmatch.h>
#include <locale.h>

struct word {
    char *text;              /* in stored form */
    size_t bytes;
    unsigned slashes;
    bool shell;              /* has characters that are special to fnmatch */
    bool used;
};

struct firn_pattern {
    const struct firn_memory *memory;
    locale_t utf8;           /* 0 where the system has none: then bytes are letters */
    size_t count;
    struct word words[];
};

static unsigned slashes_in(const char *text)
{
    unsigned slashes = 0;

    for (; *text != '\0'; text++)
        slashes += *text == '/';
    return slashes;
}

static enum firn_status take_word(struct firn_pattern *pattern, const char *given, struct word *word)
{
    char stored[FIRN_STORED_NAME_ROOM];

    if (firn_stored_name_make(given, stored, NULL) != FIRN_OK)
        return FIRN_BAD_ARGUMENT;
    word->bytes = strlen(stored);
    word->text = pattern->memory->get(pattern->memory->self, word->bytes + 1);
    if (word->text == NULL)
        return FIRN_NO_MEMORY;
    memcpy(word->text, stored, word->bytes + 1);
    word->slashes = slashes_in(stored);
    word->shell = strpbrk(stored, "*?[\\") != NULL;
    return FIRN_OK;
}

enum firn_status firn_pattern_make(const char *const *words, size_t count, const struct firn_memory *memory,
                                   struct firn_pattern **out)
{
    struct firn_pattern *pattern;
    enum firn_status status = FIRN_OK;

    *out = NULL;
    if (count > (SIZE_MAX - sizeof *pattern) / sizeof pattern->words[0])
        return FIRN_NO_MEMORY;
    pattern = firn_memory_get_zeroed(memory, 1, sizeof *pattern + count * sizeof pattern->words[0]);
    if (pattern == NULL)
        return FIRN_NO_MEMORY;
    pattern->memory = memory;
    pattern->utf8 = newlocale(LC_CTYPE_MASK, "C.UTF-8", (locale_t)0);
    while (pattern->count < count && status == FIRN_OK) {
        status = take_word(pattern, words[pattern->count], &pattern->words[pattern->count]);
        pattern->count++;
    }
    if (status != FIRN_OK) {
        firn_pattern_free(pattern);
        return status;
    }
    *out = pattern;
    return FIRN_OK;
}

void firn_pattern_free(struct firn_pattern *pattern)
{
    if (pattern == NULL)
        return;
    for (size_t i = 0; i < pattern->count; i++)
        pattern->memory->put(pattern->memory->self, pattern->words[i].text);
    if (pattern->utf8 != (locale_t)0)
        freelocale(pattern->utf8);
    pattern->memory->put(pattern->memory->self, pattern);
}

/*
 * A word with slashes against that many components from the front, which is the name or a folder above it; a word
 * without against each component. name is written to and put right again.
 */
static bool shell_matches(const struct word *word, char *name)
{
    char *part = name, *end = name;
    unsigned slashes = 0;

    for (;;) {
        char kept;
        bool met = false;

        end += strcspn(end, "/");
        kept = *end;
        *end = '\0';
        if (word->slashes == 0)
            met = fnmatch(word->text, part, FNM_PATHNAME) == 0;
        else if (word->slashes == slashes)
            met = fnmatch(word->text, name, FNM_PATHNAME) == 0;
        *end = kept;
        if (met || kept == '\0' || (word->slashes > 0 && slashes == word->slashes))
            return met;
        part = ++end;
        slashes++;
    }
}

bool firn_pattern_match(struct firn_pattern *pattern, const char *name)
{
    char copy[FIRN_STORED_NAME_ROOM];
    size_t bytes = strnlen(name, sizeof copy);
    locale_t before = uselocale(pattern->utf8);
    bool chosen = false;

    if (bytes < sizeof copy)
        memcpy(copy, name, bytes + 1);
    for (size_t i = 0; i < pattern->count; i++) {
        struct word *word = &pattern->words[i];

        if (firn_stored_name_within(name, word->text, word->bytes)
            || (word->shell && bytes < sizeof copy && shell_matches(word, copy))) {
            word->used = true;
            chosen = true;
        }
    }
    (void)uselocale(before);
    return chosen;
}

bool firn_pattern_used(const struct firn_pattern *pattern, size_t index)
{
    return index < pattern->count && pattern->words[index].used;
}
