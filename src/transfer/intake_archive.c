/* transfer/intake_archive.c - taking in what an archive holds */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/intake.h"

#include "base/fault.h"
#include "container/digest.h"
#include "transfer/archive_feed.h"
#include "transfer/holes.h"
#include "transfer/intake_run.h"
#include "transfer/names.h"
#include "transfer/stored_name.h"

#include <errno.h>
#include <string.h>

enum { RETRIES_MAX = 100 };

/* A name whose bytes are yet to come with a later link to it, as in cpio, and the links that wait for it. */
struct waiting {
    struct archive_entry *entry;        /* NULL: stored by now */
    struct link *first, *last;
};

struct link {
    struct link *next;
    struct archive_entry *entry;
};

/* A file of several names that was stored with its bytes. */
struct summed {
    bool known;
    uint64_t bytes;
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
};

struct job {
    struct firn_intake_run run;
    struct firn_archive_feed *feed;
    struct archive *archive;
    struct archive_entry *entry;            /* the one read last, lent by feed */
    struct firn_holes holes;
    struct firn_store spool;                /* for content of unknown size; open if read_at is there */
    struct firn_digest *digest;
    struct firn_names *waiting;             /* struct waiting by stored name */
    struct firn_names *summed;              /* struct summed by stored name */
    struct firn_names *missing;             /* files that were not stored, by stored name; no record */
    char name[FIRN_STORED_NAME_ROOM];       /* of the entry read last */
    const char *lone_name;                  /* for a compressed file that is no archive */
    bool broken;                            /* the archive cannot be read on */
    bool damaged;
};

/* How reading an entry's content ended. */
enum content {
    CONTENT_WHOLE,
    CONTENT_REFUSED,      /* not a byte of it can be had */
    CONTENT_WRONG         /* breaks off, or is not what was announced */
};

static const char *words(struct job *job)
{
    const char *text = archive_error_string(job->archive);

    return text == NULL ? "" : text;
}

static const char *given_name(struct job *job)
{
    const char *name = archive_entry_pathname(job->entry);

    return name == NULL ? "" : name;
}

static void tell(struct job *job, enum firn_intake_kind kind, int os_error, const char *detail)
{
    firn_intake_run_tell(&job->run, kind, given_name(job), os_error, detail);
}

/* ---- content on its way ---- */

/* Brings bytes of a file to the writer as far as they lie in its extents, zeros where nothing came. */
struct flow {
    struct job *job;
    const struct firn_item *item;
    size_t extent;            /* the first that is not delivered */
    uint64_t at;              /* of the file, delivered up to here */
};

static bool all_zero(const uint8_t *bytes, uint64_t count)
{
    for (uint64_t i = 0; i < count; i++)
        if (bytes[i] != 0)
            return false;
    return true;
}

/* The next count bytes of the file; NULL: zeros. FIRN_BAD_DATA: more than announced, or data where a hole should be. */
static enum firn_status deliver(struct flow *flow, const uint8_t *bytes, uint64_t count)
{
    enum firn_status status = FIRN_OK;

    if (count > flow->item->bytes - flow->at)
        return FIRN_BAD_DATA;
    while (count > 0 && status == FIRN_OK) {
        const struct firn_item_extent *extent =
            flow->extent < flow->item->extent_count ? &flow->item->extents[flow->extent] : NULL;
        bool hole = extent == NULL || flow->at < extent->at;
        uint64_t end = extent == NULL ? flow->item->bytes : hole ? extent->at : extent->at + extent->bytes;
        uint64_t portion = end - flow->at < count ? end - flow->at : count;

        if (!hole)
            status = firn_intake_run_content(&flow->job->run, bytes, portion);
        else if (bytes != NULL && !all_zero(bytes, portion))
            status = FIRN_BAD_DATA;
        flow->at += portion;
        flow->extent += !hole && flow->at == end;
        count -= portion;
        if (bytes != NULL)
            bytes += portion;
    }
    return status;
}

/* Where the bytes of an entry go: returns FIRN_OK, FIRN_BAD_DATA, or what ends the work. */
typedef enum firn_status (taker)(void *self, uint64_t at, const uint8_t *bytes, size_t count);

/* Reads the content of the entry read last. status: of the taker. */
static enum content read_content(struct job *job, taker *take, void *self, enum firn_status *status)
{
    bool begun = false;

    *status = FIRN_OK;
    for (;;) {
        const void *bytes;
        size_t count;
        la_int64_t at;
        int result = archive_read_data_block(job->archive, &bytes, &count, &at);

        if (result == ARCHIVE_EOF)
            return CONTENT_WHOLE;
        job->broken = job->broken || result <= ARCHIVE_FATAL;
        if (result != ARCHIVE_OK)
            return begun || job->broken ? CONTENT_WRONG : CONTENT_REFUSED;
        begun = begun || count > 0;
        *status = at < 0 ? FIRN_BAD_DATA : take(self, (uint64_t)at, bytes, count);
        if (*status != FIRN_OK)
            return CONTENT_WRONG;
    }
}

static enum firn_status take_flow(void *self, uint64_t at, const uint8_t *bytes, size_t count)
{
    struct flow *flow = self;
    enum firn_status status = at < flow->at ? FIRN_BAD_DATA : deliver(flow, NULL, at - flow->at);

    return status == FIRN_OK ? deliver(flow, bytes, count) : status;
}

/* ---- storing ---- */

/* The stored name of an entry: making a header puts a slash behind that of a folder. */
static const char *name_of(struct job *job, struct archive_entry *entry)
{
    return entry == job->entry ? job->name : archive_entry_pathname(entry);
}

/* The entry, which is under its stored name by now; announced, but without its end. */
static enum firn_status announce(struct job *job, struct archive_entry *entry, const struct firn_item *item)
{
    enum firn_status status;

    firn_archive_feed_leave(job->feed);      /* making a header goes by a locale of its own */
    status = firn_intake_run_announce(&job->run, entry, item, name_of(job, entry));
    firn_archive_feed_enter(job->feed);
    return status;
}

/* Not stored: links to it cannot be stored either. */
static enum firn_status miss(struct job *job, const char *name)
{
    void *record;

    return firn_names_add(job->missing, name, strlen(name), &record, NULL);
}

/* Ends the announced file. Remembers its digest if it has several names. */
static enum firn_status finish_file(struct job *job, struct archive_entry *entry, uint64_t bytes)
{
    struct firn_intake_item told = { .name = archive_entry_pathname(entry), .has_content = true, .bytes = bytes };
    bool several = archive_entry_nlink(entry) > 1;
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
    enum firn_status status = firn_intake_run_stored(&job->run, &told, sha256);
    void *record;

    if (status != FIRN_OK || !several)
        return status;
    status = firn_names_add(job->summed, told.name, strlen(told.name), &record, NULL);
    if (status == FIRN_OK) {
        struct summed *summed = record;

        summed->known = true;
        summed->bytes = bytes;
        memcpy(summed->sha256, sha256, sizeof sha256);
    }
    return status;
}

/* What cannot be had of a file is told; if it was announced, it is withdrawn. */
static enum firn_status give_up(struct job *job, const char *name, enum content content, bool announced,
                                const char *why)
{
    enum firn_intake_kind kind = content == CONTENT_REFUSED ? FIRN_INTAKE_UNREADABLE : FIRN_INTAKE_DAMAGED;
    enum firn_status status = firn_intake_run_go_on(&job->run);
    int os_error = firn_archive_feed_error(job->feed);

    if (status != FIRN_OK)      /* it is cut short because we are asked to stop */
        return status;
    if (archive_entry_is_encrypted(job->entry) > 0)
        kind = FIRN_INTAKE_ENCRYPTED;
    job->damaged = job->damaged || kind == FIRN_INTAKE_DAMAGED;
    if (announced)
        status = firn_intake_run_withdraw(&job->run, kind, given_name(job), os_error, why);
    else
        tell(job, kind, os_error, why);
    return status == FIRN_OK ? miss(job, name) : status;
}

/* The extents of an entry whose size is known. FIRN_OK, FIRN_NO_MEMORY, FIRN_BAD_DATA. */
static enum firn_status map_entry(struct job *job, struct archive_entry *entry, uint64_t size)
{
    uint64_t end = 0;
    la_int64_t at, bytes;
    enum firn_status status = FIRN_OK;

    firn_holes_clear(&job->holes);
    if (archive_entry_sparse_reset(entry) == 0)
        return size == 0 ? FIRN_OK : firn_holes_add(&job->holes, 0, size);
    while (status == FIRN_OK && archive_entry_sparse_next(entry, &at, &bytes) == ARCHIVE_OK) {
        if (at < 0 || bytes < 0 || (uint64_t)at < end || (uint64_t)at > size || (uint64_t)bytes > size - (uint64_t)at)
            return FIRN_BAD_DATA;
        if (bytes > 0)
            status = firn_holes_add(&job->holes, (uint64_t)at, (uint64_t)bytes);
        end = (uint64_t)at + (uint64_t)bytes;
    }
    return status;
}

/*
 * Stores `entry` with the content of the entry read last, whose size is known. They are the same but where a first name
 * waited for its bytes.
 */
static enum firn_status store_sized(struct job *job, struct archive_entry *entry)
{
    uint64_t size = (uint64_t)archive_entry_size(job->entry);
    enum firn_status status = map_entry(job, job->entry, size);
    struct firn_item item = {
        .has_content = true, .bytes = size, .extents = job->holes.extents, .extent_count = job->holes.count
    };
    struct flow flow = { .job = job, .item = &item };
    enum content content;

    if (status == FIRN_BAD_DATA)
        return give_up(job, archive_entry_pathname(entry), CONTENT_WRONG, false, "a map of holes that makes no sense");
    archive_entry_set_size(entry, (la_int64_t)size);
    if (status == FIRN_OK)
        status = announce(job, entry, &item);
    if (status != FIRN_OK)
        return status;
    content = read_content(job, take_flow, &flow, &status);
    if (status != FIRN_OK && status != FIRN_BAD_DATA)
        return status;
    if (content == CONTENT_WHOLE && flow.extent < item.extent_count)
        return give_up(job, archive_entry_pathname(entry), CONTENT_WRONG, true, "shorter than announced");
    if (content != CONTENT_WHOLE)
        return give_up(job, archive_entry_pathname(entry), content, true,
                       status == FIRN_BAD_DATA ? "longer than announced" : words(job));
    return finish_file(job, entry, size);
}

/* ---- content whose size comes with its end ---- */

struct spooling {
    struct job *job;
    uint64_t end;
};

static enum firn_status take_spool(void *self, uint64_t at, const uint8_t *bytes, size_t count)
{
    struct spooling *spooling = self;
    struct firn_store *spool = &spooling->job->spool;
    int os_error = 0;
    enum firn_status status;

    if (at < spooling->end || count > INT64_MAX - at)
        return FIRN_BAD_DATA;
    firn_digest_add_zeros(spooling->job->digest, at - spooling->end);
    firn_digest_add(spooling->job->digest, bytes, count);
    status = spool->write_at(spool->self, at, bytes, count, &os_error);
    spooling->end = at + count;
    return status == FIRN_OK ? FIRN_OK
                             : firn_fault_tell(spooling->job->run.fault, FIRN_IO, os_error, at, "a temporary file");
}

/* Copies the content of the entry read last to the spool. content tells how it went if the result is FIRN_OK. */
static enum firn_status fill_spool(struct job *job, enum content *content, uint64_t *size,
                                   uint8_t sha256[FIRN_ITEM_SHA256_BYTES])
{
    struct spooling spooling = { .job = job };
    enum firn_status status = FIRN_OK;
    int os_error = 0;

    if (job->spool.read_at == NULL)
        status = firn_store_temporary(NULL, job->run.memory, &job->spool, job->run.fault);
    else
        status = job->spool.resize(job->spool.self, 0, &os_error);
    if (status == FIRN_OK && job->digest == NULL)
        status = firn_digest_make(&job->digest);
    if (status != FIRN_OK)
        return status;
    firn_digest_start(job->digest);
    *content = read_content(job, take_spool, &spooling, &status);
    firn_digest_finish(job->digest, sha256);
    *size = spooling.end;
    return status == FIRN_BAD_DATA ? FIRN_OK : status;
}

static enum firn_status store_spooled(struct job *job, uint64_t size)
{
    const struct firn_item_extent all = { .at = 0, .bytes = size };
    const struct firn_item item = { .has_content = true, .bytes = size, .extents = &all, .extent_count = size > 0 };
    enum firn_status status;
    uint64_t at = 0;

    archive_entry_set_size(job->entry, (la_int64_t)size);
    status = announce(job, job->entry, &item);
    while (status == FIRN_OK && at < size) {
        size_t wanted = size - at < FIRN_INTAKE_RUN_BUFFER_BYTES ? (size_t)(size - at) : FIRN_INTAKE_RUN_BUFFER_BYTES;
        size_t got = 0;
        int os_error = 0;

        status = job->spool.read_at(job->spool.self, at, job->run.buffer, wanted, &got, &os_error);
        if (status != FIRN_OK || got < wanted)
            return firn_fault_tell(job->run.fault, FIRN_IO, os_error, at, "a temporary file");
        status = firn_intake_run_content(&job->run, job->run.buffer, got);
        at += got;
    }
    return status == FIRN_OK ? finish_file(job, job->entry, size) : status;
}

static enum firn_status take_unsized(struct job *job)
{
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
    enum content content = CONTENT_WHOLE;
    uint64_t size = 0;
    enum firn_status status = fill_spool(job, &content, &size, sha256);

    if (status != FIRN_OK)
        return status;
    return content == CONTENT_WHOLE ? store_spooled(job, size) : give_up(job, job->name, content, false, words(job));
}

/* ---- items without content ---- */

/* sha256: of the file that a hard link leads to, may be NULL. */
static enum firn_status store_bare(struct job *job, struct archive_entry *entry, const uint8_t *sha256)
{
    const struct firn_item item = { .has_content = false };
    struct firn_intake_item told = {
        .name = name_of(job, entry), .link = archive_entry_hardlink(entry), .sha256 = sha256
    };
    enum firn_status status;

    archive_entry_set_size(entry, 0);
    status = announce(job, entry, &item);
    return status == FIRN_OK ? firn_intake_run_stored(&job->run, &told, NULL) : status;
}

/* A hard link under the name `target` is stored by. */
static enum firn_status store_link(struct job *job, struct archive_entry *entry, const char *target)
{
    const struct summed *summed = firn_names_find(job->summed, target, strlen(target));

    if (firn_names_find(job->missing, target, strlen(target)) != NULL) {
        firn_intake_run_tell(&job->run, FIRN_INTAKE_UNREADABLE, archive_entry_pathname(entry), 0,
                             "a hard link to an item that was left out");
        return FIRN_OK;
    }
    archive_entry_copy_hardlink(entry, target);
    return store_bare(job, entry, summed == NULL ? NULL : summed->sha256);
}

/* ---- first names that wait for their bytes ---- */

static struct waiting *waiting_for(struct job *job, const char *name)
{
    struct waiting *waiting = firn_names_find(job->waiting, name, strlen(name));

    return waiting != NULL && waiting->entry != NULL ? waiting : NULL;
}

static enum firn_status wait_for_bytes(struct job *job)
{
    void *record;
    enum firn_status status = firn_names_add(job->waiting, job->name, strlen(job->name), &record, NULL);
    struct waiting *waiting = record;

    if (status != FIRN_OK)
        return status;
    archive_entry_free(waiting->entry);
    waiting->entry = archive_entry_clone(job->entry);
    return waiting->entry == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

static enum firn_status wait_with(struct job *job, struct waiting *waiting)
{
    struct link *link = job->run.memory->get(job->run.memory->self, sizeof *link);

    if (link == NULL)
        return FIRN_NO_MEMORY;
    *link = (struct link){ .entry = archive_entry_clone(job->entry) };
    if (waiting->last == NULL)
        waiting->first = link;
    else
        waiting->last->next = link;
    waiting->last = link;
    return link->entry == NULL ? FIRN_NO_MEMORY : FIRN_OK;
}

/* Stores the links that wait for a name which was stored, or forgets them. */
static enum firn_status release_links(struct job *job, struct waiting *waiting, const char *target, bool keep)
{
    enum firn_status status = FIRN_OK;

    while (waiting->first != NULL) {
        struct link *link = waiting->first;

        waiting->first = link->next;
        if (keep && status == FIRN_OK)
            status = store_link(job, link->entry, target);
        if (status == FIRN_END)
            status = FIRN_OK;
        archive_entry_free(link->entry);
        job->run.memory->put(job->run.memory->self, link);
    }
    waiting->last = NULL;
    return status;
}

/* The bytes have come with the entry read last: the first name, then the links that waited, then this one. */
static enum firn_status release(struct job *job, struct waiting *waiting, const char *target)
{
    struct archive_entry *first = waiting->entry;
    enum firn_status status = store_sized(job, first);

    waiting->entry = NULL;
    archive_entry_free(first);
    if (status == FIRN_END)      /* told of already */
        status = miss(job, target);
    if (status == FIRN_OK)
        status = release_links(job, waiting, target, true);
    return status == FIRN_OK ? store_link(job, job->entry, target) : status;
}

/* Bytes never came: the files are empty. */
static enum firn_status release_all(struct job *job, bool keep)
{
    const struct firn_item empty = { .has_content = true };
    enum firn_status status = FIRN_OK;

    for (size_t i = 0; i < firn_names_count(job->waiting); i++) {
        const char *name;
        struct waiting *waiting = firn_names_at(job->waiting, i, &name);

        if (keep && status == FIRN_OK && waiting->entry != NULL) {
            status = announce(job, waiting->entry, &empty);
            if (status == FIRN_OK)
                status = finish_file(job, waiting->entry, 0);
            if (status == FIRN_END)
                status = miss(job, name);
        }
        archive_entry_free(waiting->entry);
        waiting->entry = NULL;
        if (status == FIRN_OK)
            status = release_links(job, waiting, name, keep);
        else
            (void)release_links(job, waiting, name, false);
    }
    return status;
}

/* ---- one entry ---- */

/* A hard link that brings bytes along, though its first name has its own. */
static enum firn_status take_full_link(struct job *job, const char *target)
{
    const struct summed *summed = firn_names_find(job->summed, target, strlen(target));
    uint8_t sha256[FIRN_ITEM_SHA256_BYTES];
    enum content content = CONTENT_WHOLE;
    uint64_t size = 0;
    enum firn_status status = fill_spool(job, &content, &size, sha256);

    if (status != FIRN_OK)
        return status;
    if (content != CONTENT_WHOLE)
        return give_up(job, job->name, content, false, words(job));
    if (summed != NULL && summed->known && summed->bytes == size && memcmp(summed->sha256, sha256, sizeof sha256) == 0)
        return store_link(job, job->entry, target);
    tell(job, FIRN_INTAKE_UNLINKED, 0, "has bytes of its own");
    archive_entry_set_hardlink(job->entry, NULL);
    archive_entry_set_filetype(job->entry, AE_IFREG);
    return store_spooled(job, size);
}

static enum firn_status take_hard_link(struct job *job)
{
    char target[FIRN_STORED_NAME_ROOM];
    bool full = archive_entry_size_is_set(job->entry) && archive_entry_size(job->entry) > 0;
    struct waiting *waiting;

    if (firn_stored_name_make(archive_entry_hardlink(job->entry), target, NULL) != FIRN_OK || target[0] == '\0') {
        tell(job, FIRN_INTAKE_UNSUPPORTED, 0, "a hard link to no name");
        return FIRN_OK;
    }
    waiting = waiting_for(job, target);
    if (waiting != NULL)
        return full ? release(job, waiting, target) : wait_with(job, waiting);
    return full ? take_full_link(job, target) : store_link(job, job->entry, target);
}

static enum firn_status take_file(struct job *job)
{
    bool cpio = firn_archive_feed_family(job->feed) == ARCHIVE_FORMAT_CPIO;

    if (!archive_entry_size_is_set(job->entry))
        return take_unsized(job);
    if (archive_entry_size(job->entry) < 0)
        return give_up(job, job->name, CONTENT_WRONG, false, "a size below zero");
    if (cpio && archive_entry_nlink(job->entry) > 1 && archive_entry_size(job->entry) == 0)
        return wait_for_bytes(job);
    return store_sized(job, job->entry);
}

static enum firn_status take_kind(struct job *job)
{
    if (archive_entry_hardlink(job->entry) != NULL)
        return take_hard_link(job);
    switch (archive_entry_filetype(job->entry)) {
    case AE_IFREG:
        return take_file(job);
    case AE_IFLNK:
        if (archive_entry_symlink(job->entry) == NULL) {
            tell(job, FIRN_INTAKE_UNSUPPORTED, 0, "a link target that cannot be read");
            return FIRN_OK;
        }
        return store_bare(job, job->entry, NULL);
    case AE_IFDIR:
    case AE_IFCHR:
    case AE_IFBLK:
    case AE_IFIFO:
        return store_bare(job, job->entry, NULL);
    default:
        tell(job, FIRN_INTAKE_UNSUPPORTED, 0, "an unknown kind of item");
        return FIRN_OK;
    }
}

/* Brings the name of the entry into stored form. False: there is nothing to store, and that was told if need be. */
static bool name_entry(struct job *job)
{
    const char *given = archive_entry_pathname(job->entry);
    bool dots;

    if (archive_format(job->archive) == ARCHIVE_FORMAT_RAW)
        given = job->lone_name;
    if (given == NULL) {
        tell(job, FIRN_INTAKE_UNSUPPORTED, 0, "a name that cannot be read");
        return false;
    }
    if (firn_stored_name_make(given, job->name, &dots) != FIRN_OK) {
        tell(job, FIRN_INTAKE_UNSUPPORTED, ENAMETOOLONG, "");
        return false;
    }
    if (job->name[0] == '\0') {      /* `.` or `/`: the folder around it all */
        if (archive_entry_filetype(job->entry) != AE_IFDIR)
            tell(job, FIRN_INTAKE_UNSUPPORTED, 0, "an item without a name");
        return false;
    }
    if (dots)
        tell(job, FIRN_INTAKE_RENAMED, 0, job->name);
    return true;
}

/* A time of -1.25 seconds in a tar archive comes from libarchive as -1 and .25 apart; it is -2 and .75. */
static void mend_time(struct job *job)
{
    time_t seconds = archive_entry_mtime(job->entry);
    long nanoseconds = archive_entry_mtime_nsec(job->entry);

    if (firn_archive_feed_family(job->feed) == ARCHIVE_FORMAT_TAR && seconds < 0 && nanoseconds > 0)
        archive_entry_set_mtime(job->entry, seconds - 1, 1000000000 - nanoseconds);
}

static bool is_plain_file(struct archive_entry *entry)
{
    return archive_entry_hardlink(entry) == NULL && archive_entry_filetype(entry) == AE_IFREG;
}

static enum firn_status take_entry(struct job *job)
{
    if (!name_entry(job))
        return FIRN_OK;
    if (job->run.options->exclude != NULL && firn_pattern_match(job->run.options->exclude, job->name)) {
        job->run.report->excluded++;
        return is_plain_file(job->entry) ? miss(job, job->name) : FIRN_OK;
    }
    if (archive_entry_is_data_encrypted(job->entry) > 0) {
        tell(job, FIRN_INTAKE_ENCRYPTED, 0, "");
        return is_plain_file(job->entry) ? miss(job, job->name) : FIRN_OK;
    }
    archive_entry_copy_pathname(job->entry, job->name);
    mend_time(job);
    return take_kind(job);
}

/* ---- all entries ---- */

/* A lone file that is not even compressed could be anything: that is no archive. */
static bool is_no_archive(struct job *job)
{
    return archive_format(job->archive) == ARCHIVE_FORMAT_RAW && archive_filter_count(job->archive) < 2;
}

/* Reading on is not possible. */
static void tell_break(struct job *job, const char *path)
{
    bool encrypted = archive_read_has_encrypted_entries(job->archive) > 0;

    job->broken = job->damaged = true;
    firn_intake_run_tell(&job->run, encrypted ? FIRN_INTAKE_ENCRYPTED : FIRN_INTAKE_DAMAGED, path,
                         firn_archive_feed_error(job->feed), words(job));
}

static enum firn_status take_all(struct job *job, const char *path)
{
    enum firn_status status = FIRN_OK;
    unsigned retries = 0;

    while (status == FIRN_OK && !job->broken && (status = firn_intake_run_go_on(&job->run)) == FIRN_OK) {
        int result = firn_archive_feed_next(job->feed, &job->entry);

        if (result == ARCHIVE_EOF) {
            if (firn_archive_feed_ended_well(job->feed))
                return FIRN_OK;
            job->damaged = true;
            firn_intake_run_tell(&job->run, FIRN_INTAKE_DAMAGED, path, 0, "the end mark is missing");
            return FIRN_OK;
        }
        if (result <= ARCHIVE_FATAL || retries == RETRIES_MAX) {
            status = firn_intake_run_go_on(&job->run);      /* or is it because we are asked to stop? */
            if (status == FIRN_OK)
                tell_break(job, path);
        } else if (result < ARCHIVE_WARN || result == ARCHIVE_RETRY) {
            retries++;
            firn_intake_run_tell(&job->run, FIRN_INTAKE_UNREADABLE, path, 0, words(job));
        } else if (is_no_archive(job)) {
            return firn_fault_tell(job->run.fault, FIRN_BAD_DATA, 0, 0, path);
        } else {
            retries = 0;
            firn_archive_feed_enter(job->feed);
            status = take_entry(job);
            firn_archive_feed_leave(job->feed);
            if (status == FIRN_END)      /* told of already */
                status = miss(job, job->name);
        }
    }
    return status;
}

/* `dir/plan.dwg.gz` holds `plan.dwg`. */
static const char *lone_name_of(const char *path, char name[FIRN_STORED_NAME_ROOM])
{
    const char *last = strrchr(path, '/');
    size_t bytes;
    char *dot;

    last = last == NULL ? path : last + 1;
    bytes = strnlen(last, FIRN_INTAKE_NAME_MAX);
    if (bytes == 0 || strcmp(last, "-") == 0)
        return "data";
    memcpy(name, last, bytes);
    name[bytes] = '\0';
    dot = strrchr(name, '.');
    if (dot != NULL && dot != name)
        *dot = '\0';
    return name;
}

static enum firn_status start(struct job *job, const char *path)
{
    const struct firn_memory *memory = job->run.memory;
    enum firn_status status = firn_names_make(memory, sizeof(struct waiting), &job->waiting);

    if (status == FIRN_OK)
        status = firn_names_make(memory, sizeof(struct summed), &job->summed);
    if (status == FIRN_OK)
        status = firn_names_make(memory, 0, &job->missing);
    if (status != FIRN_OK)
        return firn_fault_tell(job->run.fault, status, 0, 0, path);
    status = firn_archive_feed_open(path, job->run.options->stop, job->run.options->self, memory, job->run.fault,
                                    &job->feed);
    if (status != FIRN_OK && firn_intake_run_go_on(&job->run) == FIRN_STOPPED)
        return firn_fault_tell(job->run.fault, FIRN_STOPPED, 0, 0, path);
    if (status == FIRN_OK)
        job->archive = firn_archive_feed_archive(job->feed);
    return status;
}

static void end(struct job *job)
{
    if (job->waiting != NULL)
        (void)release_all(job, false);
    firn_names_free(job->waiting);
    firn_names_free(job->summed);
    firn_names_free(job->missing);
    firn_archive_feed_close(job->feed);
    firn_holes_end(&job->holes);
    firn_digest_free(job->digest);
    if (job->spool.close != NULL)
        job->spool.close(job->spool.self);
}

static enum firn_status run(struct job *job, const char *path)
{
    char lone[FIRN_STORED_NAME_ROOM];
    enum firn_status status;

    firn_holes_start(&job->holes, job->run.memory);
    job->lone_name = lone_name_of(path, lone);
    status = start(job, path);
    if (status == FIRN_OK)
        status = take_all(job, path);
    if (status == FIRN_OK) {
        firn_archive_feed_enter(job->feed);
        status = release_all(job, true);
        firn_archive_feed_leave(job->feed);
    }
    if (status == FIRN_OK && job->damaged && !job->run.options->keep_beginning) {
        int os_error = firn_archive_feed_error(job->feed);

        status = firn_fault_tell(job->run.fault, os_error != 0 ? FIRN_IO : FIRN_BAD_DATA, os_error, 0, path);
    }
    end(job);
    return status;
}

enum firn_status firn_intake_archive(struct firn_writer *writer, const char *path,
                                     const struct firn_intake_options *options, struct firn_fault *fault,
                                     struct firn_intake_report *report)
{
    struct job *job = options->memory->get(options->memory->self, sizeof *job);
    enum firn_status status;

    if (job == NULL) {
        *report = (struct firn_intake_report){ 0 };
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    }
    memset(job, 0, sizeof *job);
    status = firn_intake_run_start(&job->run, writer, options, fault, report);
    if (status == FIRN_OK)
        status = run(job, path);
    firn_intake_run_end(&job->run);
    options->memory->put(options->memory->self, job);
    return status;
}
