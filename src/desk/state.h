/*
 * desk/state.h - the folder that remembers from one run to the next
 *
 * Room: desk. The first of these that is there: what was asked for, STATE_DIRECTORY as systemd sets it for a service,
 * XDG_STATE_HOME/firn, HOME/.local/state/firn (XDG Base Directory Specification 0.8: a relative path counts as none).
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_STATE_H
#define FIRN_DESK_STATE_H

#include "firn/status.h"

#include <stddef.h>

/*
 * Finds the folder and makes it if it is not there, for its owner's eyes only. asked: NULL for nothing.
 * FIRN_OK; FIRN_NO_INPUT: nothing names one; FIRN_CANNOT_CREATE, with fault.
 */
enum firn_status firn_state_folder(const char *asked, char *folder, size_t room, struct firn_fault *fault);

#endif
