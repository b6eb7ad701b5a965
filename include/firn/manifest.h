/*
 * firn/manifest.h - digests of what a container holds, as a manifest tells them; a folder held against a container
 *
 * Room: transfer. A manifest names regular files, each once, hard links under their own names, and nothing else (RFC
 * 8493, section 2.1.3). Of a name that stands twice in the catalogue the later item counts, as it does when items are
 * given back. Memory grows with the number of items.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_MANIFEST_H
#define FIRN_MANIFEST_H

#include "firn/pattern.h"
#include "firn/reader.h"

/*
 * SHA-256 stands in the catalogue; the others take decoding all content that they are asked for. MD5 withstands
 * accidents, nobody's intentions.
 */
enum firn_manifest_algorithm { FIRN_MANIFEST_SHA256, FIRN_MANIFEST_SHA512, FIRN_MANIFEST_MD5 };

enum { FIRN_MANIFEST_DIGEST_BYTES_MAX = 64 };

/* "sha256", "sha512", "md5": as RFC 8493 writes them in the name of a manifest. */
FIRN_API const char *firn_manifest_algorithm_name(enum firn_manifest_algorithm algorithm);

/* Which part of a container is meant. */
struct firn_manifest_choice {
    /* A folder, in any spelling (firn/intake.h): only what lies below it counts, and is named from inside it. */
    const char *below;                 /* NULL or "" for all */
    struct firn_pattern *patterns;     /* held against whole stored names; NULL for all */
};

struct firn_manifest_file {
    const char *path;                  /* may hold any byte but NUL */
    const char *escaped;               /* the same with LF, CR and % as %0A, %0D and %25 */
    uint64_t bytes;
    /* NULL when it cannot be told: the content is lost, in part or whole, or contradicts the catalogue */
    const uint8_t *digest;
    size_t digest_bytes;
};

struct firn_manifest_options {
    const struct firn_memory *memory;
    enum firn_manifest_algorithm algorithm;
    struct firn_manifest_choice choice;
    void *self;
    void (*file)(void *self, const struct firn_manifest_file *file);        /* in the order of the catalogue */
    void (*progress)(void *self, uint64_t items, uint64_t bytes);           /* decoded so far; may be NULL */
};

struct firn_manifest_report {
    uint64_t files;                    /* told of */
    uint64_t bytes;
    uint64_t untold;                   /* of these files: without a digest */
    uint64_t items_unknown;            /* catalogue entries that are lost or cannot be read */
    bool cut_short;                    /* the end of the container is gone: there may have been more */
};

/*
 * FIRN_OK also when something is lost: see the report. FIRN_NO_MEMORY, FIRN_STOPPED; FIRN_BAD_ARGUMENT: `below` is
 * longer than a name may be; FIRN_FOREIGN_FORMAT: this system's libcrypto is kept from doing MD5.
 */
FIRN_API enum firn_status firn_manifest_list(struct firn_reader *reader, const struct firn_manifest_options *options,
                                             struct firn_fault *fault, struct firn_manifest_report *report);

/* How a folder differs from a container. */
enum firn_manifest_kind {
    FIRN_MANIFEST_MISSING,             /* in the container, not in the folder */
    FIRN_MANIFEST_EXTRA,               /* in the folder, not in the container */
    FIRN_MANIFEST_CHANGED,             /* in both, and not alike */
    FIRN_MANIFEST_UNREADABLE,          /* in the folder, and cannot be read: os_error */
    FIRN_MANIFEST_UNTOLD,              /* its digest is lost from the container: not compared */
    FIRN_MANIFEST_KINDS
};

struct firn_manifest_finding {
    enum firn_manifest_kind kind;
    const char *path;                  /* from inside the folder */
    int os_error;
    const char *detail;                /* a phrase, or "" */
};

struct firn_manifest_check_options {
    const struct firn_memory *memory;
    const char *folder;
    struct firn_manifest_choice choice;
    void *self;
    void (*finding)(void *self, const struct firn_manifest_finding *finding);
    void (*progress)(void *self, uint64_t items, uint64_t bytes);           /* read so far; may be NULL */
    bool (*stop)(void *self);                                               /* may be NULL */
};

struct firn_manifest_check_report {
    uint64_t items;                    /* of the container, that were looked for */
    uint64_t alike;                    /* of these */
    uint64_t bytes;                    /* of files read from the folder */
    uint64_t findings[FIRN_MANIFEST_KINDS];
    uint64_t items_unknown;
    bool cut_short;
};

/*
 * Holds a folder against a container, without restoring: names, types, sizes, the SHA-256 of files, the targets of
 * symbolic links. Owners, modes, times and attributes are not compared. A folder that is no item is not extra if items
 * lie below it: restoring makes it. Links in the folder are not followed, and nothing is written. Findings come in the
 * order of the folder's names, then what is missing in that of the catalogue.
 *
 * FIRN_OK also when they differ; FIRN_NO_INPUT: no such folder; FIRN_NO_MEMORY; FIRN_STOPPED; FIRN_BAD_ARGUMENT.
 */
FIRN_API enum firn_status firn_manifest_check(struct firn_reader *reader,
                                              const struct firn_manifest_check_options *options,
                                              struct firn_fault *fault, struct firn_manifest_check_report *report);

#endif
