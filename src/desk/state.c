/* desk/state.c - the folder that remembers from one run to the next */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/state.h"

#include "base/fault.h"
#include "base/text.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

static bool add_absolute(struct firn_text *text, const char *variable, const char *below)
{
    const char *value = getenv(variable);

    if (value == NULL || value[0] != '/')
        return false;
    /* systemd separates several folders by colons; a colon of their own it has no way to say */
    firn_text_add_bytes(text, value, strcspn(value, strcmp(variable, "STATE_DIRECTORY") == 0 ? ":" : ""));
    firn_text_add(text, "%s", below);
    return true;
}

/* Makes every folder on the way that is not there. */
static int make_way(char *folder)
{
    for (char *at = folder + 1; *at != '\0'; at++)
        if (*at == '/') {
            *at = '\0';
            if (mkdir(folder, 0700) != 0 && errno != EEXIST && errno != EACCES && errno != EROFS) {
                *at = '/';
                return -1;
            }
            *at = '/';
        }
    return mkdir(folder, 0700) == 0 || errno == EEXIST ? 0 : -1;
}

enum firn_status firn_state_folder(const char *asked, char *folder, size_t room, struct firn_fault *fault)
{
    struct firn_text text;

    firn_text_start(&text, folder, room);
    if (asked != NULL)
        firn_text_add(&text, "%s", asked);
    else if (!add_absolute(&text, "STATE_DIRECTORY", "") && !add_absolute(&text, "XDG_STATE_HOME", "/firn")
             && !add_absolute(&text, "HOME", "/.local/state/firn"))
        return firn_fault_tell(fault, FIRN_NO_INPUT, 0, 0, "--state");
    if (text.cut || text.used == 0)
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, text.cut ? ENAMETOOLONG : ENOENT, 0, folder);
    if (make_way(folder) != 0)
        return firn_fault_tell(fault, FIRN_CANNOT_CREATE, errno, 0, folder);
    return FIRN_OK;
}
