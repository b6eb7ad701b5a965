/* transfer/about.c - what an item's pax header says */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/about.h"

#include "base/memory.h"
#include "transfer/pax.h"

struct firn_about {
    const struct firn_memory *memory;
    struct firn_pax *pax;
    char *path;                  /* without a folder's slash */
    size_t capacity;
};

enum firn_status firn_about_make(const struct firn_memory *memory, struct firn_about **out)
{
    struct firn_about *about = firn_memory_get_zeroed(memory, 1, sizeof *about);
    enum firn_status status;

    *out = NULL;
    if (about == NULL)
        return FIRN_NO_MEMORY;
    about->memory = memory;
    status = firn_pax_make(memory, &about->pax);
    if (status != FIRN_OK) {
        firn_about_free(about);
        return status;
    }
    *out = about;
    return FIRN_OK;
}

void firn_about_free(struct firn_about *about)
{
    if (about == NULL)
        return;
    firn_pax_free(about->pax);
    about->memory->put(about->memory->self, about->path);
    about->memory->put(about->memory->self, about);
}

static char type_of(struct archive_entry *entry)
{
    if (archive_entry_hardlink(entry) != NULL)
        return 'h';
    switch (archive_entry_filetype(entry)) {
    case AE_IFDIR: return 'd';
    case AE_IFLNK: return 'l';
    case AE_IFCHR: return 'c';
    case AE_IFBLK: return 'b';
    case AE_IFIFO: return 'p';
    default:       return '-';
    }
}

static const char *or_nothing(const char *string)
{
    return string == NULL ? "" : string;
}

static enum firn_status copy_path(struct firn_about *about, const char *path)
{
    size_t bytes = strlen(path);
    void *array = about->path;
    enum firn_status status = firn_memory_grow(about->memory, &array, &about->capacity, bytes + 1, 1);

    about->path = array;
    if (status != FIRN_OK)
        return status;
    memcpy(about->path, path, bytes + 1);
    while (bytes > 1 && about->path[bytes - 1] == '/')
        about->path[--bytes] = '\0';
    return FIRN_OK;
}

enum firn_status firn_about_read(struct firn_about *about, const struct firn_item *item, struct firn_about_facts *facts)
{
    struct archive_entry *entry;
    enum firn_status status = firn_pax_entry(about->pax, item, &entry);
    const char *link;

    if (status == FIRN_OK)
        status = copy_path(about, archive_entry_pathname(entry));
    if (status != FIRN_OK)
        return status;
    link = archive_entry_hardlink(entry);
    *facts = (struct firn_about_facts){
        .path = about->path,
        .type = type_of(entry),
        .mode = archive_entry_perm(entry) & 07777,
        .uid = (uint64_t)archive_entry_uid(entry),
        .gid = (uint64_t)archive_entry_gid(entry),
        .user = or_nothing(archive_entry_uname(entry)),
        .group = or_nothing(archive_entry_gname(entry)),
        .mtime_seconds = archive_entry_mtime(entry),
        .mtime_nanoseconds = (uint32_t)archive_entry_mtime_nsec(entry),
        .link = or_nothing(link != NULL ? link : archive_entry_symlink(entry)),
        .bytes = item->bytes,
        .device_major = (uint32_t)archive_entry_rdevmajor(entry),
        .device_minor = (uint32_t)archive_entry_rdevminor(entry),
        .attributes = (unsigned)archive_entry_xattr_count(entry),
        .access_list = archive_entry_acl_types(entry) != 0,
    };
    return FIRN_OK;
}
