/* transfer/people.c - names and numbers of users and groups */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/people.h"

enum firn_status firn_people_start(struct firn_people *people, bool by_name)
{
    people->names = archive_read_disk_new();
    people->numbers = archive_write_disk_new();
    if (people->names == NULL || people->numbers == NULL
        || archive_read_disk_set_standard_lookup(people->names) != ARCHIVE_OK
        || (by_name && archive_write_disk_set_standard_lookup(people->numbers) != ARCHIVE_OK)) {
        firn_people_end(people);
        return FIRN_NO_MEMORY;
    }
    return FIRN_OK;
}

void firn_people_end(struct firn_people *people)
{
    archive_read_free(people->names);
    archive_write_free(people->numbers);
    *people = (struct firn_people){ 0 };
}

const char *firn_people_name(struct firn_people *people, bool group, int64_t id)
{
    return group ? archive_read_disk_gname(people->names, id) : archive_read_disk_uname(people->names, id);
}

int64_t firn_people_number(struct firn_people *people, bool group, const char *name, int64_t id)
{
    if (name == NULL || name[0] == '\0')
        return id;
    return group ? archive_write_disk_gid(people->numbers, name, id)
                 : archive_write_disk_uid(people->numbers, name, id);
}
