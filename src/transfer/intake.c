/* transfer/intake.c - taking in files and folders */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/intake.h"

#include "base/fault.h"
#include "transfer/attributes.h"
#include "transfer/holes.h"
#include "transfer/intake_run.h"
#include "transfer/intake_walk.h"
#include "transfer/names.h"
#include "transfer/operands.h"
#include "transfer/quietly.h"
#include "transfer/stored_name.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/* st_blocks counts 512 bytes, whatever the file system */
enum { STAT_BLOCK_BYTES = 512, SOURCE_ROOM = 4 * PATH_MAX };

struct job {
    struct firn_intake_run run;
    struct firn_intake_walk *walk;
    struct firn_people people;
    struct firn_attributes *attributes;
    struct firn_operands *operands;
    struct firn_names *links;              /* from device and inode to the name it was stored under first */
    struct firn_holes holes;
    struct archive_entry *entry;
    const char *operand;                   /* as given */
    size_t operand_bytes;                  /* of its stored name */
    bool nested;                           /* earlier operands lie below this one */
    char stored[FIRN_STORED_NAME_ROOM];    /* the item at hand */
    size_t stored_bytes;
    char source[SOURCE_ROOM];
};

/* All of it is compared as bytes, so it holds no padding. */
struct link_key { uint64_t device, inode; };
struct link_record {
    const char *name;
    bool summed;
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
};

/* What became of an attempt to read a file. */
struct trouble {
    bool any;
    enum firn_intake_kind kind;
    int os_error;
};

/* ---- names ---- */

/* The item at hand as a person would look for it. */
static const char *source_of(struct job *job)
{
    const char *below = job->stored + job->operand_bytes;
    size_t bytes = strlen(job->operand);

    below += *below == '/';
    if (*below == '\0')
        return job->operand;
    snprintf(job->source, sizeof job->source, "%s%s%s", job->operand,
             bytes > 0 && job->operand[bytes - 1] == '/' ? "" : "/", below);
    return job->source;
}

static void tell(struct job *job, enum firn_intake_kind kind, int os_error, const char *detail)
{
    firn_intake_run_tell(&job->run, kind, source_of(job), os_error, detail);
}

static bool at_operand(const struct job *job)
{
    return job->stored_bytes == job->operand_bytes;
}

/* Makes `name` in the folder whose stored name has folder_bytes the item at hand; false: the name would be too long. */
static bool go_to(struct job *job, size_t folder_bytes, const char *name)
{
    size_t bytes = strlen(name);
    size_t slash = folder_bytes > 0;

    job->stored_bytes = folder_bytes;
    job->stored[folder_bytes] = '\0';
    if (bytes + slash > FIRN_INTAKE_NAME_MAX - folder_bytes)
        return false;
    if (slash)
        job->stored[job->stored_bytes++] = '/';
    memcpy(job->stored + job->stored_bytes, name, bytes + 1);
    job->stored_bytes += bytes;
    return true;
}

/* ---- what stands in the way ---- */

/* Why something that was there a moment ago cannot be opened. */
static enum firn_intake_kind kind_of(int os_error)
{
    switch (os_error) {
    case ENOENT:
        return FIRN_INTAKE_VANISHED;
    case ELOOP:
    case ENOTDIR:
        return FIRN_INTAKE_CHANGED;
    default:
        return FIRN_INTAKE_UNREADABLE;
    }
}

/* ---- metadata ---- */

static void fill_entry(struct job *job, const struct stat *facts)
{
    struct archive_entry *entry = job->entry;

    archive_entry_clear(entry);
    archive_entry_copy_pathname(entry, job->stored);
    archive_entry_set_mode(entry, facts->st_mode);
    archive_entry_set_uid(entry, facts->st_uid);
    archive_entry_set_gid(entry, facts->st_gid);
    archive_entry_copy_uname(entry, firn_people_name(&job->people, false, facts->st_uid));
    archive_entry_copy_gname(entry, firn_people_name(&job->people, true, facts->st_gid));
    archive_entry_set_mtime(entry, facts->st_mtim.tv_sec, facts->st_mtim.tv_nsec);
    if (S_ISREG(facts->st_mode))
        archive_entry_set_size(entry, facts->st_size);
    if (S_ISCHR(facts->st_mode) || S_ISBLK(facts->st_mode))
        archive_entry_set_rdev(entry, facts->st_rdev);
}

static void fill_attributes(struct job *job, int descriptor, int folder, const char *name)
{
    const struct firn_attributes_place place = { .descriptor = descriptor, .folder = folder, .name = name };
    int error = firn_attributes_take(job->attributes, &place, job->entry);

    if (error != 0)
        tell(job, FIRN_INTAKE_PARTIAL, error, "attributes");
}

/* ---- hard links ---- */

static struct link_record *earlier_name(const struct job *job, const struct stat *facts)
{
    const struct link_key key = { .device = facts->st_dev, .inode = facts->st_ino };

    return facts->st_nlink < 2 ? NULL : firn_names_find(job->links, &key, sizeof key);
}

/* The item at hand was stored: later names of the same file are links to it. sha256 may be NULL. */
static enum firn_status remember_name(struct job *job, const struct stat *facts, const uint8_t *sha256)
{
    const struct link_key key = { .device = facts->st_dev, .inode = facts->st_ino };
    struct link_record *record;
    void *place;
    enum firn_status status;

    if (facts->st_nlink < 2)
        return FIRN_OK;
    status = firn_names_add(job->links, &key, sizeof key, &place, NULL);
    if (status != FIRN_OK)
        return status;
    record = place;
    record->name = firn_names_keep(job->links, job->stored, job->stored_bytes);
    record->summed = sha256 != NULL;
    if (sha256 != NULL)
        memcpy(record->sha256, sha256, sizeof record->sha256);
    return record->name == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

/* ---- items without content ---- */

/* Stores the entry as it is filled in. link, sha256: of a hard link, may be NULL. FIRN_END: told, not stored. */
static enum firn_status store_bare(struct job *job, const char *link, const uint8_t *sha256)
{
    const struct firn_item item = { .has_content = false };
    struct firn_intake_item told = {
        .name = job->stored, .operand_bytes = job->operand_bytes, .link = link, .sha256 = sha256
    };
    enum firn_status status = firn_intake_run_announce(&job->run, job->entry, &item, source_of(job));

    return status == FIRN_OK ? firn_intake_run_stored(&job->run, &told, NULL) : status;
}

static enum firn_status take_hard_link(struct job *job, const struct stat *facts, const struct link_record *record)
{
    fill_entry(job, facts);
    archive_entry_copy_hardlink(job->entry, record->name);
    archive_entry_set_size(job->entry, 0);
    return store_bare(job, record->name, record->summed ? record->sha256 : NULL);
}

/* A symbolic link, a device or a fifo. */
static enum firn_status take_special(struct job *job, int folder, const char *name, const struct stat *facts)
{
    const struct link_record *record = earlier_name(job, facts);
    char target[PATH_MAX];
    enum firn_status status;

    if (record != NULL)
        return take_hard_link(job, facts, record);
    fill_entry(job, facts);
    if (S_ISLNK(facts->st_mode)) {
        ssize_t bytes = readlinkat(folder, name, target, sizeof target);

        if (bytes < 0 || (size_t)bytes == sizeof target) {
            tell(job, bytes < 0 ? kind_of(errno) : FIRN_INTAKE_UNSUPPORTED, bytes < 0 ? errno : ENAMETOOLONG, "");
            return FIRN_OK;
        }
        target[bytes] = '\0';
        archive_entry_copy_symlink(job->entry, target);
    }
    fill_attributes(job, -1, folder, name);
    status = store_bare(job, NULL, NULL);
    return status == FIRN_OK ? remember_name(job, facts, NULL) : status;
}

/* ---- files ---- */

/* Reads exactly count bytes. */
static bool read_stretch(int descriptor, uint64_t at, uint8_t *bytes, size_t count, struct trouble *trouble)
{
    while (count > 0) {
        ssize_t got = pread(descriptor, bytes, count, (off_t)at);

        if (got < 0 && errno == EINTR)
            continue;
        if (got <= 0) {
            *trouble =
                (struct trouble){ true, got < 0 ? FIRN_INTAKE_UNREADABLE : FIRN_INTAKE_CHANGED, got < 0 ? errno : 0 };
            return false;
        }
        bytes += got;
        count -= (size_t)got;
        at += (uint64_t)got;
    }
    return true;
}

static bool same_time(const struct timespec *one, const struct timespec *other)
{
    return one->tv_sec == other->tv_sec && one->tv_nsec == other->tv_nsec;
}

/* Whether the file is still what it was when reading began. */
static bool unchanged(int descriptor, const struct stat *before, struct trouble *trouble)
{
    struct stat now;

    if (fstat(descriptor, &now) != 0)
        *trouble = (struct trouble){ true, FIRN_INTAKE_UNREADABLE, errno };
    else if (now.st_size != before->st_size || !same_time(&now.st_mtim, &before->st_mtim)
             || !same_time(&now.st_ctim, &before->st_ctim))
        *trouble = (struct trouble){ true, FIRN_INTAKE_CHANGED, 0 };
    return !trouble->any;
}

static enum firn_status finish_file(struct job *job, const struct stat *facts)
{
    struct firn_intake_item told = {
        .name = job->stored, .operand_bytes = job->operand_bytes, .has_content = true, .bytes = (uint64_t)facts->st_size
    };
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
    enum firn_status status = firn_intake_run_stored(&job->run, &told, sha256);

    return status == FIRN_OK ? remember_name(job, facts, sha256) : status;
}

/* A file that fits into the buffer is read before it is announced: if it fails, no trace of it is made. */
static enum firn_status store_small(struct job *job, int descriptor, const struct stat *facts,
                                    const struct firn_item *item)
{
    struct trouble trouble = { 0 };
    enum firn_status status;
    size_t used = 0;

    for (size_t i = 0; i < item->extent_count && !trouble.any; i++) {
        size_t bytes = (size_t)item->extents[i].bytes;

        if (read_stretch(descriptor, item->extents[i].at, job->run.buffer + used, bytes, &trouble))
            used += bytes;
    }
    if (trouble.any || !unchanged(descriptor, facts, &trouble)) {
        tell(job, trouble.kind, trouble.os_error, "");
        return FIRN_OK;
    }
    status = firn_intake_run_announce(&job->run, job->entry, item, source_of(job));
    if (status == FIRN_OK)
        status = firn_intake_run_content(&job->run, job->run.buffer, used);
    return status == FIRN_OK ? finish_file(job, facts) : status;
}

static enum firn_status store_large(struct job *job, int descriptor, const struct stat *facts,
                                    const struct firn_item *item)
{
    struct trouble trouble = { 0 };
    enum firn_status status = firn_intake_run_announce(&job->run, job->entry, item, source_of(job));

    for (size_t i = 0; i < item->extent_count && status == FIRN_OK && !trouble.any; i++) {
        uint64_t at = item->extents[i].at;
        uint64_t left = item->extents[i].bytes;

        while (left > 0 && status == FIRN_OK && !trouble.any) {
            size_t portion = left < FIRN_INTAKE_RUN_BUFFER_BYTES ? (size_t)left : FIRN_INTAKE_RUN_BUFFER_BYTES;

            if (read_stretch(descriptor, at, job->run.buffer, portion, &trouble))
                status = firn_intake_run_content(&job->run, job->run.buffer, portion);
            at += portion;
            left -= portion;
        }
    }
    if (status != FIRN_OK)
        return status;
    if (trouble.any || !unchanged(descriptor, facts, &trouble))
        return firn_intake_run_withdraw(&job->run, trouble.kind, source_of(job), trouble.os_error, "");
    return finish_file(job, facts);
}

/* Where its blocks cover a file there are no holes to look for. */
static enum firn_status map_file(struct job *job, int descriptor, const struct stat *facts)
{
    if ((uint64_t)facts->st_blocks * STAT_BLOCK_BYTES < (uint64_t)facts->st_size)
        return firn_holes_map(&job->holes, descriptor, (uint64_t)facts->st_size);
    firn_holes_clear(&job->holes);
    return facts->st_size == 0 ? FIRN_OK : firn_holes_add(&job->holes, 0, (uint64_t)facts->st_size);
}

static enum firn_status store_file(struct job *job, int descriptor, const struct stat *facts)
{
    enum firn_status status = map_file(job, descriptor, facts);
    const struct firn_item item = {
        .has_content = true, .bytes = (uint64_t)facts->st_size, .extents = job->holes.extents,
        .extent_count = job->holes.count
    };

    if (status == FIRN_CHANGED) {
        tell(job, FIRN_INTAKE_CHANGED, 0, "");
        return FIRN_OK;
    }
    if (status != FIRN_OK)
        return status;
    fill_entry(job, facts);
    fill_attributes(job, descriptor, -1, NULL);
    return job->holes.stored_bytes <= FIRN_INTAKE_RUN_BUFFER_BYTES ? store_small(job, descriptor, facts, &item)
                                                                   : store_large(job, descriptor, facts, &item);
}

static enum firn_status take_file(struct job *job, int folder, const char *name)
{
    int descriptor = firn_quietly_open(folder, name, O_RDONLY);
    const struct link_record *record;
    struct stat facts;
    enum firn_status status = FIRN_OK;

    if (descriptor < 0) {
        tell(job, kind_of(errno), errno, "");
        return FIRN_OK;
    }
    if (fstat(descriptor, &facts) != 0)
        tell(job, FIRN_INTAKE_UNREADABLE, errno, "");
    else if (!S_ISREG(facts.st_mode))
        tell(job, FIRN_INTAKE_CHANGED, 0, "");
    else if ((record = earlier_name(job, &facts)) != NULL)
        status = take_hard_link(job, &facts, record);
    else
        status = store_file(job, descriptor, &facts);
    close(descriptor);
    return status;
}

static void count_file(struct job *job, const struct stat *facts)
{
    uint64_t blocks = (uint64_t)facts->st_blocks * STAT_BLOCK_BYTES;
    uint64_t size = (uint64_t)facts->st_size;

    job->run.report->bytes += blocks < size ? blocks : size;
}

/* ---- folders ---- */

static enum firn_status take_folder(struct job *job, int folder, const char *name, struct stat *facts)
{
    int descriptor = firn_quietly_open(folder, name, O_RDONLY | O_DIRECTORY);
    enum firn_status status = FIRN_OK;
    int error = errno;

    if (descriptor >= 0 && fstat(descriptor, facts) != 0) {
        error = errno;
        close(descriptor);
        descriptor = -1;
    }
    if (job->run.writer == NULL) {
        job->run.report->items += job->stored_bytes > 0;
    } else if (job->stored_bytes > 0) {
        fill_entry(job, facts);
        if (descriptor >= 0)
            fill_attributes(job, descriptor, -1, NULL);
        status = store_bare(job, NULL, NULL);
    }
    if (descriptor < 0)
        tell(job, kind_of(error), error, "what lies in this folder is not stored");
    if (descriptor < 0 || status != FIRN_OK) {
        if (descriptor >= 0)
            close(descriptor);
        return status;
    }
    status = firn_intake_walk_into(job->walk, descriptor, facts, job->stored_bytes, &error);
    if (status == FIRN_IO) {
        tell(job, FIRN_INTAKE_UNREADABLE, error, "what lies in this folder is not stored");
        return FIRN_OK;
    }
    return status;
}

/* ---- anything ---- */

static bool is_own(const struct job *job, const struct stat *facts)
{
    for (size_t i = 0; i < job->run.options->own_count; i++)
        if (job->run.options->own[i].device == facts->st_dev && job->run.options->own[i].inode == facts->st_ino)
            return true;
    return false;
}

/* Whether an earlier operand has the name; tells it. */
static bool is_taken(struct job *job, const struct stat *facts)
{
    enum firn_operands_claim claim = FIRN_OPERANDS_FREE;

    if (!job->nested)
        return false;
    if (!at_operand(job))
        claim = firn_operands_ask(job->operands, job->stored, facts);
    else if (!S_ISDIR(facts->st_mode))
        claim = FIRN_OPERANDS_TAKEN;
    if (claim != FIRN_OPERANDS_FREE)
        tell(job, claim == FIRN_OPERANDS_SAME ? FIRN_INTAKE_SKIPPED : FIRN_INTAKE_DUPLICATE, 0,
             claim == FIRN_OPERANDS_SAME ? "stored already" : "an earlier operand has this name");
    return claim != FIRN_OPERANDS_FREE;
}

static bool is_excluded(struct job *job)
{
    if (job->run.options->exclude == NULL || job->stored_bytes == 0
        || !firn_pattern_match(job->run.options->exclude, job->stored))
        return false;
    job->run.report->excluded++;
    return true;
}

static enum firn_status take_kind(struct job *job, int folder, const char *name, struct stat *facts)
{
    bool counting = job->run.writer == NULL;

    switch (facts->st_mode & S_IFMT) {
    case S_IFDIR:
        return take_folder(job, folder, name, facts);
    case S_IFREG:
        job->run.report->items += counting;
        if (!counting)
            return take_file(job, folder, name);
        count_file(job, facts);
        return FIRN_OK;
    case S_IFLNK:
    case S_IFCHR:
    case S_IFBLK:
    case S_IFIFO:
        job->run.report->items += counting;
        return counting ? FIRN_OK : take_special(job, folder, name, facts);
    default:
        tell(job, FIRN_INTAKE_UNSUPPORTED, 0, S_ISSOCK(facts->st_mode) ? "a socket" : "an unknown kind of file");
        return FIRN_OK;
    }
}

/* The item at hand, which is `name` in an open folder. */
static enum firn_status take(struct job *job, int folder, const char *name)
{
    struct stat facts;
    enum firn_status status;

    if (is_excluded(job))
        return FIRN_OK;
    if (fstatat(folder, name, &facts, AT_SYMLINK_NOFOLLOW) != 0) {
        tell(job, kind_of(errno), errno, "");
        return FIRN_OK;
    }
    if (is_own(job, &facts)) {
        tell(job, FIRN_INTAKE_SKIPPED, 0, "the container itself");
        return FIRN_OK;
    }
    if (is_taken(job, &facts))
        return FIRN_OK;
    status = take_kind(job, folder, name, &facts);
    return status == FIRN_END ? FIRN_OK : status;      /* told of already */
}

/* ---- operands ---- */

static enum firn_status take_below(struct job *job)
{
    enum firn_status status = FIRN_OK;

    while (status == FIRN_OK && (status = firn_intake_run_go_on(&job->run)) == FIRN_OK) {
        const char *name;
        size_t mark;
        int folder;

        status = firn_intake_walk_next(job->walk, &folder, &name, &mark);
        if (status == FIRN_CHANGED) {
            job->stored_bytes = mark;
            job->stored[mark] = '\0';
            tell(job, FIRN_INTAKE_CHANGED, 0, "this folder was moved: the rest of it is not stored");
            status = FIRN_OK;
        } else if (status == FIRN_OK && !go_to(job, mark, name)) {
            tell(job, FIRN_INTAKE_UNSUPPORTED, ENAMETOOLONG, "names in this folder are too long to be stored");
        } else if (status == FIRN_OK) {
            status = take(job, folder, name);
        }
    }
    return status == FIRN_END ? FIRN_OK : status;
}

static enum firn_status take_operand(struct job *job, const char *path)
{
    enum firn_operands_claim claim;
    struct stat facts;
    enum firn_status status;

    if (path[0] == '\0')
        return firn_fault_tell(job->run.fault, FIRN_BAD_ARGUMENT, 0, 0, path);
    job->operand = path;
    status = firn_stored_name_make(path, job->stored, NULL);
    job->stored_bytes = job->operand_bytes = strlen(job->stored);
    if (status != FIRN_OK) {
        firn_intake_run_tell(&job->run, FIRN_INTAKE_UNSUPPORTED, path, ENAMETOOLONG, "");
        return FIRN_OK;
    }
    if (fstatat(AT_FDCWD, path, &facts, AT_SYMLINK_NOFOLLOW) != 0) {
        firn_intake_run_tell(&job->run, FIRN_INTAKE_UNREADABLE, path, errno, "");
        return FIRN_OK;
    }
    status = firn_operands_claim(job->operands, job->stored, path, &facts, &claim, &job->nested);
    if (status != FIRN_OK)
        return status;
    if (claim != FIRN_OPERANDS_FREE) {
        firn_intake_run_tell(&job->run, claim == FIRN_OPERANDS_SAME ? FIRN_INTAKE_SKIPPED : FIRN_INTAKE_DUPLICATE, path,
                             0, claim == FIRN_OPERANDS_SAME ? "stored already" : "an earlier operand has this name");
        return FIRN_OK;
    }
    status = take(job, AT_FDCWD, path);
    return status == FIRN_OK ? take_below(job) : status;
}

static enum firn_status start(struct job *job)
{
    enum firn_status status = firn_people_start(&job->people, true);

    firn_holes_start(&job->holes, job->run.memory);
    job->entry = archive_entry_new();
    if (status == FIRN_OK)
        status = job->entry == NULL ? FIRN_NO_MEMORY : FIRN_OK;
    if (status == FIRN_OK)
        status = firn_attributes_make(job->run.memory, &job->people, &job->attributes);
    if (status == FIRN_OK)
        status = firn_intake_walk_make(job->run.memory, &job->walk);
    if (status == FIRN_OK)
        status = firn_operands_make(job->run.memory, &job->operands);
    if (status == FIRN_OK)
        status = firn_names_make(job->run.memory, sizeof(struct link_record), &job->links);
    return status;
}

static void end(struct job *job)
{
    firn_names_free(job->links);
    firn_operands_free(job->operands);
    firn_intake_walk_free(job->walk);
    firn_attributes_free(job->attributes);
    archive_entry_free(job->entry);
    firn_holes_end(&job->holes);
    firn_people_end(&job->people);
}

enum firn_status firn_intake_paths(struct firn_writer *writer, const char *const *paths, size_t count,
                                   const struct firn_intake_options *options, struct firn_fault *fault,
                                   struct firn_intake_report *report)
{
    struct job *job = options->memory->get(options->memory->self, sizeof *job);
    enum firn_status status;

    if (job == NULL) {
        *report = (struct firn_intake_report){ 0 };
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    }
    memset(job, 0, sizeof *job);
    status = firn_intake_run_start(&job->run, writer, options, fault, report);
    if (status == FIRN_OK) {
        status = start(job);
        for (size_t i = 0; i < count && status == FIRN_OK; i++)
            status = take_operand(job, paths[i]);
        end(job);
    }
    firn_intake_run_end(&job->run);
    options->memory->put(options->memory->self, job);
    return status;
}
