/* examples/api/pack_folder.c - packs paths into a container that appears when it is whole and was read back */
/* SPDX-License-Identifier: BSD-2-Clause */
#include <firn/intake.h>
#include <firn/readback.h>

#include <inttypes.h>
#include <stdio.h>
#include <time.h>

static void tell(void *self, const struct firn_intake_finding *finding)
{
    (void)self;
    fprintf(stderr, "pack_folder: %s: finding %d %s\n", finding->path, (int)finding->kind, finding->detail);
}

/* Sixteen bytes that no other container has. */
static enum firn_status draw_nonce(uint8_t nonce[FIRN_WRITER_NONCE_BYTES])
{
    FILE *file = fopen("/dev/urandom", "rb");
    size_t got = file != NULL ? fread(nonce, 1, FIRN_WRITER_NONCE_BYTES, file) : 0;

    if (file != NULL)
        fclose(file);
    return got == FIRN_WRITER_NONCE_BYTES ? FIRN_OK : FIRN_IO;
}

/* Everything into the store, then every block of it read again from the medium. */
static enum firn_status pack(struct firn_writer_options *writing, const char *const *paths, size_t count,
                             struct firn_writer_totals *totals, struct firn_fault *fault)
{
    const struct firn_intake_options intake = { .memory = writing->memory, .finding = tell };
    const struct firn_reader_options reading = { .store = writing->store, .memory = writing->memory, .threads = 2 };
    struct firn_intake_report report;
    struct firn_writer *writer;
    enum firn_status status = firn_writer_make(writing, fault, &writer);

    if (status != FIRN_OK)
        return status;
    status = firn_intake_paths(writer, paths, count, &intake, fault, &report);
    if (status == FIRN_OK && firn_intake_left_out(&report) > 0)
        status = FIRN_NO_INPUT;      /* this program takes all or nothing */
    if (status == FIRN_OK)
        status = firn_writer_finish(writer, totals);
    firn_writer_free(writer);
    return status == FIRN_OK ? firn_readback(&reading, totals, NULL, NULL, fault) : status;
}

int main(int argc, char **argv)
{
    struct firn_store spool;
    struct firn_writer_options writing = {
        .spool = &spool, .memory = firn_memory_system(), .threads = 2, .effort = FIRN_SEGMENT_EFFORT_NORMAL,
        .title = { .title = "Packed by an example", .date = (int64_t)time(NULL) }, .carry_reader = true
    };
    struct firn_store_stage *stage = NULL;
    struct firn_writer_totals totals;
    struct firn_fault fault = { 0 };
    enum firn_status status;

    if (argc < 3)
        return fputs("usage: pack_folder CONTAINER PATH...\n", stderr) < 0 ? 74 : 64;
    status = firn_sheet_geometry_for(100.0 / 7, UINT64_C(128) << 20, &writing.geometry);
    if (status == FIRN_OK)
        status = draw_nonce(writing.nonce);
    if (status == FIRN_OK)
        status = firn_store_stage_open(argv[1], false, writing.memory, &stage, &fault);
    if (status == FIRN_OK && (status = firn_store_temporary(NULL, writing.memory, &spool, &fault)) == FIRN_OK) {
        writing.store = firn_store_stage_store(stage);
        status = pack(&writing, (const char *const *)argv + 2, (size_t)argc - 2, &totals, &fault);
        spool.close(spool.self);
    }
    if (status == FIRN_OK)
        status = firn_store_stage_keep(stage, &fault);
    firn_store_stage_close(stage);
    if (status == FIRN_OK)
        return printf("%" PRIu64 " items in %" PRIu64 " blocks\n", totals.items, totals.blocks) < 0 ? 74 : 0;
    fprintf(stderr, "pack_folder: %s: %s %s\n", argv[1], firn_status_text(status), fault.what);
    return 73;
}
