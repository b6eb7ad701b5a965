/* examples/api/list_items.c - lists what a container holds: type, size, name, and the SHA-256 of each file */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/about.h>
#include <firn/reader.h>

#include <inttypes.h>
#include <stdio.h>

/* A name may hold any byte but NUL; one that could move the cursor of a terminal is shown as a question mark. */
static void put_name(const char *name)
{
    for (; *name != '\0'; name++)
        putchar((unsigned char)*name < 0x20 || *name == 0x7F ? '?' : *name);
}

static enum firn_status show(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes)
{
    struct firn_about_facts facts;
    enum firn_status status = firn_about_read(self, item, &facts);

    (void)foreseen_lost_bytes;      /* nothing is foreseen: content is not asked for */
    if (status != FIRN_OK)
        return status;
    printf("%c %12" PRIu64 " ", facts.type, facts.bytes);
    put_name(facts.path);
    if (facts.link[0] != '\0') {
        fputs(" -> ", stdout);
        put_name(facts.link);
    }
    if (item->summed) {
        putchar(' ');
        for (int i = 0; i < FIRN_ITEM_SHA256_BYTES; i++)
            printf("%02x", item->sha256[i]);
    }
    putchar('\n');
    return FIRN_OK;
}

int main(int argc, char **argv)
{
    const struct firn_memory *memory = firn_memory_system();
    struct firn_store store;
    struct firn_reader_options options = { .store = &store, .memory = memory, .threads = 2 };
    struct firn_reader *reader = NULL;
    struct firn_about *about = NULL;
    struct firn_reader_walk_report report = { 0 };
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (argc != 2) {
        fputs("usage: list_items CONTAINER\n", stderr);
        return 64;
    }
    status = firn_store_open(argv[1], FIRN_STORE_READ, memory, &store, &fault);
    if (status == FIRN_OK) {
        status = firn_reader_open(&options, &fault, &reader);
        if (status == FIRN_OK)
            status = firn_about_make(memory, &about);
        if (status == FIRN_OK) {
            const struct firn_reader_visitor visitor = { .self = about, .begin = show, .digests = true };

            status = firn_reader_walk(reader, &visitor, &fault, &report);
        }
        firn_about_free(about);
        firn_reader_free(reader);
        store.close(store.self);
    }
    if (status != FIRN_OK) {
        fprintf(stderr, "list_items: %s: %s %s\n", argv[1], firn_status_text(status), fault.what);
        return 65;
    }
    if (report.items_unknown > 0 || report.cut_short)
        fprintf(stderr, "list_items: %s: this is not all; what else there was is lost\n", argv[1]);
    return report.items_unknown > 0 || report.cut_short ? 2 : 0;
}
