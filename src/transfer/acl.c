/* transfer/acl.c - POSIX access control lists between kernel attributes and libarchive's entries */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/acl.h"

#include "base/bytes.h"

enum { VERSION = 2, HEAD_BYTES = 4, LINE_BYTES = 8, NO_ID = -1 };

/* The kernel's tags in the order that it wants the lines in. */
static const struct tag {
    uint16_t kernel;
    int archive;
    bool group;      /* ids are groups */
} tags[] = {
    { 0x01, ARCHIVE_ENTRY_ACL_USER_OBJ, false },
    { 0x02, ARCHIVE_ENTRY_ACL_USER, false },
    { 0x04, ARCHIVE_ENTRY_ACL_GROUP_OBJ, true },
    { 0x08, ARCHIVE_ENTRY_ACL_GROUP, true },
    { 0x10, ARCHIVE_ENTRY_ACL_MASK, false },
    { 0x20, ARCHIVE_ENTRY_ACL_OTHER, false },
};

enum { TAGS = sizeof tags / sizeof tags[0] };

static bool has_id(const struct tag *tag)
{
    return tag->archive == ARCHIVE_ENTRY_ACL_USER || tag->archive == ARCHIVE_ENTRY_ACL_GROUP;
}

/* Both worlds number read, write and execute alike. */
static int permissions_in(unsigned bits)
{
    return ((bits & 4) != 0 ? ARCHIVE_ENTRY_ACL_READ : 0) | ((bits & 2) != 0 ? ARCHIVE_ENTRY_ACL_WRITE : 0)
        | ((bits & 1) != 0 ? ARCHIVE_ENTRY_ACL_EXECUTE : 0);
}

static uint16_t permissions_out(int permissions)
{
    return (uint16_t)(((permissions & ARCHIVE_ENTRY_ACL_READ) != 0 ? 4 : 0)
                      | ((permissions & ARCHIVE_ENTRY_ACL_WRITE) != 0 ? 2 : 0)
                      | ((permissions & ARCHIVE_ENTRY_ACL_EXECUTE) != 0 ? 1 : 0));
}

static const struct tag *tag_of(const uint8_t *line)
{
    uint16_t kernel = firn_bytes_get16(line);

    for (unsigned i = 0; i < TAGS; i++)
        if (tags[i].kernel == kernel)
            return &tags[i];
    return NULL;
}

/* Looked at as a whole before any line is added. libarchive writes ids from 2^31 on as 0, which is somebody else. */
static enum firn_status check(const uint8_t *value, size_t value_bytes)
{
    if (value_bytes < HEAD_BYTES || (value_bytes - HEAD_BYTES) % LINE_BYTES != 0 || firn_bytes_get32(value) != VERSION)
        return FIRN_BAD_DATA;
    for (size_t at = HEAD_BYTES; at < value_bytes; at += LINE_BYTES) {
        const struct tag *tag = tag_of(value + at);

        if (tag == NULL)
            return FIRN_BAD_DATA;
        if (has_id(tag) && firn_bytes_get32(value + at + 4) > INT32_MAX)
            return FIRN_OVER_LIMIT;
    }
    return FIRN_OK;
}

enum firn_status firn_acl_take(struct archive_entry *entry, int type, const uint8_t *value, size_t value_bytes,
                               struct firn_people *people)
{
    enum firn_status status = check(value, value_bytes);

    if (status != FIRN_OK)
        return status;
    for (size_t at = HEAD_BYTES; at < value_bytes; at += LINE_BYTES) {
        const struct tag *tag = tag_of(value + at);
        int permissions = permissions_in(firn_bytes_get16(value + at + 2));
        uint32_t id = firn_bytes_get32(value + at + 4);

        archive_entry_acl_add_entry(entry, type, permissions, tag->archive, has_id(tag) ? (int)id : NO_ID,
                                    has_id(tag) ? firn_people_name(people, tag->group, id) : NULL);
    }
    return FIRN_OK;
}

/* All lines of one tag. */
static enum firn_status give_tag(struct archive_entry *entry, int type, const struct tag *tag,
                                 struct firn_people *people, uint8_t *value, size_t *used)
{
    int line_type, permissions, line_tag, id;
    const char *name;

    archive_entry_acl_reset(entry, type);
    while (archive_entry_acl_next(entry, type, &line_type, &permissions, &line_tag, &id, &name) == ARCHIVE_OK) {
        uint32_t who = UINT32_MAX;

        if (line_tag != tag->archive)
            continue;
        if (*used + LINE_BYTES > FIRN_ACL_VALUE_MAX)
            return FIRN_OVER_LIMIT;
        if (has_id(tag))
            who = (uint32_t)firn_people_number(people, tag->group, name, (int64_t)(uint32_t)id);
        firn_bytes_put16(value + *used, tag->kernel);
        firn_bytes_put16(value + *used + 2, permissions_out(permissions));
        firn_bytes_put32(value + *used + 4, who);
        *used += LINE_BYTES;
    }
    return FIRN_OK;
}

enum firn_status firn_acl_give(struct archive_entry *entry, int type, struct firn_people *people,
                               uint8_t value[FIRN_ACL_VALUE_MAX], size_t *value_bytes)
{
    size_t used = HEAD_BYTES;

    *value_bytes = 0;
    if ((archive_entry_acl_types(entry) & type) == 0)
        return FIRN_OK;
    firn_bytes_put32(value, VERSION);
    for (unsigned i = 0; i < TAGS; i++) {
        enum firn_status status = give_tag(entry, type, &tags[i], people, value, &used);

        if (status != FIRN_OK)
            return status;
    }
    *value_bytes = used;
    return FIRN_OK;
}
