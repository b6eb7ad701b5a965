/*
 * firn/status.h - how a call says what became of it
 *
 * Room: base. A status means that the promise in a function's name was not kept. Damage that a call was sent to look
 * for is a finding and stands in its report, not here. There is no last-error variable: what happened where goes into
 * a struct firn_fault that the caller lends.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_STATUS_H
#define FIRN_STATUS_H

#include <stdint.h>

#if defined(__GNUC__)
#define FIRN_API __attribute__((visibility("default")))
#else
#define FIRN_API
#endif

enum firn_status {
    FIRN_OK = 0,
    FIRN_END,            /* an iteration has nothing more to give */
    FIRN_NO_MEMORY,
    FIRN_BAD_ARGUMENT,   /* the caller's words are outside the contract */
    FIRN_BAD_LENGTHS,    /* code lengths that are no complete prefix code */
    FIRN_BAD_DATA,       /* bytes that no writer of this format makes */
    FIRN_NOT_CONTAINER,  /* no block of a container was found */
    FIRN_FOREIGN_FORMAT, /* a container of a format version this build does not read */
    FIRN_OVER_LIMIT,     /* a size beyond a named limit (base/limits.h) */
    FIRN_NO_ROOM,        /* the lent buffer is too small */
    FIRN_BEYOND_REPAIR,  /* more damage than the code at hand can mend */
    FIRN_LOST,           /* bytes that were asked for are gone */
    FIRN_MISMATCH,       /* bytes differ from what a digest says of them */
    FIRN_NO_INPUT,       /* cannot be opened or is not there */
    FIRN_EXISTS,         /* the place is taken and may not be overwritten */
    FIRN_CANNOT_CREATE,
    FIRN_IO,             /* reading or writing failed; os_error tells why */
    FIRN_BUSY,           /* somebody else holds it: try again later */
    FIRN_CHANGED,        /* the source changed while it was being read */
    FIRN_STOPPED,        /* asked to stop */
    FIRN_READ_ONLY       /* writing is not possible here */
};

/* A short lower-case phrase in English, static storage, never NULL. */
FIRN_API const char *firn_status_text(enum firn_status status);

/* What went wrong where; filled in by calls that take one when they do not return FIRN_OK. All zero means unknown. */
struct firn_fault {
    int os_error;      /* errno, or 0 */
    uint64_t at;       /* byte offset in the container or file it concerns */
    char what[200];    /* the thing concerned, for people: a path, a record, a block; "" if none */
};

#endif
