/* transfer/attributes.c - extended attributes and access control lists of files */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/attributes.h"

#include "base/memory.h"
#include "transfer/acl.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/xattr.h>

enum { LIST_BYTES = 65536, VALUE_BYTES = FIRN_ACL_VALUE_MAX, NAMES_MAX = LIST_BYTES / 2, PATH_ROOM = 64 + PATH_MAX };

struct firn_attributes {
    const struct firn_memory *memory;
    struct firn_people *people;
    char *names[NAMES_MAX];             /* into list; a name takes two bytes at least */
    char list[LIST_BYTES];              /* the kernel's limits for all names, and for one value */
    uint8_t value[VALUE_BYTES];
    char path[PATH_ROOM];
};

enum firn_status firn_attributes_make(const struct firn_memory *memory, struct firn_people *people,
                                      struct firn_attributes **out)
{
    struct firn_attributes *attributes = memory->get(memory->self, sizeof *attributes);

    *out = attributes;
    if (attributes == NULL)
        return FIRN_NO_MEMORY;
    attributes->memory = memory;
    attributes->people = people;
    return FIRN_OK;
}

void firn_attributes_free(struct firn_attributes *attributes)
{
    if (attributes != NULL)
        attributes->memory->put(attributes->memory->self, attributes);
}

/* The path of an object without a descriptor. */
static const char *path_of(struct firn_attributes *attributes, const struct firn_attributes_place *place)
{
    if (place->folder == AT_FDCWD)
        return place->name;
    snprintf(attributes->path, sizeof attributes->path, "/proc/self/fd/%d/%s", place->folder, place->name);
    return attributes->path;
}

static ssize_t list_names(struct firn_attributes *attributes, const struct firn_attributes_place *place)
{
    if (place->descriptor >= 0)
        return flistxattr(place->descriptor, attributes->list, sizeof attributes->list);
    return llistxattr(path_of(attributes, place), attributes->list, sizeof attributes->list);
}

static ssize_t get_value(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                         const char *name)
{
    if (place->descriptor >= 0)
        return fgetxattr(place->descriptor, name, attributes->value, sizeof attributes->value);
    return lgetxattr(path_of(attributes, place), name, attributes->value, sizeof attributes->value);
}

static int set_value(struct firn_attributes *attributes, const struct firn_attributes_place *place, const char *name,
                     const void *value, size_t bytes)
{
    if (place->descriptor >= 0)
        return fsetxattr(place->descriptor, name, value, bytes, 0);
    return lsetxattr(path_of(attributes, place), name, value, bytes, 0);
}

static int by_bytes(const void *one, const void *other)
{
    return strcmp(*(char *const *)one, *(char *const *)other);
}

/* One attribute into the entry; returns 0 or errno. */
static int take_one(struct firn_attributes *attributes, const struct firn_attributes_place *place, const char *name,
                    struct archive_entry *entry)
{
    bool access = strcmp(name, FIRN_ACL_ACCESS) == 0;
    ssize_t bytes;

    if (!access && strcmp(name, FIRN_ACL_DEFAULT) != 0 && strncmp(name, "system.", 7) == 0)
        return 0;
    bytes = get_value(attributes, place, name);
    if (bytes < 0)
        return errno == ENODATA ? 0 : errno;      /* gone since the names were listed */
    if (strncmp(name, "system.", 7) != 0)
        archive_entry_xattr_add_entry(entry, name, attributes->value, (size_t)bytes);
    else if (firn_acl_take(entry, access ? ARCHIVE_ENTRY_ACL_TYPE_ACCESS : ARCHIVE_ENTRY_ACL_TYPE_DEFAULT,
                           attributes->value, (size_t)bytes, attributes->people) != FIRN_OK)
        return EOVERFLOW;
    return 0;
}

int firn_attributes_take(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                         struct archive_entry *entry)
{
    ssize_t bytes = list_names(attributes, place);
    size_t count = 0;
    int trouble = 0;

    if (bytes < 0)
        return errno == ENOTSUP ? 0 : errno;
    for (char *name = attributes->list; name < attributes->list + bytes; name += strlen(name) + 1)
        if (name[0] != '\0' && count < NAMES_MAX)
            attributes->names[count++] = name;
    qsort(attributes->names, count, sizeof attributes->names[0], by_bytes);
    for (size_t i = count; i > 0; i--) {      /* libarchive keeps the last one added in front */
        int error = take_one(attributes, place, attributes->names[i - 1], entry);

        trouble = error == 0 ? trouble : error;
    }
    return trouble;
}

static int give_lists(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                      struct archive_entry *entry, const char **which)
{
    static const struct { int type; const char *name; } lists[] = {
        { ARCHIVE_ENTRY_ACL_TYPE_ACCESS, FIRN_ACL_ACCESS }, { ARCHIVE_ENTRY_ACL_TYPE_DEFAULT, FIRN_ACL_DEFAULT },
    };
    int trouble = 0;

    for (size_t i = 0; i < sizeof lists / sizeof lists[0]; i++) {
        size_t bytes;
        int error = EINVAL;

        if (firn_acl_give(entry, lists[i].type, attributes->people, attributes->value, &bytes) == FIRN_OK)
            error =
                bytes == 0 || set_value(attributes, place, lists[i].name, attributes->value, bytes) == 0 ? 0 : errno;
        if (error != 0) {
            trouble = error;
            *which = "access control list";
        }
    }
    return trouble;
}

int firn_attributes_give(struct firn_attributes *attributes, const struct firn_attributes_place *place,
                         struct archive_entry *entry, bool privileged, const char **which)
{
    const char *name;
    const void *value;
    size_t bytes;
    int trouble = give_lists(attributes, place, entry, which);

    archive_entry_xattr_reset(entry);
    while (archive_entry_xattr_next(entry, &name, &value, &bytes) == ARCHIVE_OK) {
        if (strncmp(name, "system.", 7) == 0 || (strncmp(name, "user.", 5) != 0 && !privileged))
            continue;
        if (set_value(attributes, place, name, value, bytes) != 0) {
            trouble = errno;
            *which = "extended attribute";
        }
    }
    return trouble;
}
