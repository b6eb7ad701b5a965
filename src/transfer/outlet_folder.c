/* transfer/outlet_folder.c - giving items back into a folder */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* syncfs */
#include "firn/outlet.h"

#include "base/fault.h"
#include "transfer/outlet_metadata.h"
#include "transfer/outlet_place.h"
#include "transfer/outlet_run.h"
#include "transfer/outlet_stage.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/sysmacros.h>
#include <unistd.h>

/* A folder that this run made, or whose metadata it sets; set when all else is done. */
struct later {
    bool asked;                  /* an item wants it; otherwise it was made on the way to one */
    uint64_t number;             /* of that item */
    mode_t mode;
    int64_t uid, gid;
    bool timed;
    int64_t seconds;
    long nanoseconds;
    const uint8_t *pax;          /* the whole header, where it has attributes or lists; else NULL */
    size_t pax_bytes;
};

struct job {
    struct firn_outlet_run run;
    struct firn_outlet_metadata metadata;
    struct firn_outlet_place place, link_place;
    struct firn_outlet_stage stage;
    struct firn_names *folders;            /* struct later by stored name */
    struct archive_entry *later_entry;
    int root;
    enum firn_status over;                 /* the work is over: wants found out, begin says it */
    /* the file at hand */
    int file;                              /* -1: none, or given up */
    const char *last;                      /* its name in its folder */
    uint64_t written;                      /* bytes of it up to here stand in the file */
};

/* ---- trouble ---- */

/* Trouble with one item is told; trouble of the medium or the process ends the work. */
static enum firn_status fail(struct job *job, int os_error)
{
    switch (os_error) {
    case ENOSPC:
    case EDQUOT:
    case EIO:
    case EROFS:
    case EMFILE:
    case ENFILE:
        return firn_fault_tell(job->run.fault, FIRN_IO, os_error, 0, job->run.name);
    case ENOMEM:
        return firn_fault_tell(job->run.fault, FIRN_NO_MEMORY, os_error, 0, job->run.name);
    case EEXIST:
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_EXISTS, 0, "");
        return FIRN_OK;
    default:
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_FAILED, os_error, "");
        return FIRN_OK;
    }
}

/* The folder of the item at hand. FIRN_OK; FIRN_END: not to be had, and told; else the work is over. */
static enum firn_status find_place(struct job *job, int *folder)
{
    int os_error = 0;
    enum firn_status status = firn_outlet_place_find(&job->place, job->run.name, true, folder, &job->last, &os_error);

    if (status == FIRN_EXISTS) {
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_REFUSED, 0, "something that is no folder is in the way");
        return FIRN_END;
    }
    if (status != FIRN_CANNOT_CREATE)
        return status;
    status = fail(job, os_error);
    return status == FIRN_OK ? FIRN_END : status;
}

/* Puts what is staged in place and tells what came of it. */
static enum firn_status settle(struct job *job, const struct firn_outlet_shortfall *shortfall, bool kept)
{
    int error = firn_outlet_stage_settle(&job->stage, job->last, job->run.options->replace);

    if (error != 0)
        return fail(job, error);
    if (shortfall->what != NULL)
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_METADATA, shortfall->os_error, shortfall->what);
    return firn_outlet_run_written(&job->run, kept);
}

/* ---- folders ---- */

/* A folder on the way to an item. */
static enum firn_status note_made(void *self, const char *name, size_t name_bytes)
{
    struct job *job = self;
    void *record;

    return firn_names_add(job->folders, name, name_bytes, &record, NULL);
}

/* Keeps the metadata of the folder at hand until the end. */
static enum firn_status keep_for_later(struct job *job, const struct firn_item *item)
{
    struct archive_entry *entry = job->run.entry;
    bool more = archive_entry_xattr_count(entry) > 0 || archive_entry_acl_types(entry) != 0;
    void *record;
    enum firn_status status = firn_names_add(job->folders, job->run.name, strlen(job->run.name), &record, NULL);
    struct later *later = record;

    if (status != FIRN_OK)
        return status;
    *later = (struct later){ .asked = true,
                             .number = item->number,
                             .mode = archive_entry_perm(entry) & 07777,
                             .timed = archive_entry_mtime_is_set(entry) != 0,
                             .seconds = archive_entry_mtime(entry),
                             .nanoseconds = archive_entry_mtime_nsec(entry) };
    firn_outlet_metadata_owner(&job->metadata, entry, &later->uid, &later->gid);
    if (more) {
        later->pax = (const uint8_t *)firn_names_keep(job->folders, (const char *)item->pax, item->pax_bytes);
        later->pax_bytes = item->pax_bytes;
    }
    return more && later->pax == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

/* Makes the folder, also in place of something else if that may be replaced. Returns 0, EEXIST or another errno. */
static int make_or_replace(struct job *job, int folder)
{
    struct stat facts;

    if (mkdirat(folder, job->last, S_IRWXU) == 0)
        return 0;
    if (errno != EEXIST || !job->run.options->replace
        || fstatat(folder, job->last, &facts, AT_SYMLINK_NOFOLLOW) != 0 || S_ISDIR(facts.st_mode))
        return errno;
    return unlinkat(folder, job->last, 0) == 0 && mkdirat(folder, job->last, S_IRWXU) == 0 ? 0 : errno;
}

static enum firn_status make_folder(struct job *job, const struct firn_item *item, int folder)
{
    bool ours = firn_names_find(job->folders, job->run.name, strlen(job->run.name)) != NULL;
    int error = make_or_replace(job, folder);
    enum firn_status status = FIRN_OK;
    struct stat facts;

    if (error == EEXIST && (fstatat(folder, job->last, &facts, AT_SYMLINK_NOFOLLOW) != 0 || !S_ISDIR(facts.st_mode)))
        return fail(job, EEXIST);
    if (error != 0 && error != EEXIST)
        return fail(job, error);
    if (error == 0 || ours || job->run.options->replace)
        status = keep_for_later(job, item);
    return status == FIRN_OK ? firn_outlet_run_written(&job->run, false) : status;
}

static void give_later(struct job *job, const char *name, const struct later *later)
{
    struct archive_entry *entry = job->later_entry;
    struct firn_attributes_place place = { .descriptor = -1 };
    struct firn_outlet_shortfall shortfall = { 0 };
    struct firn_item item = { .pax = later->pax, .pax_bytes = later->pax_bytes };
    const char *last;
    int folder, error = 0;

    archive_entry_clear(entry);
    archive_entry_set_mode(entry, AE_IFDIR | later->mode);
    archive_entry_set_uid(entry, later->uid);
    archive_entry_set_gid(entry, later->gid);
    if (later->timed)
        archive_entry_set_mtime(entry, later->seconds, later->nanoseconds);
    if (later->pax != NULL && firn_pax_entry(job->run.pax, &item, &entry) != FIRN_OK)
        entry = job->later_entry;
    memcpy(job->run.name, name, strlen(name) + 1);
    job->run.number = later->number;
    if (firn_outlet_place_find(&job->place, name, false, &folder, &last, &error) == FIRN_OK) {
        place.descriptor = openat(folder, last, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
        error = errno;
    }
    if (place.descriptor < 0) {
        shortfall = (struct firn_outlet_shortfall){ .what = "all of it", .os_error = error };
    } else {
        firn_outlet_metadata_give(&job->metadata, &place, entry, &shortfall);
        close(place.descriptor);
    }
    if (shortfall.what != NULL)
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_METADATA, shortfall.os_error, shortfall.what);
}

/* From the last one made to the first, so that a folder that locks us out comes after all that lies in it. */
static void give_all_later(struct job *job)
{
    for (size_t i = firn_names_count(job->folders); i > 0; i--) {
        const char *name;
        const struct later *later = firn_names_at(job->folders, i - 1, &name);

        if (later->asked)
            give_later(job, name, later);
    }
}

/* ---- links, devices, fifos ---- */

static int make_symlink(void *self, int folder, const char *name)
{
    return symlinkat(archive_entry_symlink(self), folder, name);
}

static int make_node(void *self, int folder, const char *name)
{
    struct archive_entry *entry = self;
    mode_t type = (mode_t)archive_entry_filetype(entry);
    dev_t device = type == AE_IFIFO ? 0 : makedev((unsigned)archive_entry_rdevmajor(entry),
                                                  (unsigned)archive_entry_rdevminor(entry));

    return mknodat(folder, name, type | S_IRUSR | S_IWUSR, device);
}

static enum firn_status make_special(struct job *job, int folder, firn_outlet_stage_maker *make)
{
    struct firn_outlet_shortfall shortfall;
    struct firn_attributes_place place = { .descriptor = -1, .folder = folder };
    struct stat facts;

    if (firn_outlet_stage_make(&job->stage, folder, make, job->run.entry) < 0)
        return fail(job, errno);
    place.name = job->stage.name;
    firn_outlet_metadata_give(&job->metadata, &place, job->run.entry, &shortfall);
    if (job->run.target != NULL && fstatat(folder, job->stage.name, &facts, AT_SYMLINK_NOFOLLOW) == 0) {
        job->run.target->device = facts.st_dev;
        job->run.target->inode = facts.st_ino;
    }
    return settle(job, &shortfall, false);
}

struct known {
    int folder;
    const char *name;
};

static int make_link(void *self, int folder, const char *name)
{
    const struct known *known = self;

    return linkat(known->folder, known->name, folder, name, 0);
}

/* Leads to what this run wrote, or to nothing: whatever else may stand there by now is not linked to. */
static enum firn_status make_hard_link(struct job *job, int folder)
{
    const struct firn_outlet_target *target = firn_outlet_run_link(&job->run);
    const struct firn_outlet_shortfall none = { 0 };
    struct known known;
    struct stat facts;
    int os_error;

    if (target == NULL)
        return FIRN_OK;
    if (firn_outlet_place_find(&job->link_place, target->place, false, &known.folder, &known.name, &os_error) != FIRN_OK
        || fstatat(known.folder, known.name, &facts, AT_SYMLINK_NOFOLLOW) != 0 || facts.st_dev != target->device
        || facts.st_ino != target->inode) {
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_LINK, 0, "the file it is a hard link to is not there any more");
        return FIRN_OK;
    }
    if (firn_outlet_stage_make(&job->stage, folder, make_link, &known) < 0)
        return fail(job, errno);
    return settle(job, &none, false);
}

static enum firn_status make_bare(struct job *job, const struct firn_item *item)
{
    struct archive_entry *entry = job->run.entry;
    int folder;
    enum firn_status status = find_place(job, &folder);

    if (status != FIRN_OK)
        return status == FIRN_END ? FIRN_OK : status;
    if (archive_entry_hardlink(entry) != NULL)
        return make_hard_link(job, folder);
    switch (archive_entry_filetype(entry)) {
    case AE_IFDIR:
        return make_folder(job, item, folder);
    case AE_IFLNK:
        return make_special(job, folder, make_symlink);
    case AE_IFIFO:
        return make_special(job, folder, make_node);
    case AE_IFCHR:
    case AE_IFBLK:
        if (job->run.options->devices)
            return make_special(job, folder, make_node);
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_REFUSED, 0, "a device");
        return FIRN_OK;
    default:
        firn_outlet_run_tell(&job->run, FIRN_OUTLET_REFUSED, 0, "an unknown kind of item");
        return FIRN_OK;
    }
}

/* ---- files ---- */

static int make_file(void *self, int folder, const char *name)
{
    const mode_t *mode = self;

    return openat(folder, name, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, *mode);
}

/* Whether the file at hand can be put where it belongs, before its content is read for nothing. */
static bool is_welcome(struct job *job)
{
    struct stat facts;
    int folder;

    job->over = find_place(job, &folder);
    if (job->over == FIRN_OK) {
        if (fstatat(folder, job->last, &facts, AT_SYMLINK_NOFOLLOW) != 0) {
            if (errno == ENOENT)
                return true;
            job->over = fail(job, errno);
        } else {
            if (!S_ISDIR(facts.st_mode) && job->run.options->replace)
                return true;
            firn_outlet_run_tell(&job->run, FIRN_OUTLET_EXISTS, 0, S_ISDIR(facts.st_mode) ? "a folder" : "");
        }
    }
    if (job->over == FIRN_END)      /* told of already */
        job->over = FIRN_OK;
    return job->over != FIRN_OK;
}

static void give_up_file(struct job *job)
{
    if (job->file >= 0)
        close(job->file);
    job->file = -1;
    firn_outlet_stage_drop(&job->stage);
}

/* Writes a whole small file; returns 0 or errno. Closes it. */
static int write_all(int file, const char *bytes, size_t count)
{
    int error = 0;

    while (count > 0 && error == 0) {
        ssize_t done = write(file, bytes, count);

        if (done > 0) {
            bytes += done;
            count -= (size_t)done;
        } else if (done == 0 || errno != EINTR) {
            error = done == 0 ? EIO : errno;
        }
    }
    return close(file) != 0 && error == 0 ? errno : error;
}

/* Returns 0 or errno. */
static int place_text(struct job *job, const char *text, size_t bytes)
{
    struct firn_outlet_stage stage = { .counter = job->stage.counter };
    mode_t mode = S_IRUSR | S_IWUSR | S_IRGRP | S_IROTH;
    char name[NAME_MAX + 1];
    size_t name_bytes = strlen(job->last);
    int file, error;

    if (name_bytes + sizeof ".gaps" > sizeof name)
        return ENAMETOOLONG;
    memcpy(name, job->last, name_bytes);
    memcpy(name + name_bytes, ".gaps", sizeof ".gaps");
    file = firn_outlet_stage_make(&stage, job->stage.folder, make_file, &mode);
    job->stage.counter = stage.counter;
    if (file < 0)
        return errno;
    error = write_all(file, text, bytes);
    if (error == 0)
        return firn_outlet_stage_settle(&stage, name, job->run.options->replace);
    firn_outlet_stage_drop(&stage);
    return error;
}

/* Puts NAME.gaps beside its file. *placed: it is there; otherwise that was told. */
static enum firn_status place_gaps(struct job *job, const struct firn_item *item, enum firn_outlet_verdict verdict,
                                   bool *placed)
{
    char *text;
    size_t bytes;
    enum firn_status status = firn_outlet_run_gaps(&job->run, item, verdict, &text, &bytes);
    int error;

    *placed = false;
    if (status != FIRN_OK)
        return status;
    error = place_text(job, text, bytes);
    job->run.memory->put(job->run.memory->self, text);
    *placed = error == 0;
    return error == 0 ? FIRN_OK : fail(job, error);
}

/* All bytes are written: length, metadata, name. */
static enum firn_status finish_file(struct job *job, const struct firn_item *item, bool kept)
{
    const struct firn_attributes_place place = { .descriptor = job->file };
    struct firn_outlet_shortfall shortfall;
    struct stat facts;
    int error = 0;

    if (job->written < item->bytes && ftruncate(job->file, (off_t)item->bytes) != 0)
        error = errno;
    if (error == 0)
        firn_outlet_metadata_give(&job->metadata, &place, job->run.entry, &shortfall);
    if (error == 0 && job->run.target != NULL && fstat(job->file, &facts) == 0) {
        job->run.target->device = facts.st_dev;
        job->run.target->inode = facts.st_ino;
    }
    if (close(job->file) != 0 && error == 0)
        error = errno;
    job->file = -1;
    if (error == 0)
        return settle(job, &shortfall, kept);
    firn_outlet_stage_drop(&job->stage);
    return fail(job, error);
}

/* ---- what the reader calls ---- */

static bool visit_wants(void *self, const struct firn_item *item)
{
    struct job *job = self;

    if (job->over != FIRN_OK)
        return true;
    if (!firn_outlet_run_take(&job->run, item, &job->over))
        return job->over != FIRN_OK;
    return !item->has_content || is_welcome(job);
}

static enum firn_status visit_begin(void *self, const struct firn_item *item, uint64_t foreseen_lost_bytes)
{
    struct job *job = self;
    mode_t mode = S_IRUSR | S_IWUSR;
    int folder;
    enum firn_status status = job->over;

    (void)foreseen_lost_bytes;
    if (status != FIRN_OK)
        return status;
    if (!item->has_content)
        return make_bare(job, item);
    status = find_place(job, &folder);
    if (status != FIRN_OK)
        return status == FIRN_END ? FIRN_OK : status;
    job->written = 0;
    job->file = firn_outlet_stage_make(&job->stage, folder, make_file, &mode);
    return job->file < 0 ? fail(job, errno) : FIRN_OK;
}

static enum firn_status visit_bytes(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes,
                                    size_t count)
{
    struct job *job = self;

    (void)item;
    if (job->file < 0)
        return FIRN_OK;
    while (count > 0) {
        ssize_t done = pwrite(job->file, bytes, count, (off_t)at);

        if (done < 0 && errno == EINTR)
            continue;
        if (done <= 0) {
            int error = done < 0 ? errno : EIO;

            give_up_file(job);
            return fail(job, error);
        }
        bytes += done;
        at += (uint64_t)done;
        count -= (size_t)done;
        job->run.report->bytes += (uint64_t)done;
    }
    job->written = at;
    firn_outlet_run_progress(&job->run);
    return FIRN_OK;
}

static enum firn_status visit_gap(void *self, const struct firn_item *item, uint64_t at, uint64_t count,
                                  enum firn_reader_loss why, uint64_t container_at)
{
    struct job *job = self;

    (void)item;
    return firn_outlet_run_gap(&job->run, at, count, why, container_at);
}

static void visit_lost_blocks(void *self, uint64_t first, uint64_t last, uint64_t count)
{
    struct job *job = self;

    firn_outlet_run_lost_blocks(&job->run, first, last, count);
}

static enum firn_status visit_end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct job *job = self;
    enum firn_outlet_verdict verdict = firn_outlet_run_judge(&job->run, outcome);
    bool keep = job->run.options->keep_incomplete, placed = false;
    enum firn_status status = FIRN_OK;

    firn_outlet_run_progress(&job->run);
    if (!item->has_content || job->file < 0)
        return FIRN_OK;
    if (verdict == FIRN_OUTLET_IS_WHOLE)
        return finish_file(job, item, false);
    if (keep)
        status = place_gaps(job, item, verdict, &placed);
    firn_outlet_run_tell_verdict(&job->run, verdict, item, placed);
    if (placed && status == FIRN_OK)
        return finish_file(job, item, true);
    give_up_file(job);
    return status;
}

/* ---- the whole ---- */

static int open_root(const char *folder)
{
    int root = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);

    if (root < 0 && errno == ENOENT && mkdir(folder, S_IRWXU | S_IRWXG | S_IRWXO) == 0)
        root = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    return root;
}

static enum firn_status restore(struct job *job, struct firn_reader *reader)
{
    const struct firn_reader_visitor visitor = {
        .self = job, .wants = visit_wants, .begin = visit_begin, .bytes = visit_bytes, .gap = visit_gap,
        .end = visit_end, .lost_blocks = visit_lost_blocks
    };
    enum firn_status status;

    firn_outlet_place_start(&job->place, job->root);
    firn_outlet_place_start(&job->link_place, job->root);
    job->place.self = job;
    job->place.made = note_made;
    status = firn_outlet_run_walk(&job->run, reader, &visitor);
    if (status == FIRN_OK)
        status = job->over;
    give_up_file(job);
    give_all_later(job);
    firn_outlet_place_end(&job->link_place);
    firn_outlet_place_end(&job->place);
    if (job->run.options->sync && syncfs(job->root) != 0 && status == FIRN_OK)
        status = firn_fault_tell(job->run.fault, FIRN_IO, errno, 0, "");
    return status;
}

static enum firn_status prepare(struct job *job, struct firn_reader *reader, const char *folder,
                                const struct firn_outlet_options *options, struct firn_fault *fault,
                                struct firn_outlet_report *report)
{
    enum firn_status status = firn_outlet_run_start(&job->run, reader, options, fault, report);

    if (status != FIRN_OK)
        return status;
    status = firn_outlet_metadata_start(&job->metadata, options->memory, options->owner);
    if (status == FIRN_OK)
        status = firn_names_make(options->memory, sizeof(struct later), &job->folders);
    job->later_entry = archive_entry_new();
    if (status != FIRN_OK || job->later_entry == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    job->root = open_root(folder);
    return job->root < 0 ? firn_fault_tell(fault, FIRN_CANNOT_CREATE, errno, 0, folder) : FIRN_OK;
}

enum firn_status firn_outlet_folder(struct firn_reader *reader, const char *folder,
                                    const struct firn_outlet_options *options, struct firn_fault *fault,
                                    struct firn_outlet_report *report)
{
    struct job *job = options->memory->get(options->memory->self, sizeof *job);
    enum firn_status status;

    if (job == NULL) {
        *report = (struct firn_outlet_report){ 0 };
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, folder);
    }
    memset(job, 0, sizeof *job);
    job->file = job->root = -1;
    status = prepare(job, reader, folder, options, fault, report);
    if (status == FIRN_OK)
        status = restore(job, reader);
    if (job->root >= 0)
        close(job->root);
    archive_entry_free(job->later_entry);
    firn_names_free(job->folders);
    firn_outlet_metadata_end(&job->metadata);
    firn_outlet_run_end(&job->run);
    options->memory->put(options->memory->self, job);
    return status;
}
