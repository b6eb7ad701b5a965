/* base/status.c - a phrase for every status */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/status.h"

const char *firn_status_text(enum firn_status status)
{
    switch (status) {
    case FIRN_OK:             return "done";
    case FIRN_END:            return "nothing more";
    case FIRN_NO_MEMORY:      return "out of memory";
    case FIRN_BAD_ARGUMENT:   return "not a valid request";
    case FIRN_BAD_LENGTHS:    return "code lengths make no prefix code";
    case FIRN_BAD_DATA:       return "malformed data";
    case FIRN_NOT_CONTAINER:  return "not a firn container";
    case FIRN_FOREIGN_FORMAT: return "a container of a format version this program does not read";
    case FIRN_OVER_LIMIT:     return "beyond a limit of the format";
    case FIRN_NO_ROOM:        return "buffer too small";
    case FIRN_BEYOND_REPAIR:  return "damaged beyond repair";
    case FIRN_LOST:           return "bytes are lost";
    case FIRN_MISMATCH:       return "does not match its digest";
    case FIRN_NO_INPUT:       return "cannot be opened";
    case FIRN_EXISTS:         return "exists already";
    case FIRN_CANNOT_CREATE:  return "cannot be created";
    case FIRN_IO:             return "reading or writing failed";
    case FIRN_BUSY:           return "in use by another run";
    case FIRN_CHANGED:        return "changed while it was being read";
    case FIRN_STOPPED:        return "stopped";
    case FIRN_READ_ONLY:      return "cannot be written to";
    }
    return "unknown status";
}
