/*
 * desk/events.h - what was done to which container, told as preservation events
 *
 * Room: desk. Event types are terms of the Library of Congress vocabulary preservation/eventType; the names of the
 * fields are the semantic units of PREMIS 3.0 (2015), one JSON object a line, appended and synced. An institution that
 * keeps PREMIS records can take them over; what it records, and for how long, is its own policy.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_DESK_EVENTS_H
#define FIRN_DESK_EVENTS_H

#include "desk/lines.h"

enum firn_events_type {
    FIRN_EVENTS_PACKING,
    FIRN_EVENTS_DIGEST_CALCULATION,
    FIRN_EVENTS_FIXITY_CHECK,
    FIRN_EVENTS_RECOVERY,
    FIRN_EVENTS_UNPACKING,
    FIRN_EVENTS_REPLICATION
};

enum firn_events_outcome { FIRN_EVENTS_SUCCESS, FIRN_EVENTS_FAILURE, FIRN_EVENTS_UNKNOWN };

struct firn_events_event {
    enum firn_events_type type;
    enum firn_events_outcome outcome;
    const char *detail;                /* eventDetail: what was done, in words; NULL for nothing */
    const char *note;                  /* eventOutcomeDetailNote: what came of it; NULL for nothing */
    const char *container;             /* its path; `-` for standard input or output */
    bool made;                         /* the container is what came of it, not what it was done to */
    const uint8_t *id;                 /* 8 bytes, the container's; NULL when it is not known */
    const char *const *others;         /* paths at the other end: sources of a container made, else what came of it */
    size_t other_count;
    const uint8_t *catalogue_sha256;   /* of a digest calculation; else NULL */
};

/* Into a file that firn_lines_open has opened, if it was to. */
void firn_events_tell(struct firn_lines *events, const struct firn_events_event *event);

/* The vocabulary's term. */
const char *firn_events_term(enum firn_events_type type);

#endif
