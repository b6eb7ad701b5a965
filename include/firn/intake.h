/*
 * firn/intake.h - taking in folders, files and archives
 *
 * Room: transfer. Items go into a writer (firn/writer.h) one after another; what cannot be taken in is told of and
 * counted, and the work goes on. Nothing is stored half: an item whose source fails is withdrawn.
 *
 * Stored names are relative. From a path or an archive's name empty components and `.` are dropped, leading slashes
 * too, and each `..` takes the component before it away, if there is one: `/usr/share` is stored as `usr/share`,
 * `../x/y` as `x/y`, `a/../b` as `b`. Of an operand of which nothing remains (`.`, `/`, `..`) the contents are stored,
 * without a folder around them. A stored name has at most FIRN_INTAKE_NAME_MAX bytes.
 *
 * Stored of an item: type, mode, owner and group (numbers and names), modification time in nanoseconds, link target,
 * device numbers, extended attributes, POSIX access control lists; of a file its bytes, its holes as holes. Left out:
 * access, change and birth times and file flags, which reading changes or nobody can give back; and attributes in the
 * `system.` name space other than access control lists, which belong to a file system.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_INTAKE_H
#define FIRN_INTAKE_H

#include "firn/pattern.h"
#include "firn/writer.h"

enum { FIRN_INTAKE_NAME_MAX = 4095 };

/* Why something was not stored as it was found. */
enum firn_intake_kind {
    FIRN_INTAKE_UNREADABLE,       /* cannot be opened or read */
    FIRN_INTAKE_VANISHED,         /* was gone before it could be read */
    FIRN_INTAKE_CHANGED,          /* changed while it was being read */
    FIRN_INTAKE_UNSUPPORTED,      /* of a kind that cannot be stored: a socket, a name that is too long */
    FIRN_INTAKE_DUPLICATE,        /* its stored name belongs to an earlier operand */
    FIRN_INTAKE_ENCRYPTED,        /* in an archive, and cannot be read without its passphrase */
    FIRN_INTAKE_DAMAGED,          /* the archive is broken here */
    /* notes: the item is stored, or nothing is missing */
    FIRN_INTAKE_PARTIAL,          /* stored, but some of its metadata is not */
    FIRN_INTAKE_RENAMED,          /* stored under a name without the `..` it had in the archive */
    FIRN_INTAKE_UNLINKED,         /* a hard link of an archive, stored as a file of its own */
    FIRN_INTAKE_SKIPPED,          /* the container itself, or stored already by way of another operand */
    FIRN_INTAKE_KINDS
};

struct firn_intake_finding {
    enum firn_intake_kind kind;
    const char *path;             /* as a person would look for it: below the operand as given, or as in the archive */
    int os_error;                 /* errno, or 0 */
    const char *detail;           /* a phrase, or "" */
};

/* Digests beyond SHA-256 that may be asked for, as donors' manifests have them; they are not stored. */
enum firn_intake_digest { FIRN_INTAKE_SHA512 = 1, FIRN_INTAKE_SHA1 = 2, FIRN_INTAKE_MD5 = 4 };

/* Of a file, holes as zeros; what was not asked for is zero. */
struct firn_intake_digests { uint8_t sha512[64], sha1[20], md5[16]; };

/* An item that was stored. */
struct firn_intake_item {
    const char *name;             /* stored name */
    size_t operand_bytes;         /* the operand's own part of it; 0 for an archive and for operands like `.` */
    bool has_content;             /* a regular file */
    uint64_t bytes;               /* of the file, holes included */
    const char *link;             /* target of a hard link (a stored name), else NULL */
    const uint8_t *sha256;        /* of a regular file, or of the file a hard link leads to when known; else NULL */
    const struct firn_intake_digests *digests;      /* of a regular file, when any were asked for; else NULL */
};

struct firn_intake_file { uint64_t device, inode; };

/* Everything may be 0 or NULL but memory. What is lent stays lent until the call returns. */
struct firn_intake_options {
    const struct firn_memory *memory;
    struct firn_pattern *exclude;              /* items whose stored names it matches are left out */
    const struct firn_intake_file *own;        /* files never to be taken in: the container being written */
    size_t own_count;
    unsigned digests;                          /* enum firn_intake_digest, or'ed */
    bool keep_beginning;                       /* of a damaged archive: what came before the damage is kept */
    void *self;
    void (*finding)(void *self, const struct firn_intake_finding *finding);
    void (*item)(void *self, const struct firn_intake_item *item);
    void (*progress)(void *self, uint64_t items, uint64_t bytes);      /* so far; called often */
    bool (*stop)(void *self);                  /* asked between items; true ends the work with FIRN_STOPPED */
};

struct firn_intake_report {
    uint64_t items;                            /* stored */
    uint64_t hard_links;                       /* of these */
    uint64_t bytes;                            /* of file content read, without holes; withdrawn files included */
    uint64_t excluded;                         /* left out by a pattern; not what lies below an excluded folder */
    uint64_t traces;                           /* items withdrawn so late that the catalogue still names them */
    uint64_t findings[FIRN_INTAKE_KINDS];      /* by kind */
};

/* Findings that say that something is not in the container: all but the notes. */
FIRN_API uint64_t firn_intake_left_out(const struct firn_intake_report *report);

/*
 * Takes in paths with everything below them. The names of each folder are taken in the order of their bytes. Symbolic
 * links are stored, not followed; a path that ends with a slash is followed, as everywhere. File systems are crossed.
 * Names of one file (hard links) are recognised; the later ones are stored as links. Access times are left alone where
 * the system allows it. Open descriptors and stack are bounded, however deep the tree; memory grows with the largest
 * folder and with the number of files that have several names.
 *
 * Two operands of the same stored name, or one below the other: what the earlier one stored is not stored again. That
 * is FIRN_INTAKE_SKIPPED when it is the very same file or folder, and FIRN_INTAKE_DUPLICATE otherwise.
 *
 * writer  NULL: nothing is stored or read, only counted, so that progress has a goal. Files that have several names
 *         count once each time then, and bytes are those that the files claim.
 * report  always filled in
 *
 * FIRN_OK also when there are findings; FIRN_NO_MEMORY; FIRN_STOPPED; FIRN_BAD_ARGUMENT for an empty path;
 * FIRN_FOREIGN_FORMAT when this system's libcrypto is kept from a digest that was asked for; what the writer's calls
 * return. The writer is not finished.
 */
FIRN_API enum firn_status firn_intake_paths(struct firn_writer *writer, const char *const *paths, size_t count,
                                            const struct firn_intake_options *options, struct firn_fault *fault,
                                            struct firn_intake_report *report);

/*
 * Takes in what an archive holds: tar, pax, cpio, zip, 7-Zip, ISO 9660, xar, rar, cab, lha, ar and warc, compressed by
 * gzip, bzip2, xz, lzma, lzip, zstd, lz4 or compress, also uuencoded, or inside an RPM package; and a lone file
 * compressed by one of these, which becomes one item. mtree, which names files elsewhere instead of holding them, is
 * not read, and no other program is ever started.
 *
 * Names in tar, cpio, ar and lha archives are taken as the bytes they are. Those in the other formats are in Unicode,
 * and libarchive composes their letters (NFC).
 *
 * Items keep the order of the archive. A name that comes twice is stored twice. Hard links stay links; where an archive
 * stores the bytes with a link they are moved to the first name if that came without (cpio), dropped if they are the
 * same bytes again (cpio), else the link becomes a file of its own (FIRN_INTAKE_UNLINKED).
 *
 * path  `-` is standard input. A zip, 7-Zip, rar, xar, cab or ISO 9660 archive that comes through a pipe is copied to a
 *       temporary file first.
 *
 * Encrypted items, and items compressed in a way unknown here, are findings, and the work goes on. Where the archive
 * breaks off or cannot be read on, the item concerned is withdrawn, FIRN_INTAKE_DAMAGED tells it, and the result is
 * FIRN_BAD_DATA; with keep_beginning it is FIRN_OK. A tar archive that ends without its end mark counts as broken off,
 * unless it is compressed: there the end of the compressed data decides.
 *
 * Else as firn_intake_paths; also FIRN_NO_INPUT when it cannot be opened, FIRN_IO when it cannot be read, FIRN_BAD_DATA
 * when it is no archive.
 */
FIRN_API enum firn_status firn_intake_archive(struct firn_writer *writer, const char *path,
                                              const struct firn_intake_options *options, struct firn_fault *fault,
                                              struct firn_intake_report *report);

#endif
