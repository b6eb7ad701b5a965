/* tests/help/fault_store.c - a store over memory that fails when it is told to, and forgets what a power cut takes */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "help/fault_store.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>

bool fault_power_step(struct fault_power *power)
{
    if (power == NULL)
        return true;
    if (power->off || (power->cut_after != 0 && power->steps >= power->cut_after))
        power->off = true;
    else
        power->steps++;
    return !power->off;
}

uint64_t fault_random(uint64_t *state)
{
    /* multiplier and increment: D. E. Knuth's for MMIX (The Art of Computer Programming, vol. 2, 3.3.4, table 1) */
    *state = *state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return *state ^ *state >> 32;
}

/* A test that runs out of memory has nothing to say. */
static void set_size(struct fault_picture *picture, size_t bytes)
{
    if (bytes > picture->room) {
        size_t room = bytes < 4096 ? 4096 : bytes + bytes / 2;
        uint8_t *larger = realloc(picture->bytes, room);

        if (larger == NULL)
            abort();
        picture->bytes = larger;
        picture->room = room;
    }
    if (bytes > picture->used)
        memset(picture->bytes + picture->used, 0, bytes - picture->used);
    picture->used = bytes;
}

/* How many of count bytes a call may move before it fails; *os_error is 0 when it does not fail. */
static size_t judge(struct fault_store *fault, enum fault_deed deed, uint64_t at, size_t count, int *os_error)
{
    const struct fault_rule *rule = &fault->rules[deed];
    uint64_t call = ++fault->calls[deed];

    *os_error = 0;
    if (fault->power != NULL && fault->power->off) {
        *os_error = EIO;
        return 0;
    }
    if (rule->from != 0 && call >= rule->from && call - rule->from < rule->times) {
        *os_error = rule->os_error != 0 ? rule->os_error : EIO;
        return rule->halfway ? count / 2 : 0;
    }
    for (size_t i = 0; i < fault->range_count && deed != FAULT_SYNC; i++) {
        const struct fault_range *range = &fault->ranges[i];

        if (range->swallows || (deed == FAULT_WRITE && !range->writes_too) || at + count <= range->at
            || at >= range->at + range->bytes)
            continue;
        *os_error = EIO;
        count = at >= range->at ? 0 : (size_t)(range->at - at);
    }
    return count;
}

static enum firn_status fault_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct fault_store *fault = self;
    size_t left = at < fault->now.used ? fault->now.used - (size_t)at : 0;

    *got = judge(fault, FAULT_READ, at, count < left ? count : left, os_error);
    if (*got > 0)
        memcpy(bytes, fault->now.bytes + at, *got);
    return *os_error == 0 ? FIRN_OK : FIRN_IO;
}

/* What lands of one byte that is written. */
static uint8_t landing(const struct fault_store *fault, uint64_t at, uint8_t written)
{
    for (size_t i = 0; i < fault->range_count; i++)
        if (fault->ranges[i].swallows && at - fault->ranges[i].at < fault->ranges[i].bytes)
            return fault->now.bytes[at];
    return written;
}

static enum firn_status fault_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct fault_store *fault = self;
    size_t moved = fault_power_step(fault->power) ? count : 0;

    moved = judge(fault, FAULT_WRITE, at, moved, os_error);
    if (fault->room_bytes != 0 && at + moved > fault->room_bytes) {
        moved = at < fault->room_bytes ? (size_t)(fault->room_bytes - at) : 0;
        *os_error = ENOSPC;
    }
    if (moved > 0) {
        if (at + moved > fault->now.used)
            set_size(&fault->now, (size_t)at + moved);
        for (size_t i = 0; i < moved; i++)
            fault->now.bytes[at + i] = landing(fault, at + i, ((const uint8_t *)bytes)[i]);
    }
    return *os_error == 0 ? FIRN_OK : *os_error == EROFS ? FIRN_READ_ONLY : FIRN_IO;
}

static enum firn_status fault_size(void *self, uint64_t *bytes, int *os_error)
{
    *bytes = ((struct fault_store *)self)->now.used;
    *os_error = 0;
    return FIRN_OK;
}

static enum firn_status fault_resize(void *self, uint64_t bytes, int *os_error)
{
    struct fault_store *fault = self;

    *os_error = fault_power_step(fault->power) ? 0 : EIO;
    if (*os_error == 0)
        set_size(&fault->now, (size_t)bytes);
    return *os_error == 0 ? FIRN_OK : FIRN_IO;
}

static enum firn_status fault_sync(void *self, int *os_error)
{
    struct fault_store *fault = self;
    bool powered = fault_power_step(fault->power);

    (void)judge(fault, FAULT_SYNC, 0, 0, os_error);
    if (*os_error != 0 || !powered)
        return FIRN_IO;
    set_size(&fault->kept, fault->now.used);
    if (fault->now.used > 0)
        memcpy(fault->kept.bytes, fault->now.bytes, fault->now.used);
    return FIRN_OK;
}

static void fault_forget(void *self, uint64_t at, uint64_t bytes)
{
    (void)self, (void)at, (void)bytes;
}

static void fault_close(void *self)
{
    (void)self;
}

void fault_store_make(struct fault_store *fault, const uint8_t *bytes, size_t count)
{
    *fault = (struct fault_store){ .store = { .self = fault, .read_at = fault_read_at, .write_at = fault_write_at,
                                              .size = fault_size, .resize = fault_resize, .sync = fault_sync,
                                              .forget = fault_forget, .close = fault_close } };
    set_size(&fault->now, count);
    set_size(&fault->kept, count);
    if (count > 0) {
        memcpy(fault->now.bytes, bytes, count);
        memcpy(fault->kept.bytes, bytes, count);
    }
}

void fault_store_free(struct fault_store *fault)
{
    free(fault->now.bytes);
    free(fault->kept.bytes);
    fault->now = fault->kept = (struct fault_picture){ NULL, 0, 0 };
}

void fault_store_calm(struct fault_store *fault)
{
    memset(fault->rules, 0, sizeof fault->rules);
    memset(fault->calls, 0, sizeof fault->calls);
    fault->range_count = 0;
    fault->room_bytes = 0;
}

void fault_store_power_back(struct fault_store *fault, uint64_t seed)
{
    uint64_t state = seed;
    bool sized = seed == UINT64_MAX || (seed != 0 && fault_random(&state) % 2 == 0);
    size_t bytes = sized ? fault->now.used : fault->kept.used;

    set_size(&fault->kept, bytes);
    for (size_t at = 0; at < bytes && at < fault->now.used; at += FAULT_SECTOR_BYTES) {
        size_t end = at + FAULT_SECTOR_BYTES < bytes ? at + FAULT_SECTOR_BYTES : bytes;

        if (end > fault->now.used)
            end = fault->now.used;
        if (seed == UINT64_MAX || (seed != 0 && fault_random(&state) % 2 == 0))
            memcpy(fault->kept.bytes + at, fault->now.bytes + at, end - at);
    }
    set_size(&fault->now, bytes);
    if (bytes > 0)
        memcpy(fault->now.bytes, fault->kept.bytes, bytes);
}
