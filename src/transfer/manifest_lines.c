/* transfer/manifest_lines.c - the lines of a manifest or a tag file, and the paths in them */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "transfer/manifest_lines.h"

#include "base/fault.h"

#include <errno.h>
#include <string.h>
#include <unistd.h>

enum { PORTION_BYTES = 1 << 16, LINE_MAX_BYTES = 1 << 16 };

void firn_manifest_lines_decode(char *path, bool backslashes)
{
    static const struct { const char *written; char meant; } percents[] = {
        { "%0A", '\n' }, { "%0a", '\n' }, { "%0D", '\r' }, { "%0d", '\r' }, { "%25", '%' },
    }, slashes[] = { { "\\n", '\n' }, { "\\r", '\r' }, { "\\\\", '\\' } };
    char *to = path;

    while (*path != '\0') {
        char meant = *path;
        size_t bytes = 1;

        for (size_t i = 0; !backslashes && i < sizeof percents / sizeof percents[0]; i++)
            if (strncmp(path, percents[i].written, 3) == 0) {
                meant = percents[i].meant;
                bytes = 3;
            }
        for (size_t i = 0; backslashes && i < sizeof slashes / sizeof slashes[0]; i++)
            if (strncmp(path, slashes[i].written, 2) == 0) {
                meant = slashes[i].meant;
                bytes = 2;
            }
        *to++ = meant;
        path += bytes;
    }
    *to = '\0';
}

/* What of a line has come so far. */
struct reading {
    firn_manifest_lines_taker *take;
    void *self;
    char *line;                  /* LINE_MAX_BYTES */
    size_t used;
    uint64_t number;             /* of the line, from 1 */
    bool after_cr;
    const char *fault;
};

static enum firn_status end_line(struct reading *reading)
{
    enum firn_status status = FIRN_OK;

    reading->line[reading->used] = '\0';
    if (memchr(reading->line, '\0', reading->used) != NULL) {
        reading->fault = "a NUL in a line";
        return FIRN_BAD_DATA;
    }
    if (reading->used > 0)
        status = reading->take(reading->self, reading->line, &reading->fault);
    reading->used = 0;
    reading->number += status == FIRN_OK;
    return status;
}

static enum firn_status take_byte(struct reading *reading, char byte)
{
    bool half_end = byte == '\n' && reading->after_cr;

    reading->after_cr = byte == '\r';
    if (half_end)
        return FIRN_OK;
    if (byte == '\n' || byte == '\r')
        return end_line(reading);
    if (reading->used == LINE_MAX_BYTES - 1) {
        reading->fault = "a line that is too long";
        return FIRN_BAD_DATA;
    }
    reading->line[reading->used++] = byte;
    return FIRN_OK;
}

static enum firn_status read_all(struct reading *reading, int descriptor, char *portion, int *os_error)
{
    enum firn_status status = FIRN_OK;
    ssize_t got = 1;

    while (got != 0 && status == FIRN_OK) {
        got = read(descriptor, portion, PORTION_BYTES);
        if (got < 0 && errno == EINTR)
            continue;
        if (got < 0) {
            *os_error = errno;
            return FIRN_IO;
        }
        for (ssize_t i = 0; i < got && status == FIRN_OK; i++)
            status = take_byte(reading, portion[i]);
    }
    return status == FIRN_OK ? end_line(reading) : status;
}

enum firn_status firn_manifest_lines_read(int descriptor, const struct firn_memory *memory,
                                          firn_manifest_lines_taker *take, void *self, struct firn_fault *fault)
{
    char *room = memory->get(memory->self, PORTION_BYTES + LINE_MAX_BYTES);
    struct reading reading = { .take = take, .self = self, .number = 1, .fault = "" };
    enum firn_status status = FIRN_NO_MEMORY;
    int os_error = 0;

    if (room != NULL) {
        reading.line = room + PORTION_BYTES;
        status = read_all(&reading, descriptor, room, &os_error);
    }
    memory->put(memory->self, room);
    return status == FIRN_OK ? FIRN_OK : firn_fault_tell(fault, status, os_error, reading.number, reading.fault);
}
