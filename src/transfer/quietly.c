/* transfer/quietly.c - opening what somebody else owns without leaving a trace */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _GNU_SOURCE     /* O_NOATIME */
#include "transfer/quietly.h"

#include <errno.h>
#include <fcntl.h>

int firn_quietly_open(int folder, const char *name, int flags)
{
    int descriptor = openat(folder, name, flags | O_NOATIME | O_NOFOLLOW | O_NONBLOCK | O_NOCTTY | O_CLOEXEC);

    if (descriptor < 0 && errno == EPERM)      /* only its owner may keep the access time */
        descriptor = openat(folder, name, flags | O_NOFOLLOW | O_NONBLOCK | O_NOCTTY | O_CLOEXEC);
    return descriptor;
}
