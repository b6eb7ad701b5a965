/*
 * transfer/quietly.h - opening what somebody else owns without leaving a trace
 *
 * Room: transfer. Links are not followed, a pipe or a device does not make us wait, and access times stay as they are
 * where the system allows it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TRANSFER_QUIETLY_H
#define FIRN_TRANSFER_QUIETLY_H

/* openat(2) with O_NOFOLLOW, O_NONBLOCK, O_NOCTTY, O_CLOEXEC and, if it may be, O_NOATIME. A descriptor, or -1. */
int firn_quietly_open(int folder, const char *name, int flags);

#endif
