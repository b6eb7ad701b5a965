/*
 * desk/loss.h - the account of loss: which bytes of which item are gone, and why
 *
 * Room: desk. For people a paragraph for each item; for programs a JSON object a line. Places are those in the
 * container's file; block n begins at 4096 * (n + 1) of it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_LOSS_H
#define FIRN_DESK_LOSS_H

#include "desk/view.h"
#include "firn/outlet.h"

struct firn_loss {
    struct firn_store_stage *stage;      /* NULL: nobody asked for an account */
    struct firn_view view;               /* writes to its file */
    const char *path;
    uint64_t items;                      /* with losses */
};

/* The ranges of a finding as fields of the JSON object that is being written. */
void firn_loss_ranges(struct firn_view *view, const struct firn_outlet_finding *finding);

/*
 * Begins an account in a file, which appears when it is kept. path NULL: there is none, and the calls below do nothing.
 * FIRN_OK, FIRN_EXISTS, FIRN_CANNOT_CREATE, FIRN_NO_MEMORY.
 */
enum firn_status firn_loss_open(struct firn_loss *loss, const char *path, const char *container,
                                const struct firn_outlet_options *outlet, bool json, struct firn_fault *fault);

/* Adds a finding, if it is one of loss. */
void firn_loss_add(struct firn_loss *loss, const struct firn_outlet_finding *finding);

/* Adds the sum and gives the file its name. FIRN_OK, FIRN_IO, FIRN_EXISTS, FIRN_CANNOT_CREATE. */
enum firn_status firn_loss_keep(struct firn_loss *loss, const struct firn_outlet_report *report,
                                struct firn_fault *fault);

/* What was not kept is gone. */
void firn_loss_close(struct firn_loss *loss);

#endif
