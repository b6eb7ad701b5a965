/* transfer/manifest_check.c - a folder held against a container, without restoring */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/manifest.h"

#include "base/fault.h"
#include "base/memory.h"
#include "container/digest.h"
#include "transfer/intake_walk.h"
#include "transfer/quietly.h"
#include "transfer/roll.h"
#include "transfer/stored_name.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <string.h>
#include <unistd.h>

enum { PORTION_BYTES = 1 << 20 };

struct check {
    const struct firn_manifest_check_options *options;
    struct firn_manifest_check_report *report;
    struct firn_roll roll;
    struct firn_names *ways;              /* folders that lead to chosen items, items themselves or not */
    struct firn_intake_walk *walk;
    struct firn_digest *digest;
    uint8_t *portion;                     /* PORTION_BYTES */
    char name[FIRN_STORED_NAME_ROOM];     /* stored name of what is at hand */
    size_t name_bytes;
    size_t below_bytes;                   /* of it, that are not the folder's */
};

static void tell(struct check *check, enum firn_manifest_kind kind, const char *path, int os_error, const char *detail)
{
    const struct firn_manifest_finding finding = { kind, path, os_error, detail };

    check->report->findings[kind]++;
    check->options->finding(check->options->self, &finding);
}

static void tell_here(struct check *check, enum firn_manifest_kind kind, int os_error, const char *detail)
{
    bool inside = check->name_bytes > check->below_bytes;      /* else it is the folder itself */

    tell(check, kind, inside ? check->name + check->below_bytes : ".", os_error, detail);
}

/* ---- one thing ---- */

static char type_of(const struct stat *facts)
{
    switch (facts->st_mode & S_IFMT) {
    case S_IFDIR:  return 'd';
    case S_IFLNK:  return 'l';
    case S_IFCHR:  return 'c';
    case S_IFBLK:  return 'b';
    case S_IFIFO:  return 'p';
    case S_IFSOCK: return 's';
    default:       return '-';
    }
}

/* FIRN_OK, FIRN_IO with errno, FIRN_STOPPED. */
static enum firn_status digest_file(struct check *check, int descriptor, uint8_t sha256[FIRN_DIGEST_BYTES])
{
    ssize_t got = 1;

    firn_digest_start(check->digest);
    while (got != 0) {
        if (check->options->stop != NULL && check->options->stop(check->options->self))
            return FIRN_STOPPED;
        got = read(descriptor, check->portion, PORTION_BYTES);
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0)
            return FIRN_IO;
        firn_digest_add(check->digest, check->portion, (size_t)got);
        check->report->bytes += (uint64_t)got;
        if (check->options->progress != NULL)
            check->options->progress(check->options->self, check->report->alike, check->report->bytes);
    }
    firn_digest_finish(check->digest, sha256);
    return FIRN_OK;
}

static enum firn_status compare_file(struct check *check, int folder, const char *name,
                                     const struct firn_roll_item *file)
{
    uint8_t sha256[FIRN_DIGEST_BYTES];
    enum firn_status status;
    int descriptor = firn_quietly_open(folder, name, O_RDONLY);

    if (descriptor < 0) {
        tell_here(check, FIRN_MANIFEST_UNREADABLE, errno, "");
        return FIRN_OK;
    }
    status = digest_file(check, descriptor, sha256);
    if (status == FIRN_IO) {
        tell_here(check, FIRN_MANIFEST_UNREADABLE, errno, "");
        status = FIRN_OK;
    } else if (status == FIRN_OK && memcmp(sha256, file->digest, sizeof sha256) != 0) {
        tell_here(check, FIRN_MANIFEST_CHANGED, 0, "the same size, other bytes");
    } else if (status == FIRN_OK) {
        check->report->alike++;
    }
    close(descriptor);
    return status;
}

static void compare_link(struct check *check, int folder, const char *name, const struct firn_roll_item *item)
{
    char target[PATH_MAX + 1];
    ssize_t bytes = readlinkat(folder, name, target, sizeof target - 1);

    if (bytes < 0) {
        tell_here(check, FIRN_MANIFEST_UNREADABLE, errno, "");
        return;
    }
    target[bytes] = '\0';
    if (strcmp(target, item->target) != 0)
        tell_here(check, FIRN_MANIFEST_CHANGED, 0, "the link leads elsewhere");
    else
        check->report->alike++;
}

static enum firn_status compare(struct check *check, int folder, const char *name, const struct stat *facts,
                                struct firn_roll_item *item)
{
    const struct firn_roll_item *file = item->file;
    char type = item->type == 'h' ? '-' : item->type;

    item->seen = true;
    if (type_of(facts) != type) {
        tell_here(check, FIRN_MANIFEST_CHANGED, 0, "of another type");
        return FIRN_OK;
    }
    if (type == 'l') {
        compare_link(check, folder, name, item);
        return FIRN_OK;
    }
    if (type != '-') {
        check->report->alike++;
        return FIRN_OK;
    }
    if (file == NULL || file->type != '-' || !file->known) {
        tell_here(check, FIRN_MANIFEST_UNTOLD, 0, "");
        return FIRN_OK;
    }
    if ((uint64_t)facts->st_size != file->bytes) {
        tell_here(check, FIRN_MANIFEST_CHANGED, 0, "of another size");
        return FIRN_OK;
    }
    return compare_file(check, folder, name, file);
}

/* ---- the folder ---- */

static enum firn_status go_into(struct check *check, int descriptor)
{
    struct stat facts;
    enum firn_status status;
    int error;

    if (descriptor < 0 || fstat(descriptor, &facts) != 0) {
        tell_here(check, FIRN_MANIFEST_UNREADABLE, errno, "what lies in this folder was not compared");
        if (descriptor >= 0)
            close(descriptor);
        return FIRN_OK;
    }
    status = firn_intake_walk_into(check->walk, descriptor, &facts, check->name_bytes, &error);
    if (status != FIRN_IO)
        return status;
    tell_here(check, FIRN_MANIFEST_UNREADABLE, error, "what lies in this folder was not compared");
    return FIRN_OK;
}

/* What is packed as srv/intake/quay comes back below srv and srv/intake, which need not be items. */
static enum firn_status enter_ways(struct check *check)
{
    enum firn_status status = FIRN_OK;

    for (size_t i = 0; i < firn_names_count(check->roll.items) && status == FIRN_OK; i++) {
        const char *name;
        const struct firn_roll_item *item = firn_names_at(check->roll.items, i, &name);
        bool fresh = item->chosen;

        for (size_t bytes = strlen(name); bytes > 0 && fresh && status == FIRN_OK;) {
            void *record;

            bytes--;
            if (name[bytes] == '/')
                status = firn_names_add(check->ways, name, bytes, &record, &fresh);
        }
    }
    return status;
}

static bool is_way(const struct check *check, const struct stat *facts)
{
    return S_ISDIR(facts->st_mode) && firn_names_find(check->ways, check->name, check->name_bytes) != NULL;
}

static bool wanted(const struct check *check)
{
    struct firn_pattern *patterns = check->options->choice.patterns;

    return patterns == NULL || firn_pattern_match(patterns, check->name);
}

static enum firn_status take(struct check *check, int folder, const char *name)
{
    struct firn_roll_item *item = firn_names_find(check->roll.items, check->name, check->name_bytes);
    enum firn_status status = FIRN_OK;
    struct stat facts;

    if (fstatat(folder, name, &facts, AT_SYMLINK_NOFOLLOW) != 0) {
        tell_here(check, FIRN_MANIFEST_UNREADABLE, errno, "");
        return FIRN_OK;
    }
    if (item != NULL && item->chosen)
        status = compare(check, folder, name, &facts, item);
    else if (item == NULL && wanted(check) && !is_way(check, &facts))
        tell_here(check, FIRN_MANIFEST_EXTRA, 0, "");
    if (status == FIRN_OK && S_ISDIR(facts.st_mode))
        status = go_into(check, firn_quietly_open(folder, name, O_RDONLY | O_DIRECTORY));
    return status;
}

/* Makes `name` in the folder whose name has `mark` bytes the one at hand. */
static bool go_to(struct check *check, size_t mark, const char *name)
{
    size_t bytes = strlen(name), slash = mark > 0;

    if (bytes + slash > FIRN_INTAKE_NAME_MAX - mark)
        return false;
    if (slash)
        check->name[mark] = '/';
    memcpy(check->name + mark + slash, name, bytes + 1);
    check->name_bytes = mark + slash + bytes;
    return true;
}

static enum firn_status go_through(struct check *check)
{
    enum firn_status status = FIRN_OK;

    while (status == FIRN_OK) {
        const char *name;
        size_t mark;
        int folder;

        if (check->options->stop != NULL && check->options->stop(check->options->self))
            return FIRN_STOPPED;
        status = firn_intake_walk_next(check->walk, &folder, &name, &mark);
        if (status == FIRN_CHANGED) {
            check->name[check->name_bytes = mark] = '\0';
            tell_here(check, FIRN_MANIFEST_UNREADABLE, 0, "this folder was moved: the rest of it was not compared");
            status = FIRN_OK;
        } else if (status == FIRN_OK && !go_to(check, mark, name)) {
            tell(check, FIRN_MANIFEST_EXTRA, name, ENAMETOOLONG, "");
        } else if (status == FIRN_OK) {
            status = take(check, folder, name);
        }
    }
    return status == FIRN_END ? FIRN_OK : status;
}

/* ---- the whole ---- */

static void tell_missing(struct check *check)
{
    for (size_t i = 0; i < firn_names_count(check->roll.items); i++) {
        const char *name;
        const struct firn_roll_item *item = firn_names_at(check->roll.items, i, &name);

        check->report->items += item->chosen;
        if (item->chosen && !item->seen)
            tell(check, FIRN_MANIFEST_MISSING, name + check->roll.below_bytes, 0, "");
    }
}

static enum firn_status start(struct check *check)
{
    const struct firn_memory *memory = check->options->memory;
    enum firn_status status = firn_digest_make(&check->digest);

    check->portion = memory->get(memory->self, PORTION_BYTES);
    if (status == FIRN_OK && check->portion == NULL)
        status = FIRN_NO_MEMORY;
    if (status == FIRN_OK)
        status = firn_names_make(memory, 1, &check->ways);
    if (status == FIRN_OK)
        status = enter_ways(check);
    if (status == FIRN_OK)
        status = firn_intake_walk_make(memory, &check->walk);
    return status;
}

/* The folder itself may be reached by a link: whoever names it means what it leads to. */
static enum firn_status open_folder(struct check *check, struct firn_fault *fault)
{
    const char *folder = check->options->folder, *below = check->options->choice.below;
    int descriptor = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);

    if (descriptor < 0)
        return firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, folder);
    (void)firn_stored_name_make(below == NULL ? "" : below, check->name, NULL);
    check->name_bytes = strlen(check->name);
    check->below_bytes = check->roll.below_bytes;
    return go_into(check, descriptor);
}

enum firn_status firn_manifest_check(struct firn_reader *reader, const struct firn_manifest_check_options *options,
                                     struct firn_fault *fault, struct firn_manifest_check_report *report)
{
    struct check *check = firn_memory_get_zeroed(options->memory, 1, sizeof *check);
    enum firn_status status;

    *report = (struct firn_manifest_check_report){ 0 };
    if (check == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    check->options = options;
    check->report = report;
    status = firn_roll_make(reader, options->memory, &options->choice, fault, &check->roll);
    report->items_unknown = check->roll.items_unknown;
    report->cut_short = check->roll.cut_short;
    if (status == FIRN_OK)
        status = start(check);
    if (status == FIRN_OK)
        status = open_folder(check, fault);
    if (status == FIRN_OK)
        status = go_through(check);
    if (status == FIRN_OK)
        tell_missing(check);
    firn_intake_walk_free(check->walk);
    options->memory->put(options->memory->self, check->portion);
    firn_digest_free(check->digest);
    firn_names_free(check->ways);
    firn_roll_end(&check->roll);
    options->memory->put(options->memory->self, check);
    return status;
}
