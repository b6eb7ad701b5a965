/* transfer/expect.c - holding what is taken in against the donor's manifest */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/expect.h"

#include "base/fault.h"
#include "base/memory.h"
#include "base/text.h"
#include "transfer/manifest_lines.h"
#include "transfer/names.h"
#include "transfer/stored_name.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <unistd.h>

enum { DIGEST_BYTES_MAX = 64 };

/* Which digest it is its length tells. */
static const struct { size_t bytes; unsigned asked; } kinds[] = {
    { FIRN_ITEM_SHA256_BYTES, 0 }, { 64, FIRN_INTAKE_SHA512 }, { 16, FIRN_INTAKE_MD5 }
};

enum { SHA256, SHA512, MD5, KINDS };

/* A path as the manifest means it. */
struct listed {
    unsigned kind;
    uint8_t digest[DIGEST_BYTES_MAX];
    bool seen;
    bool matched;                /* the last time it was seen */
};

/* Another way to read a path: as it stands. */
struct alias {
    struct listed *listed;
};

struct firn_expect {
    const struct firn_memory *memory;
    struct firn_names *listed;
    struct firn_names *aliases;
    unsigned digests;            /* enum firn_intake_digest, or'ed */
};

static enum firn_status make(const struct firn_memory *memory, struct firn_expect **out)
{
    struct firn_expect *expect = firn_memory_get_zeroed(memory, 1, sizeof *expect);
    enum firn_status status;

    *out = NULL;
    if (expect == NULL)
        return FIRN_NO_MEMORY;
    expect->memory = memory;
    status = firn_names_make(memory, sizeof(struct listed), &expect->listed);
    if (status == FIRN_OK)
        status = firn_names_make(memory, sizeof(struct alias), &expect->aliases);
    if (status != FIRN_OK) {
        firn_expect_free(expect);
        return status;
    }
    *out = expect;
    return FIRN_OK;
}

void firn_expect_free(struct firn_expect *expect)
{
    if (expect == NULL)
        return;
    firn_names_free(expect->listed);
    firn_names_free(expect->aliases);
    expect->memory->put(expect->memory->self, expect);
}

/* ---- one line ---- */

/* Enters a path with its digest; a path that is there already must have the same. */
static enum firn_status enter(struct firn_expect *expect, const char *path, unsigned kind, const uint8_t *digest,
                              struct listed **out, const char **fault)
{
    char stored[FIRN_STORED_NAME_ROOM];
    void *record;
    bool fresh;
    enum firn_status status = firn_stored_name_make(path, stored, NULL);

    if (status != FIRN_OK || stored[0] == '\0') {
        *fault = "a path that is no path";
        return FIRN_BAD_DATA;
    }
    status = firn_names_add(expect->listed, stored, strlen(stored), &record, &fresh);
    if (status != FIRN_OK)
        return status;
    *out = record;
    if (fresh) {
        (*out)->kind = kind;
        memcpy((*out)->digest, digest, kinds[kind].bytes);
        expect->digests |= kinds[kind].asked;
        return FIRN_OK;
    }
    if ((*out)->kind != kind || memcmp((*out)->digest, digest, kinds[kind].bytes) != 0) {
        *fault = "a path named twice with different digests";
        return FIRN_BAD_DATA;
    }
    return FIRN_OK;
}

/* The path as it stands leads to the same, unless it is listed itself. */
static enum firn_status enter_alias(struct firn_expect *expect, const char *path, struct listed *listed)
{
    char stored[FIRN_STORED_NAME_ROOM];
    void *record;
    enum firn_status status;

    if (firn_stored_name_make(path, stored, NULL) != FIRN_OK)
        return FIRN_OK;
    status = firn_names_add(expect->aliases, stored, strlen(stored), &record, NULL);
    if (status == FIRN_OK)
        ((struct alias *)record)->listed = listed;
    return status;
}

/* One line without its end, which may be changed. */
static enum firn_status take_line(struct firn_expect *expect, char *line, const char **fault)
{
    uint8_t digest[DIGEST_BYTES_MAX];
    bool backslashes = line[0] == '\\';
    unsigned kind = SHA256;
    struct listed *listed = NULL;
    size_t digits, blanks;
    enum firn_status status;
    char *path;
    char raw[FIRN_STORED_NAME_ROOM];

    line += backslashes;
    digits = strcspn(line, " \t");
    while (kind < KINDS && digits != 2 * kinds[kind].bytes)
        kind++;
    if (kind == KINDS || firn_text_parse_hex(line, kinds[kind].bytes, digest) != FIRN_OK) {
        *fault = "no SHA-256, SHA-512 or MD5 at the start of a line";
        return FIRN_BAD_DATA;
    }
    blanks = strspn(line + digits, " \t");
    path = line + digits + blanks;
    if (blanks == 0 || path[0] == '\0') {
        *fault = "a digest without a path";
        return FIRN_BAD_DATA;
    }
    raw[0] = '\0';
    if (strlen(path) < sizeof raw && (path[0] == '*' || strchr(path, '%') != NULL))
        memcpy(raw, path, strlen(path) + 1);
    path += path[0] == '*';
    firn_manifest_lines_decode(path, backslashes);
    status = enter(expect, path, kind, digest, &listed, fault);
    return status == FIRN_OK && raw[0] != '\0' ? enter_alias(expect, raw, listed) : status;
}

/* ---- all lines ---- */

static enum firn_status take(void *self, char *line, const char **fault)
{
    return take_line(self, line, fault);
}

enum firn_status firn_expect_load(int descriptor, const struct firn_memory *memory, struct firn_fault *fault,
                                  struct firn_expect **out)
{
    struct firn_expect *expect;
    enum firn_status status = make(memory, &expect);

    *out = NULL;
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, 0, 0, "");
    status = firn_manifest_lines_read(descriptor, memory, take, expect, fault);
    if (status != FIRN_OK) {
        firn_expect_free(expect);
        return status;
    }
    *out = expect;
    return FIRN_OK;
}

enum firn_status firn_expect_open(const char *path, const struct firn_memory *memory, struct firn_fault *fault,
                                  struct firn_expect **out)
{
    enum firn_status status;
    int descriptor;

    if (strcmp(path, "-") == 0)
        return firn_expect_load(STDIN_FILENO, memory, fault, out);
    *out = NULL;
    descriptor = open(path, O_RDONLY | O_CLOEXEC);
    if (descriptor < 0)
        return firn_fault_tell(fault, FIRN_NO_INPUT, errno, 0, path);
    status = firn_expect_load(descriptor, memory, fault, out);
    close(descriptor);
    return status;
}

/* ---- asking ---- */

uint64_t firn_expect_count(const struct firn_expect *expect)
{
    return firn_names_count(expect->listed);
}

static struct listed *look_up(const struct firn_expect *expect, const char *path)
{
    size_t bytes = strlen(path);
    struct listed *listed = firn_names_find(expect->listed, path, bytes);
    const struct alias *alias = listed != NULL ? NULL : firn_names_find(expect->aliases, path, bytes);

    return alias != NULL ? alias->listed : listed;
}

/* The three readings of a stored name, in the order that firn/expect.h gives. */
static struct listed *look_up_item(const struct firn_expect *expect, const char *name, size_t operand_bytes)
{
    size_t last = operand_bytes;
    struct listed *listed = look_up(expect, name);

    while (last > 0 && name[last - 1] != '/')
        last--;
    if (listed == NULL)
        listed = look_up(expect, name + last);
    if (listed == NULL && name[operand_bytes] == '/')
        listed = look_up(expect, name + operand_bytes + 1);
    return listed;
}

unsigned firn_expect_digests(const struct firn_expect *expect)
{
    return expect->digests;
}

static enum firn_expect_verdict judge(struct listed *listed, const uint8_t *digest)
{
    listed->seen = true;
    listed->matched = digest != NULL && memcmp(listed->digest, digest, kinds[listed->kind].bytes) == 0;
    return listed->matched ? FIRN_EXPECT_MATCH : FIRN_EXPECT_MISMATCH;
}

enum firn_expect_verdict firn_expect_see(struct firn_expect *expect, const char *name, size_t operand_bytes,
                                         const uint8_t sha256[FIRN_ITEM_SHA256_BYTES],
                                         const struct firn_intake_digests *others)
{
    struct listed *listed = look_up_item(expect, name, operand_bytes);

    if (listed == NULL)
        return FIRN_EXPECT_UNLISTED;
    if (listed->kind == SHA256)
        return judge(listed, sha256);
    return judge(listed, others == NULL ? NULL : listed->kind == SHA512 ? others->sha512 : others->md5);
}

enum firn_expect_verdict firn_expect_see_link(struct firn_expect *expect, const char *name, size_t operand_bytes,
                                              const char *target)
{
    const struct listed *listed = look_up_item(expect, target, operand_bytes);
    struct listed *link = look_up_item(expect, name, operand_bytes);

    if (listed == NULL || !listed->matched || link == NULL || link->kind != listed->kind)
        return FIRN_EXPECT_UNLISTED;
    return judge(link, listed->digest);
}

uint64_t firn_expect_missing(const struct firn_expect *expect, void (*missing)(void *self, const char *path),
                             void *self)
{
    uint64_t count = 0;

    for (size_t i = 0; i < firn_names_count(expect->listed); i++) {
        const char *path;
        const struct listed *listed = firn_names_at(expect->listed, i, &path);

        if (listed->seen)
            continue;
        count++;
        if (missing != NULL)
            missing(self, path);
    }
    return count;
}
