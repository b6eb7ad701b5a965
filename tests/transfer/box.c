/* tests/transfer/box.c - a real container in a temporary file */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/box.h"

#include "firn/about.h"

#include <fcntl.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

static void need(bool fine, const char *what)
{
    if (!fine) {
        perror(what);
        abort();
    }
}

static void note(char *notes, const char *format, ...)
{
    size_t used = strlen(notes);
    va_list arguments;

    va_start(arguments, format);
    (void)vsnprintf(notes + used, BOX_NOTES_ROOM - used, format, arguments);
    va_end(arguments);
}

static void note_intake(void *self, const struct firn_intake_finding *finding)
{
    static const char *const kinds[FIRN_INTAKE_KINDS] = {
        "unreadable", "vanished", "changed", "unsupported", "duplicate", "encrypted", "damaged",
        "partial", "renamed", "unlinked", "skipped",
    };

    note(((struct box *)self)->notes, "%s %s\n", kinds[finding->kind], finding->path);
}

static void note_item(void *self, const struct firn_intake_item *item)
{
    struct box *box = self;

    note(box->items, "%s%s%s\n", item->name, item->link == NULL ? "" : " -> ", item->link == NULL ? "" : item->link);
    if (item->sha256 != NULL)
        memcpy(box->sha256, item->sha256, sizeof box->sha256);
}

static void note_outlet(void *self, const struct firn_outlet_finding *finding)
{
    static const char *const kinds[FIRN_OUTLET_KINDS] = {
        "exists", "refused", "lost", "mismatch", "link", "failed", "metadata",
    };

    note(((struct box *)self)->notes, "%s %s%s\n", kinds[finding->kind], finding->path, finding->kept ? " kept" : "");
}

struct box *box_make(const struct firn_memory *memory)
{
    struct box *box = calloc(1, sizeof *box);
    struct firn_writer_options options = { .threads = 1, .effort = FIRN_SEGMENT_EFFORT_QUICK };

    need(box != NULL, "calloc");
    box->memory = memory == NULL ? firn_memory_system() : memory;
    need(firn_store_temporary(NULL, firn_memory_system(), &box->store, NULL) == FIRN_OK, "store");
    need(firn_store_temporary(NULL, firn_memory_system(), &box->spool, NULL) == FIRN_OK, "spool");
    need(firn_sheet_geometry_for(0, 1 << 20, &options.geometry) == FIRN_OK, "geometry");
    options.store = &box->store;
    options.spool = &box->spool;
    options.memory = firn_memory_system();
    need(firn_writer_make(&options, &box->fault, &box->writer) == FIRN_OK, "writer");
    box->intake = (struct firn_intake_options){
        .memory = box->memory, .self = box, .finding = note_intake, .item = note_item
    };
    box->outlet = (struct firn_outlet_options){ .memory = box->memory, .self = box, .finding = note_outlet };
    return box;
}

void box_free(struct box *box)
{
    firn_reader_free(box->reader);
    firn_writer_free(box->writer);
    box->store.close(box->store.self);
    box->spool.close(box->spool.self);
    free(box);
}

enum firn_status box_open_again(struct box *box)
{
    const struct firn_reader_options options = { .store = &box->store, .memory = firn_memory_system(), .threads = 1 };

    firn_reader_free(box->reader);
    return firn_reader_open(&options, &box->fault, &box->reader);
}

enum firn_status box_close_lid(struct box *box)
{
    enum firn_status status = firn_writer_finish(box->writer, &box->totals);

    firn_writer_free(box->writer);
    box->writer = NULL;
    return status == FIRN_OK ? box_open_again(box) : status;
}

enum firn_status box_take_path(struct box *box, const char *path)
{
    return firn_intake_paths(box->writer, &path, 1, &box->intake, &box->fault, &box->taken);
}

enum firn_status box_take_archive(struct box *box, const char *path)
{
    return firn_intake_archive(box->writer, path, &box->intake, &box->fault, &box->taken);
}

void box_put(struct box *box, const uint8_t *pax, size_t pax_bytes, bool has_content, const void *bytes, size_t count)
{
    const struct firn_item_extent extent = { .at = 0, .bytes = count };
    const struct firn_item item = {
        .pax = pax, .pax_bytes = pax_bytes, .has_content = has_content, .bytes = count, .extents = &extent,
        .extent_count = count > 0
    };

    need(firn_writer_item(box->writer, &item) == FIRN_OK, "item");
    need(count == 0 || firn_writer_content(box->writer, bytes, count) == FIRN_OK, "content");
    need(firn_writer_end(box->writer, NULL) == FIRN_OK, "end");
}

enum firn_status box_give_folder(struct box *box, const char *folder)
{
    box->notes[0] = '\0';
    return firn_outlet_folder(box->reader, folder, &box->outlet, &box->fault, &box->given);
}

enum firn_status box_give_tar(struct box *box, const char *path)
{
    int descriptor = open(path, O_WRONLY | O_CREAT | O_TRUNC, 0644);
    enum firn_status status;

    need(descriptor >= 0, path);
    box->notes[0] = '\0';
    status = firn_outlet_tar(box->reader, descriptor, &box->outlet, &box->fault, &box->given);
    close(descriptor);
    return status;
}

void box_wipe(struct box *box, uint64_t first_block, uint64_t blocks)
{
    static const uint8_t zeros[4096];
    int os_error;

    for (uint64_t i = 0; i < blocks; i++)
        need(box->store.write_at(box->store.self, 4096 * (first_block + i + 1), zeros, sizeof zeros, &os_error) ==
                 FIRN_OK,
             "wipe");
}

struct listing {
    struct firn_about *about;
    char *text;
};

static bool list_item(void *self, const struct firn_item *item)
{
    struct listing *listing = self;
    struct firn_about_facts facts;

    if (firn_about_read(listing->about, item, &facts) != FIRN_OK)
        note(listing->text, "?\n");
    else
        note(listing->text, "%s %c %o\n", facts.path, facts.type, facts.mode);
    return false;
}

char *box_list(struct box *box)
{
    struct listing listing = { .text = calloc(1, BOX_NOTES_ROOM) };
    const struct firn_reader_visitor visitor = { .self = &listing, .wants = list_item };
    struct firn_reader_walk_report report;

    need(listing.text != NULL && firn_about_make(firn_memory_system(), &listing.about) == FIRN_OK, "about");
    need(firn_reader_walk(box->reader, &visitor, &box->fault, &report) == FIRN_OK, "walk");
    firn_about_free(listing.about);
    return listing.text;
}
