/*
 * container/sheets_rescue.h - the last resort for a sheet in memory: what the reserve did not bring back
 *
 * Room: container. Only for the files called sheets. First every row that has lost blocks yet goes through column
 * rescue (guard/rescue.h); then single blocks of rows that did not come back through deep repair (guard/deep.h), as
 * many as the budget of FIRN_SHEETS_RESCUE_TRIALS hashes allows, in their order; then, where that helped, the rows
 * again.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_SHEETS_RESCUE_H
#define FIRN_CONTAINER_SHEETS_RESCUE_H

#include "container/sheets_state.h"

enum { FIRN_SHEETS_RESCUE_TRIALS = 1 << 24 };      /* of deep repair, a sheet: a few seconds of one processor */

/*
 * Takes the mended sheet with its findings, and makes REBUILT of what comes back from its row, MENDED of what deep
 * repair brings. Borrows 2.6 MiB of work space for every worker, and a few bytes for every row, while there is
 * anything to do. FIRN_OK, FIRN_NO_MEMORY, FIRN_STOPPED.
 */
enum firn_status firn_sheets_rescue(struct firn_sheets *sheets);

#endif
