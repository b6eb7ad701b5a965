/* transfer/stored_name.c - names as the container stores them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/stored_name.h"

#include <string.h>

static bool is_dots(const char *part, size_t bytes)
{
    return bytes == 2 && part[0] == '.' && part[1] == '.';
}

static bool is_nothing(const char *part, size_t bytes)
{
    return bytes == 0 || (bytes == 1 && part[0] == '.');
}

/* Takes the last component away. */
static size_t without_last(const char *stored, size_t used)
{
    while (used > 0 && stored[used - 1] != '/')
        used--;
    return used == 0 ? 0 : used - 1;
}

enum firn_status firn_stored_name_make(const char *name, char stored[FIRN_STORED_NAME_ROOM], bool *dots)
{
    size_t used = 0;
    bool met = false;
    enum firn_status status = FIRN_OK;

    while (*name != '\0' && status == FIRN_OK) {
        size_t bytes = strcspn(name, "/");

        if (is_dots(name, bytes)) {
            met = true;
            used = without_last(stored, used);
        } else if (!is_nothing(name, bytes)) {
            size_t slash = used > 0;

            if (bytes + slash > FIRN_INTAKE_NAME_MAX - used) {
                status = FIRN_OVER_LIMIT;
            } else {
                if (slash)
                    stored[used++] = '/';
                memcpy(stored + used, name, bytes);
                used += bytes;
            }
        }
        name += bytes;
        name += strspn(name, "/");
    }
    stored[used] = '\0';
    if (dots != NULL)
        *dots = met;
    return status;
}

bool firn_stored_name_safe(const char *name)
{
    if (strnlen(name, FIRN_STORED_NAME_ROOM) > FIRN_INTAKE_NAME_MAX)
        return false;
    for (;;) {
        size_t bytes = strcspn(name, "/");

        if (is_nothing(name, bytes) || is_dots(name, bytes))
            return false;
        if (name[bytes] == '\0')
            return true;
        name += bytes + 1;
    }
}

bool firn_stored_name_within(const char *name, const char *folder, size_t folder_bytes)
{
    return folder_bytes == 0
        || (strncmp(name, folder, folder_bytes) == 0 && (name[folder_bytes] == '\0' || name[folder_bytes] == '/'));
}
