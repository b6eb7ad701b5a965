/* transfer/manifest.c - digests of what a container holds */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/manifest.h"

#include "base/fault.h"
#include "base/text.h"
#include "container/digest.h"
#include "firn/about.h"
#include "transfer/roll.h"
#include "transfer/stored_name.h"

#include <string.h>

enum { ESCAPED_ROOM = 3 * FIRN_INTAKE_NAME_MAX + 1 };

const char *firn_manifest_algorithm_name(enum firn_manifest_algorithm algorithm)
{
    switch (algorithm) {
    case FIRN_MANIFEST_SHA512: return "sha512";
    case FIRN_MANIFEST_MD5:    return "md5";
    case FIRN_MANIFEST_SHA256: break;
    }
    return "sha256";
}

static enum firn_digest_kind kind_of(enum firn_manifest_algorithm algorithm)
{
    switch (algorithm) {
    case FIRN_MANIFEST_SHA512: return FIRN_DIGEST_SHA512;
    case FIRN_MANIFEST_MD5:    return FIRN_DIGEST_MD5;
    case FIRN_MANIFEST_SHA256: break;
    }
    return FIRN_DIGEST_SHA256;
}

/* ---- digests that the catalogue does not have ---- */

struct digesting {
    const struct firn_manifest_options *options;
    struct firn_roll *roll;
    struct firn_about *about;
    struct firn_digest *digest;
    struct firn_roll_item *item;       /* at hand */
    uint64_t done;                     /* bytes of it that the digest has */
    uint64_t items, bytes;
    enum firn_status status;           /* of what wants met with */
};

static bool wants(void *self, const struct firn_item *item)
{
    struct digesting *d = self;
    struct firn_about_facts facts;
    enum firn_status status;

    if (!item->has_content || d->status != FIRN_OK)
        return false;
    status = firn_about_read(d->about, item, &facts);
    if (status == FIRN_NO_MEMORY)
        d->status = status;
    if (status != FIRN_OK)
        return false;
    d->item = firn_names_find(d->roll->items, facts.path, strlen(facts.path));
    return d->item != NULL && d->item->needed && d->item->number == item->number;
}

static enum firn_status begin(void *self, const struct firn_item *item, uint64_t foreseen)
{
    struct digesting *d = self;

    (void)item;
    (void)foreseen;
    d->done = 0;
    firn_digest_start(d->digest);
    return FIRN_OK;
}

static enum firn_status add(void *self, const struct firn_item *item, uint64_t at, const uint8_t *bytes, size_t count)
{
    struct digesting *d = self;

    (void)item;
    firn_digest_add_zeros(d->digest, at - d->done);
    firn_digest_add(d->digest, bytes, count);
    d->done = at + count;
    d->bytes += count;
    if (d->options->progress != NULL)
        d->options->progress(d->options->self, d->items, d->bytes);
    return FIRN_OK;
}

/* Only bytes that the SHA-256 of the catalogue vouches for get another digest. */
static enum firn_status end(void *self, const struct firn_item *item, const struct firn_reader_outcome *outcome)
{
    struct digesting *d = self;

    d->items++;
    d->item->known = outcome->lost_bytes == 0 && outcome->sum_right;
    if (d->item->known) {
        firn_digest_add_zeros(d->digest, item->bytes - d->done);
        firn_digest_finish(d->digest, d->item->digest);
    }
    return d->status;
}

static enum firn_status digest_content(struct firn_reader *reader, const struct firn_manifest_options *options,
                                       struct firn_roll *roll, struct firn_fault *fault)
{
    struct digesting d = { .options = options, .roll = roll, .status = FIRN_OK };
    const struct firn_reader_visitor visitor = { .self = &d, .wants = wants, .begin = begin, .bytes = add, .end = end };
    struct firn_reader_walk_report walked;
    enum firn_status status = firn_digest_make_kind(kind_of(options->algorithm), &d.digest);

    if (status == FIRN_OK)
        status = firn_about_make(options->memory, &d.about);
    if (status != FIRN_OK)
        (void)firn_fault_tell(fault, status, 0, 0, firn_manifest_algorithm_name(options->algorithm));
    if (status == FIRN_OK)
        status = firn_reader_walk(reader, &visitor, fault, &walked);
    if (status == FIRN_OK)
        status = d.status;
    firn_about_free(d.about);
    firn_digest_free(d.digest);
    return status;
}

/* ---- telling ---- */

static void escape(const char *path, char escaped[ESCAPED_ROOM])
{
    struct firn_text text;

    firn_text_start(&text, escaped, ESCAPED_ROOM);
    for (; *path != '\0'; path++)
        if (*path == '\n' || *path == '\r' || *path == '%')
            firn_text_add(&text, "%%%02X", (unsigned)*path);
        else
            firn_text_add_bytes(&text, path, 1);
}

static void tell_all(const struct firn_manifest_options *options, const struct firn_roll *roll,
                     struct firn_manifest_report *report)
{
    char escaped[ESCAPED_ROOM];

    for (size_t i = 0; i < firn_names_count(roll->items); i++) {
        const char *name;
        const struct firn_roll_item *item = firn_names_at(roll->items, i, &name), *file = item->file;
        struct firn_manifest_file told = { .path = name + roll->below_bytes, .escaped = escaped };

        if (!item->chosen || (item->type != '-' && item->type != 'h'))
            continue;
        if (file != NULL && file->type == '-') {
            told.bytes = file->bytes;
            told.digest = file->known ? file->digest : NULL;
        }
        told.digest_bytes = firn_digest_size(kind_of(options->algorithm));
        escape(told.path, escaped);
        report->files++;
        report->bytes += told.bytes;
        report->untold += told.digest == NULL;
        options->file(options->self, &told);
    }
}

enum firn_status firn_manifest_list(struct firn_reader *reader, const struct firn_manifest_options *options,
                                    struct firn_fault *fault, struct firn_manifest_report *report)
{
    struct firn_roll roll;
    enum firn_status status = firn_roll_make(reader, options->memory, &options->choice, fault, &roll);

    *report = (struct firn_manifest_report){ .items_unknown = roll.items_unknown, .cut_short = roll.cut_short };
    if (status == FIRN_OK && options->algorithm != FIRN_MANIFEST_SHA256)
        status = digest_content(reader, options, &roll, fault);
    if (status == FIRN_OK)
        tell_all(options, &roll, report);
    firn_roll_end(&roll);
    return status;
}
