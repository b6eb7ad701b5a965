/*
 * desk/commands.h - the commands there are
 *
 * Room: desk. Each in its own file, command_NAME.c.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_COMMANDS_H
#define FIRN_DESK_COMMANDS_H

#include "desk/args.h"
#include "desk/view.h"

extern const struct firn_command firn_command_pack, firn_command_restore, firn_command_scrub, firn_command_inventory,
    firn_command_describe, firn_command_manifest;
extern const struct firn_command firn_command_collate, firn_command_drill;
extern const struct firn_command firn_command_forecast, firn_command_label;

#endif
