/*
 * container/arrange.h - who is whose neighbour in a window: packed small files to the front
 *
 * Room: container. Small files share segments. Those that are packed already spoil them for the others: they gain
 * nothing, and their bytes make every code longer. So their contents are put in front, in order, and cut apart from the
 * rest; an entry says so with a flag. Everything else stays as it came: neighbours in a folder are alike, and sorting
 * by kind was measured to lose more than it gains.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_ARRANGE_H
#define FIRN_CONTAINER_ARRANGE_H

#include "container/window.h"

/* For a window whose last cut is ended, before it is coded; window->coded is overwritten. Cuts are made anew. */
void firn_arrange(struct firn_window *window);

#endif
