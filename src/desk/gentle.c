/* desk/gentle.c - giving way to everybody else */
/* SPDX-License-Identifier: BSD-2-Clause */
#define _DEFAULT_SOURCE      /* syscall */
#include "desk/gentle.h"

#include <sys/resource.h>
#include <unistd.h>
#ifdef __linux__
#include <sys/syscall.h>
#endif

void firn_gentle(void)
{
    (void)setpriority(PRIO_PROCESS, 0, 19);
#if defined(__linux__) && defined(SYS_ioprio_set)
    /* ioprio_set(2), which the C library does not wrap: IOPRIO_WHO_PROCESS is 1, class 3 (idle) stands in bits 13 up */
    (void)syscall(SYS_ioprio_set, 1, 0, 3 << 13);
#endif
}
