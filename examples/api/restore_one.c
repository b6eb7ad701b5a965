/* examples/api/restore_one.c - gives one file of a container to standard output, whole or not at all */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/about.h>
#include <firn/reader.h>

#include <stdio.h>
#include <string.h>

struct search { const char *name; struct firn_about *about; uint64_t written; bool found, whole; };

static bool is_it(void *self, const struct firn_item *item)
{
    struct search *search = self;
    struct firn_about_facts facts;

    return item->has_content && !search->whole && firn_about_read(search->about, item, &facts) == FIRN_OK &&
           strcmp(facts.path, search->name) == 0;
}

/* With foresight the reader has been through the file before it calls this, so a damaged one writes nothing. */
static enum firn_status begin(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes)
{
    (void)item;
    ((struct search *)self)->found = true;
    return foreseen_lost_bytes == 0 ? FIRN_OK : FIRN_LOST;
}

/* A pipe has no holes: those of a sparse file become zeros. */
static bool zeros_up_to(struct search *search, uint64_t at)
{
    while (search->written < at && putchar(0) != EOF)
        search->written++;
    return search->written == at;
}

static enum firn_status take(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes, size_t count)
{
    struct search *search = self;

    (void)item;
    if (!zeros_up_to(search, at) || fwrite(bytes, 1, count, stdout) != count)
        return FIRN_IO;
    search->written += count;
    return FIRN_OK;
}

static enum firn_status gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                            enum firn_reader_loss why, uint64_t container_at)
{
    (void)self, (void)item, (void)at, (void)count, (void)why, (void)container_at;
    return FIRN_LOST;
}

static enum firn_status end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct search *search = self;

    search->whole = outcome->lost_bytes == 0 && outcome->sum_right;
    if (!search->whole)
        return FIRN_MISMATCH;
    return zeros_up_to(search, item->bytes) && fflush(stdout) == 0 ? FIRN_OK : FIRN_IO;
}

int main(int argc, char **argv)
{
    const struct firn_memory *memory = firn_memory_system();
    struct search search = { .name = argc == 3 ? argv[2] : NULL };
    const struct firn_reader_visitor visitor = { .self = &search, .wants = is_it, .begin = begin, .bytes = take,
                                                 .gap = gap, .end = end, .foresight = true };
    struct firn_store store;
    const struct firn_reader_options options = { .store = &store, .memory = memory, .threads = 2 };
    struct firn_reader *reader = NULL;
    struct firn_reader_walk_report report;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (argc != 3)
        return fputs("usage: restore_one CONTAINER NAME >FILE\n", stderr) < 0 ? 74 : 64;
    status = firn_about_make(memory, &search.about);
    if (status == FIRN_OK && (status = firn_store_open(argv[1], FIRN_STORE_READ, memory, &store, &fault)) == FIRN_OK) {
        if ((status = firn_reader_open(&options, &fault, &reader)) == FIRN_OK)
            status = firn_reader_walk(reader, &visitor, &fault, &report);
        firn_reader_free(reader);
        store.close(store.self);
    }
    firn_about_free(search.about);
    if (status == FIRN_OK && search.whole)
        return 0;
    fprintf(stderr, "restore_one: %s: %s\n", argv[2], status != FIRN_OK ? firn_status_text(status) : "is not in it");
    return search.found ? 2 : status == FIRN_OK ? 66 : 65;
}
