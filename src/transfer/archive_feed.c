/* transfer/archive_feed.c - the bytes of an archive on their way to libarchive */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/archive_feed.h"

#include "base/fault.h"
#include "base/memory.h"

#include <errno.h>
#include <fcntl.h>
#include <locale.h>
#include <sys/stat.h>
#include <unistd.h>

/* PEEK_BYTES: an ISO 9660 image begins with 16 sectors of anything */
enum { PORTION_BYTES = 1 << 18, ISO_MARK_AT = 32769, PEEK_BYTES = ISO_MARK_AT + 5, RECORD_BYTES = 512 };

struct firn_archive_feed {
    const struct firn_memory *memory;
    bool (*stop)(void *self);
    void *stop_self;
    struct archive *archive;
    struct archive_entry *entry;
    bool ahead;                      /* an entry was read, but not handed out */
    int ahead_result;
    locale_t bytes, unicode, locale, before;      /* locale is one of the first two */
    int descriptor;
    bool own;                        /* the descriptor is closed with the feed */
    bool searchable;
    struct firn_store spool;         /* of what came through a pipe; unused while self is NULL */
    uint64_t base;                   /* of a searchable descriptor: where the archive starts in it */
    uint64_t at, size;               /* in the archive; size of a searchable one */
    uint8_t *portions[2];            /* the last two that were handed out */
    uint64_t portion_at[2];
    size_t portion_bytes[2];
    unsigned newest;
    size_t peeked;                   /* bytes in portions[0] that wait to be handed out */
    int os_error;
};

/* ---- reading ---- */

static ssize_t read_some(struct firn_archive_feed *feed, uint8_t *bytes, size_t count)
{
    ssize_t got;

    do
        got = feed->searchable ? pread(feed->descriptor, bytes, count, (off_t)(feed->base + feed->at))
                               : read(feed->descriptor, bytes, count);
    while (got < 0 && errno == EINTR && !(feed->stop != NULL && feed->stop(feed->stop_self)));
    return got;
}

static la_ssize_t fetch(struct firn_archive_feed *feed, uint8_t *bytes)
{
    size_t got;
    ssize_t count;

    if (feed->spool.read_at != NULL) {
        if (feed->spool.read_at(feed->spool.self, feed->at, bytes, PORTION_BYTES, &got, &feed->os_error) != FIRN_OK)
            return -1;
        return (la_ssize_t)got;
    }
    count = read_some(feed, bytes, PORTION_BYTES);
    if (count < 0)
        feed->os_error = errno;
    return count;
}

static la_ssize_t feed_read(struct archive *archive, void *self, const void **bytes)
{
    struct firn_archive_feed *feed = self;
    unsigned other = feed->newest ^ 1;
    la_ssize_t got;

    if (feed->peeked > 0) {
        other = 0;
        got = (la_ssize_t)feed->peeked;
        feed->peeked = 0;
    } else {
        got = fetch(feed, feed->portions[other]);
    }
    if (got < 0) {
        archive_set_error(archive, feed->os_error, "reading failed");
        return ARCHIVE_FATAL;
    }
    *bytes = feed->portions[other];
    if (got > 0) {
        feed->newest = other;
        feed->portion_at[other] = feed->at;
        feed->portion_bytes[other] = (size_t)got;
        feed->at += (uint64_t)got;
    }
    return got;
}

static la_int64_t feed_skip(struct archive *archive, void *self, la_int64_t request)
{
    struct firn_archive_feed *feed = self;
    uint64_t left = feed->searchable && feed->at < feed->size ? feed->size - feed->at : 0;

    (void)archive;
    if (request <= 0 || left == 0)
        return 0;
    if ((uint64_t)request > left)
        request = (la_int64_t)left;
    feed->at += (uint64_t)request;
    return request;
}

static la_int64_t feed_seek(struct archive *archive, void *self, la_int64_t offset, int whence)
{
    struct firn_archive_feed *feed = self;
    la_int64_t from = whence == SEEK_SET ? 0 : whence == SEEK_CUR ? (la_int64_t)feed->at : (la_int64_t)feed->size;

    (void)archive;
    if (offset < -from || offset > INT64_MAX - from)
        return ARCHIVE_FATAL;
    feed->at = (uint64_t)(from + offset);
    return from + offset;
}

/* ---- what is read ---- */

typedef int (support)(struct archive *);

/* A filter that would start a program answers with a warning on being enabled, so a scratch object tries it first. */
static bool reads_by_itself(support *filter)
{
    struct archive *scratch = archive_read_new();
    bool alone = scratch != NULL && filter(scratch) == ARCHIVE_OK;

    archive_read_free(scratch);
    return alone;
}

static bool enable(struct archive *archive)
{
    static support *const filters[] = {
        archive_read_support_filter_none, archive_read_support_filter_gzip, archive_read_support_filter_bzip2,
        archive_read_support_filter_compress, archive_read_support_filter_xz, archive_read_support_filter_lzma,
        archive_read_support_filter_lzip, archive_read_support_filter_zstd, archive_read_support_filter_lz4,
        archive_read_support_filter_uu, archive_read_support_filter_rpm,
    };
    static support *const formats[] = {
        archive_read_support_format_7zip, archive_read_support_format_ar, archive_read_support_format_cab,
        archive_read_support_format_cpio, archive_read_support_format_iso9660, archive_read_support_format_lha,
        archive_read_support_format_rar, archive_read_support_format_rar5, archive_read_support_format_tar,
        archive_read_support_format_warc, archive_read_support_format_xar, archive_read_support_format_zip,
        archive_read_support_format_raw,
    };
    bool enabled = true;

    for (size_t i = 0; i < sizeof filters / sizeof filters[0]; i++)
        if (reads_by_itself(filters[i]))
            enabled = enabled && filters[i](archive) == ARCHIVE_OK;
    for (size_t i = 0; i < sizeof formats / sizeof formats[0]; i++)
        enabled = enabled && formats[i](archive) >= ARCHIVE_WARN;      /* it lacks a library for some archives */
    return enabled;
}

static enum firn_status start_reading(struct firn_archive_feed *feed, const char *path, struct firn_fault *fault)
{
    struct archive *archive = feed->archive = archive_read_new();
    int result;

    if (archive == NULL || !enable(archive))
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    archive_read_set_callback_data(archive, feed);
    archive_read_set_read_callback(archive, feed_read);
    archive_read_set_skip_callback(archive, feed_skip);
    if (feed->searchable)
        archive_read_set_seek_callback(archive, feed_seek);
    result = archive_read_open1(archive);
    if (result == ARCHIVE_OK || result == ARCHIVE_WARN)
        return FIRN_OK;
    return firn_fault_tell(fault, feed->os_error != 0 ? FIRN_IO : FIRN_BAD_DATA, feed->os_error, 0, path);
}

static bool names_are_bytes(int family)
{
    return family == ARCHIVE_FORMAT_TAR || family == ARCHIVE_FORMAT_CPIO || family == ARCHIVE_FORMAT_AR
        || family == ARCHIVE_FORMAT_LHA || family == ARCHIVE_FORMAT_RAW;
}

/* Which format it is shows with the first entry. If its names are in Unicode, it is read again from the start. */
static enum firn_status find_locale(struct firn_archive_feed *feed, const char *path, struct firn_fault *fault)
{
    enum firn_status status;

    feed->locale = feed->bytes;
    status = start_reading(feed, path, fault);
    if (status != FIRN_OK)
        return status;
    feed->ahead_result = firn_archive_feed_next(feed, &feed->entry);
    feed->ahead = true;
    if (!feed->searchable || names_are_bytes(firn_archive_feed_family(feed)))
        return FIRN_OK;
    archive_read_free(feed->archive);
    feed->at = 0;
    feed->ahead = false;
    feed->locale = feed->unicode;
    return start_reading(feed, path, fault);
}

/* ---- opening ---- */

/* Archives whose list of contents is elsewhere than at their start, or whose names are in Unicode. */
static bool needs_searching(const uint8_t *bytes, size_t count)
{
    static const struct { size_t at, count; const char *mark; } marks[] = {
        { 0, 2, "PK" },   { 0, 6, "7z\xBC\xAF\x27\x1C" }, { ISO_MARK_AT, 5, "CD001" },
        { 0, 4, "Rar!" }, { 0, 4, "xar!" },               { 0, 4, "MSCF" },
    };

    for (size_t i = 0; i < sizeof marks / sizeof marks[0]; i++)
        if (count >= marks[i].at + marks[i].count && memcmp(bytes + marks[i].at, marks[i].mark, marks[i].count) == 0)
            return true;
    return false;
}

/* Copies what was peeked at and all that follows to a temporary file. */
static enum firn_status spool(struct firn_archive_feed *feed, struct firn_fault *fault)
{
    enum firn_status status = firn_store_temporary(NULL, feed->memory, &feed->spool, fault);
    ssize_t got = (ssize_t)feed->peeked;
    int os_error = 0;

    feed->peeked = 0;
    if (status != FIRN_OK) {
        feed->spool = (struct firn_store){ 0 };
        return status;
    }
    while (got > 0) {
        status = feed->spool.write_at(feed->spool.self, feed->size, feed->portions[0], (size_t)got, &os_error);
        if (status != FIRN_OK)
            return firn_fault_tell(fault, status, os_error, feed->size, "the temporary copy of the archive");
        feed->size += (uint64_t)got;
        got = read_some(feed, feed->portions[0], PORTION_BYTES);
    }
    if (got < 0)
        return firn_fault_tell(fault, FIRN_IO, errno, feed->size, "the archive");
    feed->searchable = true;
    return FIRN_OK;
}

/* Reads far enough into a pipe to know what comes. */
static enum firn_status peek(struct firn_archive_feed *feed, struct firn_fault *fault)
{
    ssize_t got = 1;

    while (got > 0 && feed->peeked < PEEK_BYTES) {
        got = read_some(feed, feed->portions[0] + feed->peeked, PORTION_BYTES - feed->peeked);
        if (got > 0)
            feed->peeked += (size_t)got;
    }
    if (got < 0)
        return firn_fault_tell(fault, FIRN_IO, errno, 0, "the archive");
    return needs_searching(feed->portions[0], feed->peeked) ? spool(feed, fault) : FIRN_OK;
}

static enum firn_status open_input(struct firn_archive_feed *feed, const char *path, struct firn_fault *fault)
{
    struct stat facts;
    off_t base, end;

    feed->own = strcmp(path, "-") != 0;
    feed->descriptor = feed->own ? open(path, O_RDONLY | O_CLOEXEC) : STDIN_FILENO;
    if (feed->descriptor < 0)
        return firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, path);
    if (fstat(feed->descriptor, &facts) == 0 && (S_ISREG(facts.st_mode) || S_ISBLK(facts.st_mode))
        && (base = lseek(feed->descriptor, 0, SEEK_CUR)) >= 0 && (end = lseek(feed->descriptor, 0, SEEK_END)) >= base) {
        feed->searchable = true;
        feed->base = (uint64_t)base;
        feed->size = (uint64_t)(end - base);
        return FIRN_OK;
    }
    return peek(feed, fault);
}

enum firn_status firn_archive_feed_open(const char *path, bool (*stop)(void *self), void *self,
                                        const struct firn_memory *memory, struct firn_fault *fault,
                                        struct firn_archive_feed **out)
{
    struct firn_archive_feed *feed = firn_memory_get_zeroed(memory, 1, sizeof *feed);
    enum firn_status status;

    *out = NULL;
    if (feed == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    feed->memory = memory;
    feed->stop = stop;
    feed->stop_self = self;
    feed->descriptor = -1;
    feed->bytes = newlocale(LC_CTYPE_MASK, "C", (locale_t)0);
    feed->unicode = newlocale(LC_CTYPE_MASK, "C.UTF-8", (locale_t)0);
    feed->entry = archive_entry_new();
    feed->portions[0] = memory->get(memory->self, PORTION_BYTES);
    feed->portions[1] = memory->get(memory->self, PORTION_BYTES);
    if (feed->bytes == (locale_t)0 || feed->entry == NULL || feed->portions[0] == NULL || feed->portions[1] == NULL)
        status = firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, path);
    else
        status = open_input(feed, path, fault);
    if (status == FIRN_OK)
        status = find_locale(feed, path, fault);
    if (status != FIRN_OK) {
        firn_archive_feed_close(feed);
        return status;
    }
    *out = feed;
    return FIRN_OK;
}

void firn_archive_feed_close(struct firn_archive_feed *feed)
{
    if (feed == NULL)
        return;
    archive_read_free(feed->archive);
    archive_entry_free(feed->entry);
    if (feed->bytes != (locale_t)0)
        freelocale(feed->bytes);
    if (feed->unicode != (locale_t)0)
        freelocale(feed->unicode);
    if (feed->spool.close != NULL)
        feed->spool.close(feed->spool.self);
    if (feed->own && feed->descriptor >= 0)
        close(feed->descriptor);
    feed->memory->put(feed->memory->self, feed->portions[0]);
    feed->memory->put(feed->memory->self, feed->portions[1]);
    feed->memory->put(feed->memory->self, feed);
}

/* ---- asking ---- */

void firn_archive_feed_enter(struct firn_archive_feed *feed)
{
    feed->before = uselocale(feed->locale);
}

void firn_archive_feed_leave(struct firn_archive_feed *feed)
{
    (void)uselocale(feed->before);
}

int firn_archive_feed_next(struct firn_archive_feed *feed, struct archive_entry **entry)
{
    int result;

    *entry = feed->entry;
    if (feed->ahead) {
        feed->ahead = false;
        return feed->ahead_result;
    }
    firn_archive_feed_enter(feed);
    result = archive_read_next_header2(feed->archive, feed->entry);
    firn_archive_feed_leave(feed);
    return result;
}

int firn_archive_feed_family(struct firn_archive_feed *feed)
{
    return archive_format(feed->archive) & ARCHIVE_FORMAT_BASE_MASK;
}

struct archive *firn_archive_feed_archive(struct firn_archive_feed *feed)
{
    return feed->archive;
}

int firn_archive_feed_error(const struct firn_archive_feed *feed)
{
    return feed->os_error;
}

/* The byte at `at` of the archive, if it is in one of the last portions; else -1. */
static int byte_at(const struct firn_archive_feed *feed, uint64_t at)
{
    for (unsigned i = 0; i < 2; i++)
        if (at >= feed->portion_at[i] && at - feed->portion_at[i] < feed->portion_bytes[i])
            return feed->portions[i][at - feed->portion_at[i]];
    return -1;
}

bool firn_archive_feed_ended_well(struct firn_archive_feed *feed)
{
    la_int64_t end = archive_filter_bytes(feed->archive, 0);

    if (firn_archive_feed_family(feed) != ARCHIVE_FORMAT_TAR || archive_filter_count(feed->archive) > 1 ||
        end < RECORD_BYTES)
        return true;
    for (uint64_t at = (uint64_t)end - RECORD_BYTES; at < (uint64_t)end; at++)
        if (byte_at(feed, at) > 0)
            return false;
    return true;
}
