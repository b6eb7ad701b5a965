/* tests/spec/tiny_sheets.c - writes a container with the carried texts and sheets of four data blocks: tiny_sheets F */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/writer.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { ROOM = 4 << 20, PAX_BYTES = 512 };

/* A ustar header of a file of `bytes` bytes, as POSIX has it. */
static void make_header(uint8_t header[PAX_BYTES], const char *name, unsigned bytes)
{
    unsigned sum = 0;

    memset(header, 0, PAX_BYTES);
    snprintf((char *)header, 100, "%s", name);
    memcpy(header + 100, "0000644", 8);
    memcpy(header + 108, "0000000", 8);
    memcpy(header + 116, "0000000", 8);
    snprintf((char *)header + 124, 12, "%011o", bytes);
    memcpy(header + 136, "00000000000", 12);
    memset(header + 148, ' ', 8);
    header[156] = '0';
    memcpy(header + 257, "ustar\00000", 8);
    for (unsigned i = 0; i < PAX_BYTES; i++)
        sum += header[i];
    snprintf((char *)header + 148, 7, "%06o", sum);
}

static enum firn_status write_all(const struct firn_writer_options *options)
{
    static const char content[] = "Marrow Quay in sheets of four blocks.\n";
    uint8_t header[PAX_BYTES];
    struct firn_item item = { .pax = header, .pax_bytes = PAX_BYTES, .has_content = true, .bytes = sizeof content - 1 };
    struct firn_item_extent whole = { 0, sizeof content - 1 };
    struct firn_writer_totals totals;
    struct firn_writer *writer;
    struct firn_fault fault;
    enum firn_status status = firn_writer_make(options, &fault, &writer);

    if (status != FIRN_OK)
        return status;
    make_header(header, "quay.txt", sizeof content - 1);
    item.extents = &whole;
    item.extent_count = 1;
    status = firn_writer_item(writer, &item);
    if (status == FIRN_OK)
        status = firn_writer_content(writer, (const uint8_t *)content, sizeof content - 1);
    if (status == FIRN_OK)
        status = firn_writer_end(writer, NULL);
    if (status == FIRN_OK)
        status = firn_writer_finish(writer, &totals);
    firn_writer_free(writer);
    return status;
}

int main(int argc, char **argv)
{
    struct firn_store_buffer kept = { .bytes = malloc(ROOM), .capacity = ROOM };
    struct firn_store_buffer spooled = { .bytes = malloc(ROOM), .capacity = ROOM };
    struct firn_store store, spool;
    struct firn_writer_options options = {
        .store = &store, .spool = &spool, .memory = firn_memory_system(), .threads = 1, .geometry = { 4, 4, 1 },
        .effort = FIRN_SEGMENT_EFFORT_NORMAL, .carry_reader = true
    };
    FILE *file = argc == 2 ? fopen(argv[1], "wb") : NULL;
    bool good = file != NULL && kept.bytes != NULL && spooled.bytes != NULL;

    if (good) {
        firn_store_memory(&kept, &store);
        firn_store_memory(&spooled, &spool);
        good = write_all(&options) == FIRN_OK && fwrite(kept.bytes, 1, kept.used, file) == kept.used;
        store.close(store.self);
        spool.close(spool.self);
    }
    if (file != NULL && fclose(file) != 0)
        good = false;
    free(kept.bytes);
    free(spooled.bytes);
    return good ? EXIT_SUCCESS : EXIT_FAILURE;
}
