/*
 * container/sheets_layout.h - how a container is laid out, told by its blocks
 *
 * Room: container. Only for the files called sheets. Any one good block tells it. Where no block is good any more, as
 * at a raw bit error rate of one in a thousand, the tags of all blocks are laid over each other, and each bit is
 * taken as most of them have it. A single tag cannot be believed then, but where a block lies tells what its tag must
 * have been: a block whose tag differs from that in few bits belongs to the container, and so tells where it ends.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_LAYOUT_H
#define FIRN_CONTAINER_SHEETS_LAYOUT_H

#include "container/sheets_state.h"

/* Fills in the layout. FIRN_OK, FIRN_NOT_CONTAINER, FIRN_FOREIGN_FORMAT, FIRN_STOPPED. */
enum firn_status firn_sheets_layout_find(struct firn_sheets *sheets);

#endif
