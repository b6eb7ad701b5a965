/* examples/api/pack_memory.c - a year of tide readings, made in memory, into a container: no file is read for it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/readback.h>

#include <math.h>
#include <stdio.h>
#include <string.h>

/* A ustar header as POSIX.1-2001 (pax) has it: numbers in octal; the sum is taken with blanks in its own place. */
static void make_header(uint8_t header[512], const char *name, size_t bytes)
{
    char *h = memset(header, 0, 512);
    unsigned sum = 0;

    snprintf(h, 100, "%s", name);
    snprintf(h + 100, 8, "%07o", 0444u);             /* mode, then owner and group */
    memcpy(h + 108, "0000000\0" "0000000", 16);
    snprintf(h + 124, 12, "%011zo", bytes);
    snprintf(h + 136, 12, "%011o", 1000000000u);     /* changed last at 2001-09-09T01:46:40Z */
    memcpy(h + 148, "        0", 9);                 /* the sum, and the type of a regular file */
    memcpy(h + 257, "ustar\0" "00", 8);
    for (int i = 0; i < 512; i++)
        sum += header[i];
    snprintf(h + 148, 8, "%06o", sum);
}

/* One item, whole; then all that was written is read back. The nonce makes the id: two runs are one container here. */
static enum firn_status pack(const char *text, size_t bytes, struct firn_store *store, struct firn_store *spool,
                             struct firn_fault *fault)
{
    struct firn_writer_options options = {
        .store = store, .spool = spool, .memory = firn_memory_system(), .threads = 1, .nonce = { 'M', 'Q' },
        .effort = FIRN_SEGMENT_EFFORT_NORMAL, .title = { .title = "Tide gauge, Marrow Quay" }
    };
    const struct firn_reader_options reading = { .store = store, .memory = options.memory, .threads = 1 };
    uint8_t header[512];
    const struct firn_item_extent all = { .at = 0, .bytes = bytes };
    const struct firn_item item = { .pax = header, .pax_bytes = sizeof header, .has_content = true, .bytes = bytes,
                                    .extents = &all, .extent_count = 1 };
    struct firn_writer_totals totals;
    struct firn_writer *writer = NULL;
    enum firn_status status = firn_sheet_geometry_for(50, UINT64_C(1) << 20, &options.geometry);

    make_header(header, "tide-gauge.csv", bytes);
    if (status == FIRN_OK && (status = firn_writer_make(&options, fault, &writer)) == FIRN_OK &&
        (status = firn_writer_item(writer, &item)) == FIRN_OK &&
        (status = firn_writer_content(writer, (const uint8_t *)text, bytes)) == FIRN_OK &&
        (status = firn_writer_end(writer, NULL)) == FIRN_OK)
        status = firn_writer_finish(writer, &totals);
    firn_writer_free(writer);
    return status == FIRN_OK ? firn_readback(&reading, &totals, NULL, NULL, fault) : status;
}

int main(void)
{
    static uint8_t container[1 << 20], catalogue[1 << 16];
    static char text[1 << 18];
    struct firn_store_buffer buffers[2] = { { container, sizeof container, 0 }, { catalogue, sizeof catalogue, 0 } };
    struct firn_store store, spool;
    struct firn_fault fault = { 0 };
    enum firn_status status;
    size_t used = 0;

    for (int hour = 0; hour < 8760; hour++)          /* the moon brings high water back every 12.42 hours */
        used += (size_t)snprintf(text + used, sizeof text - used, "%d;%.2f\n", hour,
                                 3 + 2 * sin(hour / 12.42 * 6.2832));
    firn_store_memory(&buffers[0], &store);
    firn_store_memory(&buffers[1], &spool);
    status = pack(text, used, &store, &spool, &fault);
    if (status == FIRN_OK && (fwrite(container, 1, buffers[0].used, stdout) != buffers[0].used || fflush(stdout) != 0))
        status = FIRN_IO;
    store.close(store.self);
    spool.close(spool.self);
    if (status != FIRN_OK)
        fprintf(stderr, "pack_memory: %s %s\n", firn_status_text(status), fault.what);
    return status == FIRN_OK ? 0 : 74;
}
