/* tests/fuzz/fuzz_bag.c - the tag files of a bag that are anything; no path that they list leads out of it */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/bag.h"

#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static char folder[] = "/tmp/firn-fuzz-bag-XXXXXX";

static void need(bool fine)
{
    if (!fine)
        abort();
}

static void put(const char *name, const uint8_t *bytes, size_t count)
{
    int file = open(name, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0600);

    need(file >= 0 && write(file, bytes, count) == (ssize_t)count && close(file) == 0);
}

static void note(void *self, const struct firn_bag_finding *finding)
{
    const char *path = finding->path;

    (void)self;
    need(path[0] != '/' && path[0] != '\0' && strcmp(path, "..") != 0 && strncmp(path, "../", 3) != 0);
    need(strstr(path, "/../") == NULL);
}

/* Input: tag files behind one another, each ended by 0xFF; empty ones are left out. */
int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const char *const names[] = {
        "manifest-sha256.txt", "manifest-md5.txt", "tagmanifest-sha1.txt", "bag-info.txt", "fetch.txt", "bagit.txt"
    };
    static const char declaration[] = "BagIt-Version: 1.0\nTag-File-Character-Encoding: UTF-8\n";
    static const uint8_t sha256[32];
    struct firn_intake_digests digests = { .md5 = { 0 } };
    const struct firn_intake_item item = {
        .name = "data/x", .has_content = true, .bytes = 1, .sha256 = sha256, .digests = &digests
    };
    struct firn_bag_report report;
    struct firn_fault fault;
    struct firn_bag *bag;

    if (folder[strlen(folder) - 1] == 'X')
        need(mkdtemp(folder) != NULL && chdir(folder) == 0);
    put("bagit.txt", (const uint8_t *)declaration, sizeof declaration - 1);
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        const uint8_t *end = size == 0 ? NULL : memchr(data, 0xFF, size);
        size_t count = end == NULL ? size : (size_t)(end - data);

        if (count > 0)
            put(names[i], data, count);
        else if (i + 1 < sizeof names / sizeof names[0])
            (void)unlink(names[i]);
        data += count + (end != NULL);
        size -= count + (end != NULL);
    }
    if (firn_bag_open(".", firn_memory_system(), &fault, &bag) != FIRN_OK)
        return 0;
    need(bag != NULL && firn_bag_see(bag, &item) == FIRN_OK);
    firn_bag_finish(bag, note, NULL, &report);
    need(report.files == 1 && report.bytes == 1);
    firn_bag_free(bag);
    return 0;
}
