/*
 * tests/help/shim_eio.c - a bad medium for the built program: preloaded, it spoils what reading one file gives
 *
 * SHIM_FILE    absolute path of the file; nothing else is touched
 * SHIM_BAD     "AT+BYTES,AT+BYTES...": reads that touch these bytes end before them, or fail with EIO
 * SHIM_TIMES   so many times for each range (default: for ever)
 * SHIM_FLIPS   "AT+BYTES,...": of these bytes some bits are flipped, others with each reading: in every 4096 bytes as
 *              many as SHIM_FLIP_COUNT says (default 20)
 * SHIM_SHORT   no read gives more than so many bytes
 * SHIM_LOG     a file that gets a line for every read: its place and its length
 *
 * Mappings of the file fail, as if the system had none: the program reads then.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#define _GNU_SOURCE
#include <dlfcn.h>
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <pthread.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/types.h>
#include <unistd.h>

enum { RANGES_MAX = 64 };

struct range { uint64_t at, bytes; unsigned long left; };

static struct range bad[RANGES_MAX], flaky[RANGES_MAX];
static size_t bad_count, flaky_count;
static unsigned long flip_count = 20;
static size_t short_bytes = SIZE_MAX;
static const char *file, *log_path;
static uint64_t state = 1931;
static pthread_once_t once = PTHREAD_ONCE_INIT;
static pthread_mutex_t turn = PTHREAD_MUTEX_INITIALIZER;
static ssize_t (*real_pread)(int, void *, size_t, off_t);
static void *(*real_mmap)(void *, size_t, int, int, int, off_t);

static size_t read_ranges(const char *words, unsigned long times, struct range *ranges)
{
    size_t count = 0;
    char *end;

    for (; words != NULL && *words != '\0' && count < RANGES_MAX; count++) {
        ranges[count] = (struct range){ .at = strtoull(words, &end, 10), .left = times };
        ranges[count].bytes = *end == '+' ? strtoull(end + 1, &end, 10) : 1;
        words = *end == ',' ? end + 1 : NULL;
    }
    return count;
}

static void start(void)
{
    const char *times = getenv("SHIM_TIMES"), *some = getenv("SHIM_SHORT"), *flips = getenv("SHIM_FLIP_COUNT");

    file = getenv("SHIM_FILE");
    log_path = getenv("SHIM_LOG");
    bad_count = read_ranges(getenv("SHIM_BAD"), times == NULL ? ULONG_MAX : strtoul(times, NULL, 10), bad);
    flaky_count = read_ranges(getenv("SHIM_FLIPS"), 0, flaky);
    if (some != NULL)
        short_bytes = strtoul(some, NULL, 10);
    if (flips != NULL)
        flip_count = strtoul(flips, NULL, 10);
    *(void **)&real_pread = dlsym(RTLD_NEXT, "pread64");
    *(void **)&real_mmap = dlsym(RTLD_NEXT, "mmap64");
    if (real_pread == NULL || real_mmap == NULL) {
        fputs("shim_eio: the system's calls cannot be found\n", stderr);
        abort();
    }
}

static int concerns(int descriptor)
{
    char link[64], path[PATH_MAX];
    ssize_t length;

    pthread_once(&once, start);
    if (file == NULL || descriptor < 0)
        return 0;
    (void)snprintf(link, sizeof link, "/proc/self/fd/%d", descriptor);
    length = readlink(link, path, sizeof path - 1);
    if (length < 0)
        return 0;
    path[length] = '\0';
    return strcmp(path, file) == 0;
}

static uint64_t draw(void)
{
    state = state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
    return state >> 33;
}

static void flip_some(uint8_t *bytes, uint64_t at, size_t count)
{
    for (size_t i = 0; i < flaky_count; i++) {
        uint64_t from = flaky[i].at > at ? flaky[i].at : at;
        uint64_t end = flaky[i].at + flaky[i].bytes < at + count ? flaky[i].at + flaky[i].bytes : at + count;

        for (; from < end; from += 4096)
            for (unsigned long flip = 0; flip < flip_count; flip++)
                bytes[from - at + draw() % (end - from < 4096 ? end - from : 4096)] ^= (uint8_t)(1U << draw() % 8);
    }
}

/* How many of the bytes that are asked for can be had; -1: the first one is bad already. */
static ssize_t sound_bytes(uint64_t at, size_t count)
{
    for (size_t i = 0; i < bad_count; i++)
        if (bad[i].left > 0 && at < bad[i].at + bad[i].bytes && bad[i].at < at + count) {
            if (bad[i].at > at) {
                count = (size_t)(bad[i].at - at);
                continue;
            }
            bad[i].left -= bad[i].left != ULONG_MAX;
            return -1;
        }
    return (ssize_t)count;
}

static void note(uint64_t at, size_t count)
{
    FILE *out = log_path == NULL ? NULL : fopen(log_path, "a");

    if (out == NULL)
        return;
    fprintf(out, "%llu %zu\n", (unsigned long long)at, count);
    fclose(out);
}

ssize_t pread64(int descriptor, void *bytes, size_t count, off_t at)
{
    ssize_t got, sound;

    if (!concerns(descriptor))
        return real_pread(descriptor, bytes, count, at);
    count = count < short_bytes ? count : short_bytes;
    pthread_mutex_lock(&turn);
    note((uint64_t)at, count);
    sound = sound_bytes((uint64_t)at, count);
    if (sound < 0) {
        errno = EIO;
        got = -1;
    } else {
        got = real_pread(descriptor, bytes, (size_t)sound, at);
        if (got > 0)
            flip_some(bytes, (uint64_t)at, (size_t)got);
    }
    pthread_mutex_unlock(&turn);
    return got;
}

void *mmap64(void *address, size_t length, int protection, int flags, int descriptor, off_t at)
{
    if (!concerns(descriptor))
        return real_mmap(address, length, protection, flags, descriptor, at);
    errno = ENODEV;
    return MAP_FAILED;
}
