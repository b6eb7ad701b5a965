/*
 * desk/interrupt.h - being asked to stop, politely
 *
 * Room: desk. SIGINT, SIGTERM and SIGHUP set a mark that the rooms below ask for between two steps; so nothing is left
 * half-written. SIGPIPE and SIGXFSZ become errors of the write that caused them.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_INTERRUPT_H
#define FIRN_DESK_INTERRUPT_H

#include <stdbool.h>

void firn_interrupt_listen(void);
bool firn_interrupt_asked(void *unused);

/* When a signal asked to stop: ends the process by that signal, as a shell expects. Else returns. */
void firn_interrupt_obey(void);

#endif
