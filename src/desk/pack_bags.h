/*
 * desk/pack_bags.h - the bags among the operands of pack, checked while they are taken in
 *
 * Room: desk. A path that is a BagIt bag is held to what it says of itself; one that is not complete and valid is
 * refused, and what is wrong with it is named.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_PACK_BAGS_H
#define FIRN_DESK_PACK_BAGS_H

#include "desk/args.h"
#include "desk/view.h"
#include "firn/bag.h"

/* One for each operand that is a bag. */
struct firn_pack_bag {
    const char *operand;
    struct firn_bag *bag;                  /* NULL when it is none */
    struct firn_bag_report report;         /* once judged */
};

struct firn_pack_bags {
    struct firn_view *view;
    struct firn_pack_bag *list;            /* count of them, for all operands */
    size_t count;
    unsigned digests;                      /* to ask the intake for */
    enum firn_status status;               /* of seeing items */
    uint64_t troubles;                     /* told by judging */
    const struct firn_pack_bag *at;        /* the one that is being told of */
};

/* To be ended in any case. FIRN_OK, or what firn_bag_open returns, with fault. */
enum firn_status firn_pack_bags_open(struct firn_pack_bags *bags, const struct firn_args *args, struct firn_view *view,
                                     struct firn_fault *fault);
void firn_pack_bags_end(struct firn_pack_bags *bags);

void firn_pack_bags_see(struct firn_pack_bags *bags, const struct firn_intake_item *item);

/* When all is taken in: tells what is wrong and counts it in troubles. */
void firn_pack_bags_judge(struct firn_pack_bags *bags);

/* A field of the report for each bag. */
void firn_pack_bags_show(const struct firn_pack_bags *bags);

#endif
