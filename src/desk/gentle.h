/*
 * desk/gentle.h - giving way to everybody else
 *
 * Room: desk.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_GENTLE_H
#define FIRN_DESK_GENTLE_H

/*
 * From now on this process and its threads get the processor last and, on Linux, the disk only when nobody else wants
 * it. Where the system knows no such thing all stays as it was: it is a courtesy, not a promise.
 */
void firn_gentle(void);

#endif
