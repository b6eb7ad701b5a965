/* transfer/pax.c - metadata of an item as pax header bytes, and back, by libarchive */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/pax.h"

#include "base/memory.h"
#include "base/text.h"
#include "transfer/pax_time.h"
#include "transfer/ustar.h"

#include <errno.h>

struct firn_pax {
    const struct firn_memory *memory;
    locale_t utf8, before;             /* utf8 may be 0 where the system has no such locale */
    struct archive_entry *entry;
    uint8_t *bytes;                    /* the header as made, or as changed for reading */
    size_t used, capacity;
    bool out_of_memory;
    bool header_done;                  /* what libarchive writes now is not wanted */
};

enum firn_status firn_pax_make(const struct firn_memory *memory, struct firn_pax **out)
{
    struct firn_pax *pax = firn_memory_get_zeroed(memory, 1, sizeof *pax);

    *out = NULL;
    if (pax == NULL)
        return FIRN_NO_MEMORY;
    pax->memory = memory;
    pax->utf8 = newlocale(LC_CTYPE_MASK, "C.UTF-8", (locale_t)0);
    pax->entry = archive_entry_new();
    if (pax->entry == NULL) {
        firn_pax_free(pax);
        return FIRN_NO_MEMORY;
    }
    *out = pax;
    return FIRN_OK;
}

void firn_pax_free(struct firn_pax *pax)
{
    if (pax == NULL)
        return;
    archive_entry_free(pax->entry);
    if (pax->utf8 != (locale_t)0)
        freelocale(pax->utf8);
    pax->memory->put(pax->memory->self, pax->bytes);
    pax->memory->put(pax->memory->self, pax);
}

void firn_pax_enter(struct firn_pax *pax)
{
    pax->before = uselocale(pax->utf8);
}

void firn_pax_leave(struct firn_pax *pax)
{
    (void)uselocale(pax->before);
}

void firn_pax_strip(struct archive_entry *entry)
{
    archive_entry_unset_atime(entry);
    archive_entry_unset_ctime(entry);
    archive_entry_unset_birthtime(entry);
    archive_entry_set_fflags(entry, 0, 0);
    archive_entry_copy_mac_metadata(entry, NULL, 0);
    archive_entry_sparse_clear(entry);
}

/* Whether a string can be written as UTF-8. Without a UTF-8 locale libarchive converts ASCII only. */
static bool is_utf8(const struct firn_pax *pax, const char *string)
{
    size_t left = string == NULL ? 0 : strlen(string);

    while (left > 0) {
        size_t bytes = firn_text_utf8(string, left);

        if (bytes == 0 || (bytes > 1 && pax->utf8 == (locale_t)0))
            return false;
        string += bytes;
        left -= bytes;
    }
    return true;
}

/* Attribute names that SCHILY.xattr cannot carry: they are escaped when written, but taken as they stand when read. */
static bool needs_escapes(struct archive_entry *entry)
{
    const char *name;
    const void *value;
    size_t bytes;
    bool needed = false;

    archive_entry_xattr_reset(entry);
    while (archive_entry_xattr_next(entry, &name, &value, &bytes) == ARCHIVE_OK)
        for (; *name != '\0'; name++)
            needed |= *name <= ' ' || *name > '~' || *name == '%' || *name == '=';
    return needed;
}

/* A name in an access control list that is no UTF-8 goes: its number says who is meant. */
static void clean_lists(const struct firn_pax *pax, struct archive_entry *entry)
{
    static const int kinds[] = { ARCHIVE_ENTRY_ACL_TYPE_ACCESS, ARCHIVE_ENTRY_ACL_TYPE_DEFAULT };
    int type, permissions, tag, id;
    const char *name;

    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++) {
        bool clean = true;

        archive_entry_acl_reset(entry, kinds[i]);
        while (archive_entry_acl_next(entry, kinds[i], &type, &permissions, &tag, &id, &name) == ARCHIVE_OK)
            clean = clean && is_utf8(pax, name);
        if (!clean) {
            struct archive_entry *old = archive_entry_clone(entry);

            archive_entry_acl_clear(entry);
            for (size_t j = 0; old != NULL && j < sizeof kinds / sizeof kinds[0]; j++) {
                archive_entry_acl_reset(old, kinds[j]);
                while (archive_entry_acl_next(old, kinds[j], &type, &permissions, &tag, &id, &name) == ARCHIVE_OK)
                    archive_entry_acl_add_entry(entry, type, permissions, tag, id, is_utf8(pax, name) ? name : NULL);
            }
            archive_entry_free(old);
            return;
        }
    }
}

struct archive *firn_pax_writer(struct firn_pax *pax, struct archive_entry *entry, archive_write_callback *write,
                                void *self)
{
    struct archive *archive = archive_write_new();
    bool binary = !is_utf8(pax, archive_entry_pathname(entry)) || !is_utf8(pax, archive_entry_symlink(entry))
        || !is_utf8(pax, archive_entry_hardlink(entry)) || !is_utf8(pax, archive_entry_uname(entry))
        || !is_utf8(pax, archive_entry_gname(entry));
    int result;

    if (archive == NULL)
        return NULL;
    clean_lists(pax, entry);
    result = archive_write_set_format_pax(archive);
    if (result == ARCHIVE_OK && binary)
        result = archive_write_set_format_option(archive, "pax", "hdrcharset", "BINARY");
    if (result == ARCHIVE_OK)
        result = archive_write_set_format_option(archive, "pax", "xattrheader",
                                                 needs_escapes(entry) ? "LIBARCHIVE" : "SCHILY");
    if (result == ARCHIVE_OK)
        result = archive_write_set_bytes_per_block(archive, 0);
    if (result == ARCHIVE_OK)
        result = archive_write_open2(archive, self, NULL, write, NULL, NULL);
    if (result != ARCHIVE_OK) {
        archive_write_free(archive);
        return NULL;
    }
    return archive;
}

static enum firn_status make_room(struct firn_pax *pax, size_t bytes)
{
    void *array = pax->bytes;
    enum firn_status status = firn_memory_grow(pax->memory, &array, &pax->capacity, bytes, 1);

    pax->bytes = array;
    return status;
}

/* What is beyond the limit is counted, not kept. */
static la_ssize_t collect(struct archive *archive, void *self, const void *bytes, size_t count)
{
    struct firn_pax *pax = self;

    if (pax->header_done) {
        archive_set_error(archive, ECANCELED, "only the header is wanted");
        return -1;
    }
    if (pax->used <= FIRN_PAX_BYTES_MAX && count <= FIRN_PAX_BYTES_MAX - pax->used) {
        if (make_room(pax, pax->used + count) != FIRN_OK) {
            pax->out_of_memory = true;
            return -1;
        }
        memcpy(pax->bytes + pax->used, bytes, count);
    }
    pax->used += count;
    return (la_ssize_t)count;
}

enum firn_status firn_pax_header(struct firn_pax *pax, struct archive_entry *entry, const uint8_t **bytes,
                                 size_t *count)
{
    struct archive *archive;
    int result = ARCHIVE_FATAL;

    firn_pax_strip(entry);
    pax->used = 0;
    pax->out_of_memory = false;
    pax->header_done = false;
    firn_pax_enter(pax);
    archive = firn_pax_writer(pax, entry, collect, pax);
    if (archive != NULL) {
        result = archive_write_header(archive, entry);
        pax->header_done = true;
        (void)archive_write_close(archive);
        archive_write_free(archive);
    }
    firn_pax_leave(pax);
    if (archive == NULL || pax->out_of_memory)
        return FIRN_NO_MEMORY;
    if (result != ARCHIVE_OK && result != ARCHIVE_WARN)      /* a warning: an owner's name is cut in the ustar header */
        return FIRN_BAD_ARGUMENT;
    if (pax->used > FIRN_PAX_BYTES_MAX)
        return FIRN_OVER_LIMIT;
    firn_pax_time_mend(pax->bytes, pax->used);
    *bytes = pax->bytes;
    *count = pax->used;
    return FIRN_OK;
}

/* A copy of the header that says hdrcharset=BINARY, behind the records it has. */
static enum firn_status make_binary(struct firn_pax *pax, const struct firn_item *item,
                                    const struct firn_ustar_layout *layout)
{
    static const char record[] = "21 hdrcharset=BINARY\n";
    const size_t record_bytes = sizeof record - 1;
    size_t body = layout->records_bytes + record_bytes;
    size_t padded = firn_ustar_padded(body);
    enum firn_status status = make_room(pax, 2 * FIRN_USTAR_BYTES + padded);

    if (status != FIRN_OK)
        return status;
    pax->used = 2 * FIRN_USTAR_BYTES + padded;
    memset(pax->bytes, 0, pax->used);
    memcpy(pax->bytes, item->pax, FIRN_USTAR_BYTES + layout->records_bytes);
    memcpy(pax->bytes + FIRN_USTAR_BYTES + layout->records_bytes, record, record_bytes);
    memcpy(pax->bytes + FIRN_USTAR_BYTES + padded, item->pax + item->pax_bytes - FIRN_USTAR_BYTES, FIRN_USTAR_BYTES);
    firn_ustar_set_size(pax->bytes, body);
    return FIRN_OK;
}

static enum firn_status read_entry(struct firn_pax *pax, const uint8_t *bytes, size_t count)
{
    struct archive *archive = archive_read_new();
    enum firn_status status = FIRN_NO_MEMORY;

    if (archive == NULL)
        return FIRN_NO_MEMORY;
    archive_entry_clear(pax->entry);
    firn_pax_enter(pax);
    if (archive_read_support_format_tar(archive) == ARCHIVE_OK
        && archive_read_open_memory(archive, bytes, count) == ARCHIVE_OK) {
        int result = archive_read_next_header2(archive, pax->entry);

        if (result == ARCHIVE_OK || result == ARCHIVE_WARN)      /* a warning: an attribute that makes no sense to it */
            status = FIRN_OK;
        else if (archive_errno(archive) != ENOMEM)
            status = FIRN_BAD_DATA;
    }
    archive_read_free(archive);
    firn_pax_leave(pax);
    return status;
}

/* Whether the entry and the rest of the item are of one mind. */
static bool agrees(struct archive_entry *entry, const struct firn_item *item)
{
    bool link = archive_entry_hardlink(entry) != NULL;

    if (archive_entry_pathname(entry) == NULL || archive_entry_sparse_count(entry) != 0)
        return false;
    if (archive_entry_filetype(entry) == AE_IFLNK && archive_entry_symlink(entry) == NULL)
        return false;
    if (item->has_content)
        return !link && archive_entry_filetype(entry) == AE_IFREG && archive_entry_size(entry) >= 0
            && (uint64_t)archive_entry_size(entry) == item->bytes;
    return (link || archive_entry_filetype(entry) != AE_IFREG) && archive_entry_size(entry) == 0;
}

enum firn_status firn_pax_entry(struct firn_pax *pax, const struct firn_item *item, struct archive_entry **entry)
{
    struct firn_ustar_layout layout;
    enum firn_status status =
        item->pax_bytes > FIRN_PAX_BYTES_MAX ? FIRN_BAD_DATA : firn_ustar_check(item->pax, item->pax_bytes, &layout);
    int64_t seconds;
    long nanoseconds;
    bool binary;

    *entry = NULL;
    if (status != FIRN_OK)
        return status;
    binary = layout.foreign_names && !layout.binary;
    if (binary)
        status = make_binary(pax, item, &layout);
    if (status == FIRN_OK)
        status = read_entry(pax, binary ? pax->bytes : item->pax, binary ? pax->used : item->pax_bytes);
    if (status != FIRN_OK)
        return status;
    if (!agrees(pax->entry, item))
        return FIRN_BAD_DATA;
    if (firn_pax_time_read(item->pax, item->pax_bytes, &seconds, &nanoseconds))
        archive_entry_set_mtime(pax->entry, (time_t)seconds, nanoseconds);
    firn_pax_strip(pax->entry);
    *entry = pax->entry;
    return FIRN_OK;
}

void firn_pax_map(struct archive_entry *entry, const struct firn_item *item)
{
    archive_entry_sparse_clear(entry);
    if (item->stored_bytes == item->bytes)
        return;
    for (size_t i = 0; i < item->extent_count; i++)
        archive_entry_sparse_add_entry(entry, (la_int64_t)item->extents[i].at, (la_int64_t)item->extents[i].bytes);
    if (item->extent_count == 0)      /* one single hole: libarchive's sign for it */
        archive_entry_sparse_add_entry(entry, 0, 0);
}

char firn_pax_type(const struct firn_item *item)
{
    return item->pax_bytes < FIRN_USTAR_BYTES
               ? '\0'
               : (char)item->pax[item->pax_bytes - FIRN_USTAR_BYTES + FIRN_USTAR_TYPE_AT];
}
