/* format-spec/reader.c - reads firn containers of format 1 when nothing else is left that can */
/* SPDX-License-Identifier: BSD-2-Clause */
/*
 * You have a file whose first line is FIRN CONTAINER, FORMAT 1. This program lists it, checks it, and gives back what is
 * in it. It is ISO C99, needs the standard library only, and is meant to be read beside the specification, whose pages
 * are named above each part. It is plain rather than fast.
 *
 *     cc -O2 -o reader reader.c
 *
 *     reader FILE               lists what is in the container
 *     reader FILE -c            reads everything, compares every digest, says what is lost
 *     reader FILE -t ARCHIVE    writes a pax archive with everything in it that is whole; tar can unpack it
 *     reader FILE -x FOLDER     writes the files into FOLDER, which must be there, with numbers before their names;
 *                               FOLDER/place.sh then gives them their own names, folders, dates and modes; damaged files
 *                               are written too, with zeros for what is lost, under a name that ends in .damaged
 *     reader FILE -s FOLDER     writes the specification and the source of this program into FOLDER
 *
 * It never writes to FILE. Exit status: 0 all is intact; 1 there is damage, and every byte was brought back; 2 bytes are
 * lost, and it says which; 64 and up: it could not work.
 */
#define _FILE_OFFSET_BITS 64       /* some systems open files of more than 2 GiB only then; others do not mind */
#include <inttypes.h>
#include <limits.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

typedef unsigned char byte;

enum { SAFE = 1, LOSS = 2, USAGE = 64, BAD_DATA = 65, NO_INPUT = 66, CANNOT_CREATE = 73 };

/* Numbers in a container are little-endian. */
static uint64_t get(const byte *from, unsigned bytes)
{
    uint64_t value = 0;

    while (bytes-- > 0)
        value = value << 8 | from[bytes];
    return value;
}

static void put(byte *to, uint64_t value, unsigned bytes)
{
    for (; bytes-- > 0; value >>= 8)
        *to++ = (byte)(value & 0xFF);
}

/* Memory, or the end of the program. */
static void *room(void *old, uint64_t bytes)
{
    void *memory = bytes > (size_t)-1 / 2 ? NULL : realloc(old, bytes > 0 ? (size_t)bytes : 1);

    if (memory == NULL) {
        fprintf(stderr, "reader: not enough memory for %" PRIu64 " bytes\n", bytes);
        exit(BAD_DATA);
    }
    return memory;
}

static uint64_t lesser(uint64_t a, uint64_t b)
{
    return a < b ? a : b;
}

/* ---- hash.md: XXH3-128 ------------------------------------------------------------------------------------------- */

#define P1 UINT64_C(0x9E3779B185EBCA87)
#define P2 UINT64_C(0xC2B2AE3D27D4EB4F)
#define P3 UINT64_C(0x165667B19E3779F9)
#define P4 UINT64_C(0x85EBCA77C2B2AE63)
#define P5 UINT64_C(0x27D4EB2F165667C5)
#define M1 UINT64_C(0x165667919E3779F9)
#define M2 UINT64_C(0x9FB21C651E98DF25)
#define Q1 UINT64_C(0x9E3779B1)
#define Q2 UINT64_C(0x85EBCA77)
#define Q3 UINT64_C(0xC2B2AE3D)
#define LOW32 UINT64_C(0xFFFFFFFF)

static const byte S[192] = {
    0xB8, 0xFE, 0x6C, 0x39, 0x23, 0xA4, 0x4B, 0xBE, 0x7C, 0x01, 0x81, 0x2C, 0xF7, 0x21, 0xAD, 0x1C, 0xDE, 0xD4, 0x6D,
    0xE9, 0x83, 0x90, 0x97, 0xDB, 0x72, 0x40, 0xA4, 0xA4, 0xB7, 0xB3, 0x67, 0x1F, 0xCB, 0x79, 0xE6, 0x4E, 0xCC, 0xC0,
    0xE5, 0x78, 0x82, 0x5A, 0xD0, 0x7D, 0xCC, 0xFF, 0x72, 0x21, 0xB8, 0x08, 0x46, 0x74, 0xF7, 0x43, 0x24, 0x8E, 0xE0,
    0x35, 0x90, 0xE6, 0x81, 0x3A, 0x26, 0x4C, 0x3C, 0x28, 0x52, 0xBB, 0x91, 0xC3, 0x00, 0xCB, 0x88, 0xD0, 0x65, 0x8B,
    0x1B, 0x53, 0x2E, 0xA3, 0x71, 0x64, 0x48, 0x97, 0xA2, 0x0D, 0xF9, 0x4E, 0x38, 0x19, 0xEF, 0x46, 0xA9, 0xDE, 0xAC,
    0xD8, 0xA8, 0xFA, 0x76, 0x3F, 0xE3, 0x9C, 0x34, 0x3F, 0xF9, 0xDC, 0xBB, 0xC7, 0xC7, 0x0B, 0x4F, 0x1D, 0x8A, 0x51,
    0xE0, 0x4B, 0xCD, 0xB4, 0x59, 0x31, 0xC8, 0x9F, 0x7E, 0xC9, 0xD9, 0x78, 0x73, 0x64, 0xEA, 0xC5, 0xAC, 0x83, 0x34,
    0xD3, 0xEB, 0xC3, 0xC5, 0x81, 0xA0, 0xFF, 0xFA, 0x13, 0x63, 0xEB, 0x17, 0x0D, 0xDD, 0x51, 0xB7, 0xF0, 0xDA, 0x49,
    0xD3, 0x16, 0x55, 0x26, 0x29, 0xD4, 0x68, 0x9E, 0x2B, 0x16, 0xBE, 0x58, 0x7D, 0x47, 0xA1, 0xFC, 0x8F, 0xF8, 0xB8,
    0xD1, 0x7A, 0xD0, 0x31, 0xCE, 0x45, 0xCB, 0x3A, 0x8F, 0x95, 0x16, 0x04, 0x28, 0xAF, 0xD7, 0xFB, 0xCA, 0xBB, 0x4B,
    0x40, 0x7E
};

struct pair { uint64_t low, high; };

static struct pair multiply(uint64_t a, uint64_t b)        /* the product of 128 bits */
{
    uint64_t ll = (a & LOW32) * (b & LOW32), lh = (a & LOW32) * (b >> 32);
    uint64_t hl = (a >> 32) * (b & LOW32), hh = (a >> 32) * (b >> 32);
    uint64_t middle = (ll >> 32) + (lh & LOW32) + hl;
    struct pair product = { middle << 32 | (ll & LOW32), hh + (lh >> 32) + (middle >> 32) };

    return product;
}

static uint64_t fold(uint64_t a, uint64_t b)
{
    struct pair product = multiply(a, b);

    return product.low ^ product.high;
}

static uint64_t mix(uint64_t h)
{
    h = (h ^ h >> 37) * M1;
    return h ^ h >> 32;
}

static uint64_t mix64(uint64_t h)
{
    h = (h ^ h >> 33) * P2;
    h = (h ^ h >> 29) * P3;
    return h ^ h >> 32;
}

static uint64_t swap(uint64_t value, unsigned bytes)        /* the bytes in the opposite order */
{
    uint64_t swapped = 0;

    for (; bytes > 0; bytes--, value >>= 8)
        swapped = swapped << 8 | (value & 0xFF);
    return swapped;
}

static uint64_t s64(unsigned at)
{
    return get(S + at, 8);
}

static uint64_t pair_of(const byte *x, unsigned s)
{
    return fold(get(x, 8) ^ s64(s), get(x + 8, 8) ^ s64(s + 8));
}

static struct pair hash_short(const byte *x, size_t n)      /* sections 3 to 6: up to 16 bytes */
{
    struct pair h, product;
    uint64_t a, b;

    if (n == 0) {
        h.low = mix64(s64(64) ^ s64(72));
        h.high = mix64(s64(80) ^ s64(88));
    } else if (n <= 3) {
        a = (uint64_t)x[n / 2] << 24 | (uint64_t)x[0] << 16 | (uint64_t)n << 8 | x[n - 1];
        b = swap(a, 4);
        b = (b << 13 | b >> 19) & LOW32;
        h.low = mix64(a ^ get(S, 4) ^ get(S + 4, 4));
        h.high = mix64(b ^ get(S + 8, 4) ^ get(S + 12, 4));
    } else if (n <= 8) {
        a = (get(x, 4) | get(x + n - 4, 4) << 32) ^ s64(16) ^ s64(24);
        product = multiply(a, P1 + 4 * n);
        product.high += 2 * product.low;
        product.low ^= product.high >> 3;
        product.low = (product.low ^ product.low >> 35) * M2;
        h.low = product.low ^ product.low >> 28;
        h.high = mix(product.high);
    } else {
        a = get(x, 8);
        b = get(x + n - 8, 8);
        product = multiply(a ^ b ^ s64(32) ^ s64(40), P1);
        product.low += (uint64_t)(n - 1) << 54;
        b ^= s64(48) ^ s64(56);
        product.high += b + (b & LOW32) * (Q2 - 1);
        product.low ^= swap(product.high, 8);
        h = multiply(product.low, P2);
        h.low = mix(h.low);
        h.high = mix(h.high + product.high * P2);
    }
    return h;
}

static void take_two(uint64_t *a, uint64_t *b, const byte *x, size_t i, size_t j, unsigned s)
{
    *a = (*a + pair_of(x + i, s)) ^ (get(x + j, 8) + get(x + j + 8, 8));
    *b = (*b + pair_of(x + j, s + 16)) ^ (get(x + i, 8) + get(x + i + 8, 8));
}

static struct pair hash_middle(const byte *x, size_t n)     /* section 7: 17 to 240 bytes */
{
    uint64_t a = n * P1, b = 0;
    struct pair h;
    unsigned i;

    if (n <= 128) {
        for (i = (unsigned)(n - 1) / 32 + 1; i-- > 0;)
            take_two(&a, &b, x, 16 * i, n - 16 * i - 16, 32 * i);
    } else {
        for (i = 0; i < 4; i++)
            take_two(&a, &b, x, 32 * i, 32 * i + 16, 32 * i);
        a = mix(a);
        b = mix(b);
        for (; i < n / 32; i++)
            take_two(&a, &b, x, 32 * i, 32 * i + 16, 32 * i - 125);
        take_two(&a, &b, x, n - 16, n - 32, 103);
    }
    h.low = mix(a + b);
    h.high = 0 - mix(a * P1 + b * P4 + n * P2);
    return h;
}

static void stripe(uint64_t A[8], const byte *x, unsigned s)
{
    unsigned e;

    for (e = 0; e < 8; e++) {
        uint64_t v = get(x + 8 * e, 8), key = v ^ s64(s + 8 * e);

        A[e ^ 1] += v;
        A[e] += (key & LOW32) * (key >> 32);
    }
}

static uint64_t merge(const uint64_t A[8], unsigned s, uint64_t t)
{
    unsigned e;

    for (e = 0; e < 4; e++)
        t += fold(A[2 * e] ^ s64(s + 16 * e), A[2 * e + 1] ^ s64(s + 16 * e + 8));
    return mix(t);
}

static struct pair hash_of(const byte *x, size_t n)
{
    uint64_t A[8] = { Q3, P1, P2, P3, P4, Q2, P5, Q1 };
    struct pair h;
    unsigned e;
    size_t j;

    if (n <= 240)
        return n <= 16 ? hash_short(x, n) : hash_middle(x, n);
    for (j = 0; j < (n - 1) / 64; j++) {                    /* section 8 */
        stripe(A, x + 64 * j, 8 * (unsigned)(j % 16));
        if (j % 16 == 15)
            for (e = 0; e < 8; e++)
                A[e] = (A[e] ^ A[e] >> 47 ^ s64(128 + 8 * e)) * Q1;
    }
    stripe(A, x + n - 64, 121);
    h.low = merge(A, 11, n * P1);
    h.high = merge(A, 117, ~(n * P2));
    return h;
}

/* Whether the 16 bytes at `stored` are the hash of the n bytes at x. */
static bool hash_is(const byte *stored, const byte *x, size_t n)
{
    struct pair h = hash_of(x, n);

    return get(stored, 8) == h.low && get(stored + 8, 8) == h.high;
}

/* ---- SHA-256: FIPS 180-4 ------------------------------------------------------------------------------------------ */

struct sha { uint32_t h[8]; uint64_t bytes; byte block[64]; };

static const uint32_t sha_k[64] = {
    0x428a2f98, 0x71374491, 0xb5c0fbcf, 0xe9b5dba5, 0x3956c25b, 0x59f111f1, 0x923f82a4, 0xab1c5ed5, 0xd807aa98,
    0x12835b01, 0x243185be, 0x550c7dc3, 0x72be5d74, 0x80deb1fe, 0x9bdc06a7, 0xc19bf174, 0xe49b69c1, 0xefbe4786,
    0x0fc19dc6, 0x240ca1cc, 0x2de92c6f, 0x4a7484aa, 0x5cb0a9dc, 0x76f988da, 0x983e5152, 0xa831c66d, 0xb00327c8,
    0xbf597fc7, 0xc6e00bf3, 0xd5a79147, 0x06ca6351, 0x14292967, 0x27b70a85, 0x2e1b2138, 0x4d2c6dfc, 0x53380d13,
    0x650a7354, 0x766a0abb, 0x81c2c92e, 0x92722c85, 0xa2bfe8a1, 0xa81a664b, 0xc24b8b70, 0xc76c51a3, 0xd192e819,
    0xd6990624, 0xf40e3585, 0x106aa070, 0x19a4c116, 0x1e376c08, 0x2748774c, 0x34b0bcb5, 0x391c0cb3, 0x4ed8aa4a,
    0x5b9cca4f, 0x682e6ff3, 0x748f82ee, 0x78a5636f, 0x84c87814, 0x8cc70208, 0x90befffa, 0xa4506ceb, 0xbef9a3f7,
    0xc67178f2
};

static uint32_t turn(uint32_t x, unsigned by)               /* rotates to the right */
{
    return (uint32_t)(x >> by | x << (32 - by));
}

static void sha_block(struct sha *sha)
{
    uint32_t w[64], v[8], t1, t2;
    unsigned i;

    for (i = 0; i < 16; i++)
        w[i] = (uint32_t)swap(get(sha->block + 4 * i, 4), 4);
    for (; i < 64; i++)
        w[i] = (turn(w[i - 2], 17) ^ turn(w[i - 2], 19) ^ w[i - 2] >> 10) + w[i - 7]
               + (turn(w[i - 15], 7) ^ turn(w[i - 15], 18) ^ w[i - 15] >> 3) + w[i - 16];
    memcpy(v, sha->h, sizeof v);
    for (i = 0; i < 64; i++) {
        t1 = v[7] + (turn(v[4], 6) ^ turn(v[4], 11) ^ turn(v[4], 25)) + ((v[4] & v[5]) ^ (~v[4] & v[6])) + sha_k[i] + w[i];
        t2 = (turn(v[0], 2) ^ turn(v[0], 13) ^ turn(v[0], 22)) + ((v[0] & v[1]) ^ (v[0] & v[2]) ^ (v[1] & v[2]));
        memmove(v + 1, v, 7 * sizeof v[0]);
        v[4] += t1;
        v[0] = t1 + t2;
    }
    for (i = 0; i < 8; i++)
        sha->h[i] += v[i];
}

static void sha_start(struct sha *sha)
{
    static const uint32_t first[8] = { 0x6a09e667, 0xbb67ae85, 0x3c6ef372, 0xa54ff53a,
                                       0x510e527f, 0x9b05688c, 0x1f83d9ab, 0x5be0cd19 };

    memcpy(sha->h, first, sizeof first);
    sha->bytes = 0;
}

static void sha_add(struct sha *sha, const byte *x, uint64_t n)
{
    for (; n > 0; n--) {
        sha->block[sha->bytes++ % 64] = *x++;
        if (sha->bytes % 64 == 0)
            sha_block(sha);
    }
}

static void sha_end(struct sha *sha, byte digest[32])
{
    uint64_t bits = 8 * sha->bytes;
    byte tail[8];
    unsigned i;

    sha_add(sha, (const byte *)"\x80", 1);
    while (sha->bytes % 64 != 56)
        sha_add(sha, (const byte *)"", 1);
    put(tail, swap(bits, 8), 8);
    sha_add(sha, tail, 8);
    for (i = 0; i < 8; i++)
        put(digest + 4 * i, swap(sha->h[i], 4), 4);
}

/* ---- block.md: lanes, hash and tag -------------------------------------------------------------------------------- */

enum { BLOCK = 4096, PAYLOAD = 3968, TAG = 3968, HASH = 4000, HASHED = 4000, DATA_BLOCK = 1, RESERVE_BLOCK = 2 };

/* Flips back what the lanes propose; true when they proposed anything. */
static bool mend_lanes(byte *block)
{
    static unsigned word_of[512];      /* label to word */
    uint64_t words[512], s[9] = { 0 }, p = 0;
    unsigned label, j, b, w = 0, guard = 502;
    bool any = false;

    word_of[0] = 511;
    for (label = 1; label < 512; label++)
        word_of[label] = (label & (label - 1)) == 0 ? guard++ : w++;
    for (label = 0; label < 512; label++) {
        words[label] = get(block + 8 * word_of[label], 8);
        p ^= words[label];
        for (j = 0; j < 9; j++)
            s[j] ^= (label >> j & 1) != 0 ? words[label] : 0;
    }
    for (b = 0; b < 64; b++)
        if ((p >> b & 1) != 0) {
            for (label = 0, j = 0; j < 9; j++)
                label |= (unsigned)(s[j] >> b & 1) << j;
            block[8 * word_of[label] + b / 8] ^= (byte)(1U << b % 8);
            any = true;
        }
    return any;
}

struct shape { unsigned k, m, depth; };

struct tag { struct shape full; unsigned kind, t; uint64_t id, number; };

/* sheet.md, section 2: the shape of a sheet with t data blocks. */
static struct shape shape_of(struct shape full, uint64_t t)
{
    struct shape shape = full;
    uint64_t wanted;

    if (t == (uint64_t)full.k * full.depth || t == 0)
        return shape;
    if (full.m == 0) {
        shape.depth = (unsigned)((t + full.k - 1) / full.k);
    } else {
        wanted = (t * full.m + full.k - 1) / full.k;
        if (wanted < 4)
            wanted = 4;
        for (; shape.m > 4; shape.m /= 2)
            if (shape.m * ((wanted + shape.m - 1) / shape.m) <= wanted + wanted / 4)
                break;
        shape.depth = (unsigned)((wanted + shape.m - 1) / shape.m);
    }
    shape.k = (unsigned)((t + shape.depth - 1) / shape.depth);
    return shape;
}

/* Reads the tag of a block whose hash is right; false when it breaks a rule of format 1. */
static bool read_tag(const byte *block, struct tag *tag)
{
    const byte *at = block + TAG;
    uint64_t sheet_blocks, index;
    struct shape shape;

    tag->kind = at[5];
    tag->full.k = at[6];
    tag->full.m = at[7];
    tag->id = get(at + 8, 8);
    tag->number = get(at + 16, 8);
    tag->t = (unsigned)get(at + 24, 4);
    tag->full.depth = (unsigned)get(at + 28, 2);
    if (memcmp(at, "FIRN\1", 5) != 0 || tag->full.k < 1 || tag->full.depth < 1 || tag->full.depth > 4096)
        return false;
    if (tag->full.m != 0 && (tag->full.m < 4 || tag->full.m > 128 || (tag->full.m & (tag->full.m - 1)) != 0))
        return false;
    sheet_blocks = (uint64_t)tag->full.depth * (tag->full.k + tag->full.m);
    if (tag->full.k + tag->full.m > 256 || sheet_blocks > 65536 || tag->t < 1 || tag->t > tag->full.k * tag->full.depth)
        return false;
    shape = shape_of(tag->full, tag->t);
    index = tag->number % sheet_blocks;
    return tag->kind == (index < tag->t ? DATA_BLOCK : RESERVE_BLOCK) && index < tag->t + (uint64_t)shape.m * shape.depth;
}

/* ---- the file, and what is known of it ---------------------------------------------------------------------------- */

struct ref { uint64_t key, at; uint32_t bytes, raw; };     /* a body in the stream, and what it is found by */

struct list { struct ref *refs; size_t count, room; };

struct container {
    FILE *file;
    uint64_t file_at, blocks;          /* where the file stands; blocks that fit into it, whole or not */
    struct tag known;                  /* of the first sound block */
    uint64_t sheet_blocks, sheet_data; /* of a full sheet */
    uint64_t stream_bytes;
    uint64_t sheet;                    /* the one at hand */
    unsigned t;
    struct shape shape;
    byte **rebuilt;                    /* of the sheet at hand, by index: a payload, or `gone` */
    uint64_t payload_of;               /* the data block whose payload is at hand */
    byte payload[PAYLOAD];
    bool payload_there;
    struct list batches, segments, sums, texts;    /* by first item; by content place; by first item; by type */
    uint64_t items_told;               /* by the colophon */
    bool colophon_there;
    const struct ref *segment;         /* the one at hand, decoded */
    byte *raw, *body;
    bool segment_good;
    const struct ref *sum;             /* the SUMS body at hand */
    byte *sum_body;
    uint64_t mended, blocks_rebuilt, blocks_lost, catalogue_lost;
};

static byte gone[1];                   /* stands for a payload that cannot be rebuilt */

/* Standard C tells places in a long, which may be too short; steps from where the file stands always do. */
static bool go_to(struct container *c, uint64_t at)
{
    const long step = 0x40000000;

    if (at < c->file_at) {
        if (c->file_at - at <= (uint64_t)step) {
            if (fseek(c->file, -(long)(c->file_at - at), SEEK_CUR) != 0)
                return false;
            c->file_at = at;
        } else {
            rewind(c->file);
            c->file_at = 0;
        }
    }
    while (c->file_at < at) {
        long go = (long)lesser(at - c->file_at, (uint64_t)step);

        if (fseek(c->file, go, SEEK_CUR) != 0)
            return false;
        c->file_at += (uint64_t)go;
    }
    return true;
}

/* block.md, section 4. True when the block with this number was read sound or mended, and belongs here. */
static bool read_block(struct container *c, uint64_t number, byte *block, struct tag *tag)
{
    size_t got;
    bool mended = false;

    if (number >= c->blocks || !go_to(c, BLOCK * (number + 1)))
        return false;
    clearerr(c->file);
    got = fread(block, 1, BLOCK, c->file);
    c->file_at += got;
    if (got < BLOCK && ferror(c->file)) {               /* the medium failed: nobody knows where the file stands now */
        rewind(c->file);
        c->file_at = 0;
    }
    if (got < BLOCK)
        return false;
    if (!hash_is(block + HASH, block, HASHED)) {
        mended = mend_lanes(block);
        if (!mended || !hash_is(block + HASH, block, HASHED))
            return false;
    }
    if (!read_tag(block, tag) || tag->number != number)
        return false;
    if (c->known.full.k != 0 && (tag->id != c->known.id || tag->full.k != c->known.full.k ||
                                 tag->full.m != c->known.full.m || tag->full.depth != c->known.full.depth))
        return false;
    c->mended += mended;
    return true;
}

/* ---- sheet.md: rows and the code ---------------------------------------------------------------------------------- */

static unsigned gf_times(unsigned a, unsigned b)
{
    unsigned product = 0;

    for (; b != 0; b >>= 1) {
        product ^= (b & 1) != 0 ? a : 0;
        a = (a & 0x80) != 0 ? (a << 1) ^ 0x11D : a << 1;
    }
    return product;
}

static unsigned gf_inverse(unsigned a)                     /* a^254 */
{
    unsigned i, power = 1;

    for (i = 0; i < 254; i++)
        power = gf_times(power, a);
    return power;
}

/*
 * Lagrange's formula: payload `at` of a row from the others. there[p] is the payload at point p, NULL where the value is
 * zero or lost; lost[] are the `count` points in E.
 */
static void row_value(byte *const there[256], const byte *lost, unsigned count, unsigned at, byte *payload, size_t bytes)
{
    unsigned s, i, below = 1;
    size_t b;

    memset(payload, 0, bytes);
    for (i = 0; i < count; i++)
        below = lost[i] == at ? below : gf_times(below, at ^ lost[i]);
    for (s = 0; s < 256; s++)
        if (there[s] != NULL) {
            unsigned factor = 1, v;
            byte times[256];

            for (i = 0; i < count; i++)
                factor = gf_times(factor, s ^ lost[i]);
            factor = gf_times(factor, gf_inverse(gf_times(below, at ^ s)));
            for (v = 0; v < 256; v++)
                times[v] = (byte)gf_times(factor, v);
            for (b = 0; b < bytes; b++)
                payload[b] ^= times[there[s][b]];
        }
}

static void leave_sheet(struct container *c)
{
    uint64_t i;

    for (i = 0; i < c->sheet_data; i++)
        if (c->rebuilt[i] != NULL) {
            if (c->rebuilt[i] != gone)
                free(c->rebuilt[i]);
            c->rebuilt[i] = NULL;
        }
}

/* Makes a sheet the one at hand: any of its blocks tells t. False when it has no sound block. */
static bool enter_sheet(struct container *c, uint64_t sheet)
{
    byte block[BLOCK];
    struct tag tag;
    uint64_t i, mended = c->mended;

    if (sheet == c->sheet)
        return c->t > 0;
    leave_sheet(c);
    c->sheet = sheet;
    c->t = 0;
    for (i = 0; i < c->sheet_blocks && c->t == 0; i++)
        if (read_block(c, sheet * c->sheet_blocks + i, block, &tag))
            c->t = tag.t;
    c->mended = mended;                                    /* it will be read again */
    if (c->t > 0)
        c->shape = shape_of(c->known.full, c->t);
    return c->t > 0;
}

/* The index in the sheet of point `point` of a row; false when the row has no such block. */
static bool index_of(const struct container *c, uint64_t row, unsigned point, uint64_t *index)
{
    uint64_t depth = c->shape.depth;

    if (point >= c->shape.m) {                             /* data column point - m */
        *index = (point - c->shape.m) * depth + row;
        return point - c->shape.m < c->shape.k && *index < c->t;
    }
    *index = c->t + (row + depth - c->t % depth) % depth + point * depth;
    return true;
}

/* Rebuilds what is lost of a row of the sheet at hand, as far as it can. */
static void rebuild_row(struct container *c, uint64_t row)
{
    byte *there[256] = { NULL }, lost[256], *blocks = room(NULL, 256 * (uint64_t)BLOCK);
    unsigned point, count = 0, i;
    uint64_t index, mended = c->mended;
    struct tag tag;

    for (point = 0; point < 256; point++)
        if (index_of(c, row, point, &index)) {
            byte *block = blocks + (size_t)point * BLOCK;

            if (read_block(c, c->sheet * c->sheet_blocks + index, block, &tag) && tag.t == c->t)
                there[point] = block;
            else
                lost[count++] = (byte)point;
        }
    c->mended = mended;
    for (i = 0; i < count; i++)
        if (lost[i] >= c->shape.m && index_of(c, row, lost[i], &index)) {
            if (count <= c->shape.m) {
                c->rebuilt[index] = room(NULL, PAYLOAD);
                row_value(there, lost, count, lost[i], c->rebuilt[index], PAYLOAD);
            } else {
                c->rebuilt[index] = gone;
            }
        }
    free(blocks);
}

/* ---- stream.md: the stream ---------------------------------------------------------------------------------------- */

/* Makes the payload of a data block the one at hand; data blocks count from 0 over the container. */
static bool fetch(struct container *c, uint64_t data_block)
{
    uint64_t index = data_block % c->sheet_data;
    byte block[BLOCK];
    struct tag tag;

    if (data_block == c->payload_of)
        return c->payload_there;
    c->payload_of = data_block;
    c->payload_there = false;
    memset(c->payload, 0, PAYLOAD);
    if (!enter_sheet(c, data_block / c->sheet_data) || index >= c->t) {
        c->blocks_lost++;
        return false;
    }
    if (c->rebuilt[index] == NULL) {
        if (read_block(c, c->sheet * c->sheet_blocks + index, block, &tag) && tag.t == c->t) {
            memcpy(c->payload, block, PAYLOAD);
            return c->payload_there = true;
        }
        rebuild_row(c, index % c->shape.depth);
    }
    c->payload_there = c->rebuilt[index] != gone && c->rebuilt[index] != NULL;
    if (c->payload_there)
        memcpy(c->payload, c->rebuilt[index], PAYLOAD);
    c->blocks_rebuilt += c->payload_there;
    c->blocks_lost += !c->payload_there;
    return c->payload_there;
}

/* Copies bytes of the stream; what is lost comes as zeros. True when nothing is lost. */
static bool read_stream(struct container *c, uint64_t at, byte *to, uint64_t bytes)
{
    bool whole = at <= c->stream_bytes && bytes <= c->stream_bytes - at;

    memset(to, 0, (size_t)bytes);
    while (bytes > 0 && at < c->stream_bytes) {
        uint64_t from = at % PAYLOAD, step = lesser(bytes, PAYLOAD - from);

        if (fetch(c, at / PAYLOAD))
            memcpy(to, c->payload + from, (size_t)step);
        else
            whole = false;
        at += step;
        to += step;
        bytes -= step;
    }
    return whole;
}

/* ---- segment.md: numbers, bits, codes ----------------------------------------------------------------------------- */

struct bits { const byte *from; size_t bytes, used; bool bad; };       /* used: bits */

/* The next n bits, at most 25, without using them up; zeros behind the end. */
static uint32_t peek(const struct bits *b, unsigned n)
{
    uint32_t word = 0;
    size_t at = b->used / 8, i;

    for (i = at; i < at + 4; i++)
        word = word << 8 | (i < b->bytes ? b->from[i] : 0);
    return n == 0 ? 0 : (uint32_t)(word << b->used % 8) >> (32 - n);
}

static uint32_t take(struct bits *b, unsigned n)
{
    uint32_t value = n > 16 ? take(b, n - 16) : 0, low = n > 16 ? 16 : n;

    value = value << low | peek(b, low);
    b->used += low;
    if (b->used > 8 * b->bytes)
        b->bad = true;
    return value;
}

static unsigned gamma_word(struct bits *b)
{
    unsigned zeros = 0;

    while (zeros < 10 && peek(b, 1) == 0) {
        take(b, 1);
        zeros++;
    }
    if (zeros == 10)
        b->bad = true;
    return take(b, zeros + 1);
}

/* True when all was used up but less than eight zero bits. */
static bool used_up(struct bits *b)
{
    return !b->bad && 8 * b->bytes - b->used < 8 && peek(b, 8) == 0;
}

/* Bytes of a segment, from the front. */
struct bytes { const byte *from; size_t left; bool bad; };

static unsigned one_byte(struct bytes *in)
{
    if (in->left == 0) {
        in->bad = true;
        return 0;
    }
    in->left--;
    return *in->from++;
}

static unsigned number(struct bytes *in)
{
    unsigned value = 0, group, i;

    for (i = 0; i < 3; i++) {
        group = one_byte(in);
        value |= (group & 0x7F) << 7 * i;
        if (group < 0x80) {
            if (i > 0 && group == 0)
                in->bad = true;
            return value;
        }
    }
    in->bad = true;
    return value;
}

/* Cuts a bit string of `bytes` bytes off the front. */
static struct bits stream_of(struct bytes *in, size_t bytes)
{
    struct bits b = { NULL, 0, 0, false };

    if (bytes > in->left) {
        in->bad = true;
        bytes = in->left;
    }
    b.from = in->from;
    b.bytes = bytes;
    in->from += bytes;
    in->left -= bytes;
    return b;
}

/* A bit string whose length nobody told: begin, read from the bits, and go on behind them. */
static struct bits begin_bits(const struct bytes *in)
{
    struct bits b = { NULL, 0, 0, false };

    b.from = in->from;
    b.bytes = in->left;
    return b;
}

static void end_bits(struct bytes *in, struct bits *b)
{
    size_t bytes = (b->used + 7) / 8;

    if (b->bad || peek(b, (unsigned)(8 * bytes - b->used)) != 0) {
        in->bad = true;
        return;
    }
    in->from += bytes;
    in->left -= bytes;
}

enum { WORD_BITS = 11, WORDS = 1 << WORD_BITS, CODES = 16, CONTEXTS = 512 };

/* A code: the next 11 bits tell the symbol and how many of them are its word; a length of 0 is no word. */
struct code { unsigned short symbol[WORDS]; byte length[WORDS]; };

/* Gives out the words by the canonical rule. How much of the code is used: WORDS when full, more when over-full. */
static unsigned assign(struct code *code, const byte *lengths, unsigned symbols)
{
    unsigned length, symbol, at = 0, i;

    memset(code->length, 0, sizeof code->length);
    for (length = 1; length <= WORD_BITS; length++)
        for (symbol = 0; symbol < symbols; symbol++)
            if (lengths[symbol] == length) {
                if (at + (WORDS >> length) > WORDS)
                    return WORDS + 1;
                for (i = 0; i < (unsigned)WORDS >> length; i++, at++) {
                    code->symbol[at] = (unsigned short)symbol;
                    code->length[at] = (byte)length;
                }
            }
    return at;
}

static unsigned decode(struct bits *b, const struct code *code)
{
    unsigned next = peek(b, WORD_BITS);

    if (code->length[next] == 0) {
        b->bad = true;
        return 0;
    }
    b->used += code->length[next];
    if (b->used > 8 * b->bytes)
        b->bad = true;
    return code->symbol[next];
}

/* The code of tokens: lengths of three bits each; full, or one word of one bit. */
static void read_token_code(struct bits *b, struct code *code, unsigned tokens)
{
    byte lengths[CODES + 1];
    unsigned i, used = 0, full;

    for (i = 0; i < tokens; i++) {
        lengths[i] = (byte)take(b, 3);
        used += lengths[i] > 0;
    }
    full = assign(code, lengths, tokens);
    if (full != WORDS && !(used == 1 && full == WORDS / 2))
        b->bad = true;
}

static void read_table(struct bits *b, struct code *code, unsigned symbols)
{
    static struct code tokens;
    byte lengths[512] = { 0 };
    unsigned symbol = 0, before = 0, full = 0, token, times;

    read_token_code(b, &tokens, 14);
    while (!b->bad && full < WORDS) {
        token = decode(b, &tokens);
        times = token < 12 ? 1 : gamma_word(b) + 1;
        if (token == 13 && before == 0)
            b->bad = true;
        if (token < 13)
            before = token < 12 ? token : 0;
        if (b->bad || times > symbols - symbol) {
            b->bad = true;
            return;
        }
        for (; times > 0; times--) {
            lengths[symbol++] = (byte)before;
            full += before > 0 ? (unsigned)WORDS >> before : 0;
        }
    }
    if (full != WORDS || assign(code, lengths, symbols) != WORDS)
        b->bad = true;
}

struct codes { byte of[CONTEXTS]; unsigned count; struct code code[CODES]; };

static void read_codes(struct bits *b, struct codes *codes, unsigned contexts, unsigned symbols, unsigned most)
{
    static struct code tokens;
    unsigned context = 0, token, times, i;

    memset(codes->of, 0, sizeof codes->of);
    codes->count = take(b, 4) + 1;
    if (codes->count > most)
        b->bad = true;
    if (codes->count > 1 && !b->bad) {
        read_token_code(b, &tokens, codes->count + 1);
        while (context < contexts && !b->bad) {
            token = decode(b, &tokens);
            times = token == codes->count ? gamma_word(b) : 1;
            if ((token == codes->count && context == 0) || times > contexts - context)
                b->bad = true;
            for (; times > 0 && !b->bad; times--, context++)
                codes->of[context] = token < codes->count ? (byte)token : codes->of[context - 1];
        }
    }
    for (i = 0; i < codes->count && !b->bad; i++)
        read_table(b, &codes->code[i], symbols);
}

static unsigned decode_in(struct bits *b, const struct codes *codes, unsigned context)
{
    return decode(b, &codes->code[codes->of[context]]);
}

/* ---- segment.md: stretches ---------------------------------------------------------------------------------------- */

static bool prefix_stretch(struct bytes *in, unsigned streams, bool last, byte *raw, size_t n)
{
    static struct code code;
    struct bits table = begin_bits(in), stream;
    size_t sizes[6] = { 0 }, i, j, share = n / streams;
    long difference;

    read_table(&table, &code, 256);
    end_bits(in, &table);
    for (i = 0; i < (last ? streams - 1 : streams) && !in->bad; i++) {
        sizes[i] = number(in);
        if (i > 0) {
            difference = (long)(sizes[i] / 2);
            if (sizes[i] % 2 != 0)
                difference = -difference - 1;
            if (difference < 0 && (size_t)-difference > sizes[i - 1])
                return false;
            sizes[i] = sizes[i - 1] + (size_t)difference;
        }
    }
    for (i = 0; i < streams && !in->bad; i++) {
        stream = stream_of(in, last && i == streams - 1 ? in->left : sizes[i]);
        if (i == streams - 1)
            share = n;
        for (j = 0; j < share && !stream.bad; j++)
            *raw++ = (byte)decode(&stream, &code);
        n -= share;
        if (!used_up(&stream))
            return false;
    }
    return !in->bad;
}

static bool stretches(struct bytes *in, byte *raw, size_t n)
{
    bool last = false;

    while (!last) {
        unsigned kind = one_byte(in), method = kind & 3;
        size_t length = n, i;

        last = (kind & 8) != 0;
        if (!last)
            length = number(in);
        if (in->bad || kind > 15 || method == 3 || ((kind & 4) != 0 && (method != 2 || length < 6)))
            return false;
        if (!last && (length < 256 || length >= n))
            return false;
        if (method == 2 && !prefix_stretch(in, (kind & 4) != 0 ? 6 : 1, last, raw, length))
            return false;
        if (method == 1)
            memset(raw, (int)one_byte(in), length);
        for (i = 0; method == 0 && i < length; i++)
            raw[i] = (byte)one_byte(in);
        raw += length;
        n -= length;
    }
    return !in->bad && in->left == 0;
}

/* ---- segment.md: matched ------------------------------------------------------------------------------------------ */

static const struct { unsigned base, extra; } runs[16] = {
    { 0, 0 }, { 1, 0 }, { 2, 0 }, { 3, 0 }, { 4, 0 }, { 5, 0 }, { 6, 1 }, { 8, 1 }, { 10, 2 }, { 14, 3 }, { 22, 4 },
    { 38, 5 }, { 70, 6 }, { 134, 9 }, { 646, 13 }, { 8838, 20 }
}, copies[32] = {
    { 2, 0 }, { 3, 0 }, { 4, 0 }, { 5, 0 }, { 6, 0 }, { 7, 0 }, { 8, 0 }, { 9, 0 }, { 10, 0 }, { 11, 0 }, { 12, 0 },
    { 13, 0 }, { 14, 0 }, { 15, 0 }, { 16, 0 }, { 17, 0 }, { 18, 1 }, { 20, 1 }, { 22, 2 }, { 26, 2 }, { 30, 3 },
    { 38, 3 }, { 46, 4 }, { 62, 4 }, { 78, 5 }, { 110, 5 }, { 142, 6 }, { 206, 7 }, { 334, 8 }, { 590, 10 },
    { 1614, 13 }, { 9806, 20 }
};

/* A distance; it becomes the first of the recent ones. */
static uint32_t distance_of(struct bits *b, const struct codes *codes, unsigned context, unsigned fine, uint32_t recent[4])
{
    unsigned symbol = decode_in(b, codes, context), place = 3, q, low;
    uint32_t distance;

    if (symbol < 4) {
        place = symbol;
        distance = recent[symbol];
    } else {
        low = (symbol - 4) & ((1U << fine) - 1);
        q = (symbol - 4) >> fine;
        distance = (((2 + q % 2) << q / 2) + take(b, q / 2) - 2) * (1U << fine) + low + 1;
    }
    memmove(recent + 1, recent, place * sizeof recent[0]);
    return recent[0] = distance;
}

static bool matched(struct bytes *in, byte *raw, size_t n)
{
    static struct codes commands, distances, literals;
    struct bits tables = begin_bits(in), b[3];
    uint32_t recent[4] = { 1, 2, 4, 8 };
    size_t made = 0, count, sizes[2], i;
    unsigned fine = take(&tables, 2), command, before = 0;

    read_codes(&tables, &commands, 4, 512, 4);
    read_codes(&tables, &distances, 8, 4 + 2 * (20 - fine) * (1U << fine), 8);
    read_codes(&tables, &literals, 512, 256, 16);
    end_bits(in, &tables);
    for (i = 0; i < 2; i++)
        sizes[i] = number(in);
    for (i = 0; i < 3; i++)
        b[i] = stream_of(in, i < 2 ? sizes[i] : in->left);
    if (in->bad)
        return false;
    while (made < n) {
        command = decode_in(&b[0], &commands, before < 4 ? 0 : before < 7 ? 1 : before < 16 ? 2 : 3);
        count = runs[command / 32].base + take(&b[0], runs[command / 32].extra);
        if (b[0].bad || count > n - made)
            return false;
        for (i = 0; i < count; i++, made++)
            raw[made] = (byte)decode_in(&b[2], &literals, i > 0 ? raw[made - 1]
                                        : recent[0] <= made ? 256U + raw[made - recent[0]] : 256);
        if (made == n)
            break;
        before = (unsigned)(copies[command % 32].base + take(&b[0], copies[command % 32].extra));
        if (b[0].bad || before > n - made)
            return false;
        if (distance_of(&b[1], &distances, (unsigned)lesser(before - 2, 3) + (count == 0 ? 4 : 0), fine, recent) > made)
            return false;
        for (i = 0; i < before; i++, made++)
            raw[made] = raw[made - recent[0]];
    }
    return used_up(&b[0]) && used_up(&b[1]) && used_up(&b[2]);
}

/* ---- segment.md: branches ----------------------------------------------------------------------------------------- */

static bool is_field(const byte *raw, size_t a, size_t from)
{
    if (raw[a - 1] == 0xE8 || raw[a - 1] == 0xE9)
        return true;
    if (a - from >= 2 && raw[a - 2] == 0x0F && (raw[a - 1] & 0xF0) == 0x80)
        return true;
    return a - from >= 3 && (raw[a - 1] & 0xC7) == 0x05 && (raw[a - 2] == 0x8B || raw[a - 2] == 0x8D) &&
           (raw[a - 3] & 0xF8) == 0x48;
}

static void turn_branches_back(byte *raw, size_t n)
{
    size_t a = 1, from = 0;
    uint32_t value;

    while (a + 4 <= n) {
        if (!is_field(raw, a, from)) {
            a++;
            continue;
        }
        if (raw[a + 3] == 0x00 || raw[a + 3] == 0xFF) {
            value = (uint32_t)(get(raw + a, 4) - a) & 0x1FFFFFF;
            put(raw + a, (value & 0x1000000) != 0 ? value | 0xFE000000 : value, 4);
        }
        from = a + 4;
        a += 5;
    }
}

/* ---- segment.md: samples ------------------------------------------------------------------------------------------ */

struct grid {
    unsigned width, predictor, channels, row;
    bool big_endian, floats, leaning;
    size_t head, pixels;
    uint32_t *x;                       /* residuals, then numbers: modulo 2^32 */
};

/* A number as it counts in predictions: with its sign when it is wider than a byte. */
static int64_t sign(const struct grid *g, uint32_t value)
{
    uint32_t top = (uint32_t)1 << (8 * g->width - 1);

    return g->width == 1 ? (int64_t)value : (int64_t)(value & (top - 1)) - (int64_t)(value & top);
}

static int64_t wrap(int64_t value)                         /* round at 32 bits, with sign */
{
    uint32_t low = (uint32_t)((uint64_t)value & LOW32);

    return (int64_t)(low & 0x7FFFFFFF) - (int64_t)(low & 0x80000000);
}

static int64_t floor_of(int64_t value, int64_t by)
{
    return value >= 0 ? value / by : -((by - 1 - value) / by);
}

static int64_t prediction(const struct grid *g, size_t i)
{
    size_t c = g->channels;
    int64_t W, N, NW, plane, low, high;

    if (i < c || g->predictor == 8)
        return 0;
    W = sign(g, g->x[i - c]);
    if (g->predictor == 6 && i >= 2 * c)
        return wrap(2 * W - sign(g, g->x[i - 2 * c]));
    if (g->predictor == 7 && i >= 3 * c)
        return wrap(3 * W - 3 * sign(g, g->x[i - 2 * c]) + sign(g, g->x[i - 3 * c]));
    if (g->predictor == 0 || g->predictor > 5 || i < g->row + c)
        return W;
    N = sign(g, g->x[i - g->row]);
    NW = sign(g, g->x[i - g->row - c]);
    plane = wrap(W + N - NW);
    low = W < N ? W : N;
    high = W < N ? N : W;
    switch (g->predictor) {
    case 1:  return N;
    case 2:  return plane;
    case 3:  return plane < low ? low : plane > high ? high : plane;
    case 4:  return floor_of(W + N, 2);
    default: return floor_of(3 * W + 3 * N - 2 * NW, 4);
    }
}

static unsigned level(unsigned k)
{
    static const byte steps[15] = { 1, 2, 3, 4, 6, 8, 11, 15, 20, 27, 36, 50, 70, 100, 150 };
    unsigned i;

    for (i = 0; i < 15 && steps[i] <= k; i++)
        ;
    return i;
}

/* The size of a residual in a part of bytes, whose lines are `line` pixels long; 0 outside. */
static unsigned size_at(const uint32_t *r, unsigned c, size_t pixels, size_t line, long y, long x, unsigned channel)
{
    size_t at;

    if (y < 0 || x < 0 || (size_t)x >= line)
        return 0;
    at = (size_t)y * line + (size_t)x;
    if (at >= pixels)
        return 0;
    at = r[at * c + channel];
    at = at < 256 - at ? at : 256 - at;
    return at < 60 ? (unsigned)at : 60;
}

/* One part of numbers of a byte: line after line, within a line channel after channel. */
static void part_of_bytes(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels)
{
    size_t line = g->row > 0 ? g->row / g->channels : 512;
    unsigned ch, c = g->channels, n, m;
    long x, y;

    for (y = 0; (size_t)y * line < pixels; y++)
        for (ch = 0; ch < c; ch++)
            for (x = 0; (size_t)x < line && (size_t)y * line + (size_t)x < pixels && !b->bad; x++) {
                long above = ch == 0 ? y - 2 : y;
                unsigned other = ch == 0 ? 0 : ch - 1;

                n = 2 * size_at(r, c, pixels, line, y - 1, x, ch) + size_at(r, c, pixels, line, y - 1, x - 1, ch)
                    + size_at(r, c, pixels, line, y - 1, x + 1, ch);
                m = 2 * size_at(r, c, pixels, line, above, x, other);
                if (ch == 0)
                    m += size_at(r, c, pixels, line, y - 1, x - 2, 0) + size_at(r, c, pixels, line, y - 1, x + 2, 0);
                else
                    m += size_at(r, c, pixels, line, y, x - 1, other) + size_at(r, c, pixels, line, y, x + 1, other);
                r[((size_t)y * line + (size_t)x) * c + ch]
                    = decode_in(b, codes, 16 * level(n) + level(m) + (ch > 0 ? 256 : 0));
            }
}

/* One part of wider numbers, in their order. */
static void part_of_wide(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels,
                         byte *tokens)
{
    unsigned mean[8] = { 0 }, context, token, ch, more;
    uint32_t z;
    size_t i;

    for (i = 0; i < pixels * g->channels && !b->bad; i++) {
        ch = (unsigned)(i % g->channels);
        context = mean[ch] / 8;
        if (g->row > 0)
            context = (context + (i >= g->row ? tokens[i - g->row] : 0)) / 2;
        z = token = decode_in(b, codes, context + (ch > 0 ? 128 : 0));
        if (token >= 16) {
            more = token / 4 - 2;
            z = ((4 + (uint32_t)token % 4) << more) + take(b, more);
        }
        r[i] = z % 2 == 0 ? z / 2 : ~(z / 2);
        tokens[i] = (byte)token;
        mean[ch] = mean[ch] - mean[ch] / 8 + token;
    }
}

/* Residuals become numbers, numbers become bytes. */
static void numbers_from(struct grid *g, byte *to)
{
    uint32_t mask = g->width == 4 ? 0xFFFFFFFF : ((uint32_t)1 << 8 * g->width) - 1, value, residual = 0;
    size_t i;

    for (i = 0; i < g->pixels * g->channels; i++, to += g->width) {
        residual = g->leaning && i % g->channels != 0 ? residual + g->x[i] : g->x[i];
        g->x[i] = (residual + (uint32_t)((uint64_t)prediction(g, i) & LOW32)) & mask;
        value = g->x[i];
        if (g->floats && (value & 0x80000000) != 0)
            value ^= 0x7FFFFFFF;
        put(to, g->big_endian ? swap(value, g->width) : value, g->width);
    }
}

static bool read_grid(struct bytes *in, struct grid *g, size_t n)
{
    unsigned kind = one_byte(in), more = one_byte(in);

    g->width = (kind & 3) + 1;
    g->big_endian = (kind & 4) != 0;
    g->floats = (kind & 8) != 0;
    g->leaning = (kind & 16) != 0;
    g->predictor = more & 15;
    g->channels = (more >> 4 & 7) + 1;
    g->head = number(in);
    g->row = number(in);
    if (in->bad || kind > 31 || more > 127 || g->predictor > 8 || g->head > 16383 || g->head > n)
        return false;
    if ((g->floats && g->width != 4) || (g->leaning && g->channels == 1))
        return false;
    if (g->row > 0 && (g->row % g->channels != 0 || g->row <= g->channels || g->row > 32768))
        return false;
    if (g->row == 0 && g->predictor >= 1 && g->predictor <= 5)
        return false;
    g->pixels = (n - g->head) / (g->channels * g->width);
    return g->pixels >= 4;
}

static bool samples(struct bytes *in, byte *raw, size_t n)
{
    static struct codes codes;
    struct grid g;
    struct bits tables, b;
    size_t sizes[3], i, j, part, body;
    byte *tokens;
    bool good = true;

    if (!read_grid(in, &g, n))
        return false;
    body = g.pixels * g.channels * g.width;
    for (i = 0; i < n; i++)
        if (i < g.head || i >= g.head + body)
            raw[i] = (byte)one_byte(in);
    tables = begin_bits(in);
    read_codes(&tables, &codes, CONTEXTS, 256, CODES);
    end_bits(in, &tables);
    for (i = 0; i < codes.count && g.width > 1; i++)
        for (j = 0; j < WORDS; j++)
            if (codes.code[i].symbol[j] >= 128)
                return false;
    for (i = 0; i < 3; i++)
        sizes[i] = number(in);
    if (in->bad)
        return false;
    g.x = room(NULL, g.pixels * g.channels * sizeof g.x[0]);
    tokens = room(NULL, g.pixels * g.channels);
    for (i = 0; i < 4 && good; i++) {
        size_t from = i * (g.pixels / 4);

        part = i < 3 ? g.pixels / 4 : g.pixels - from;
        b = stream_of(in, i < 3 ? sizes[i] : in->left);
        if (g.width == 1)
            part_of_bytes(&b, &codes, &g, g.x + from * g.channels, part);
        else
            part_of_wide(&b, &codes, &g, g.x + from * g.channels, part, tokens);
        good = used_up(&b) && !in->bad;
    }
    if (good)
        numbers_from(&g, raw + g.head);
    free(g.x);
    free(tokens);
    return good;
}

/* Decodes a segment: n raw bytes. */
static bool decode_segment(const byte *coded, size_t bytes, byte *raw, size_t n)
{
    struct bytes in = { NULL, 0, false };
    unsigned method, transform;

    in.from = coded;
    in.left = bytes;
    method = one_byte(&in);
    transform = one_byte(&in);
    if (in.bad || transform > 1 || (transform == 1 && method != 3))
        return false;
    switch (method) {
    case 0:
        if (in.left != n)
            return false;
        memcpy(raw, in.from, n);
        return true;
    case 1:
        if (in.left != 1)
            return false;
        memset(raw, *in.from, n);
        return true;
    case 2:
        return stretches(&in, raw, n);
    case 3:
        if (!matched(&in, raw, n))
            return false;
        if (transform == 1)
            turn_branches_back(raw, n);
        return true;
    case 4:
        return samples(&in, raw, n);
    default:
        return false;
    }
}

/* ---- stream.md and catalogue.md: which records there are ---------------------------------------------------------- */

enum { SPEC = 2, READER = 3, BATCH = 4, SEGMENT = 5, SUMS = 6, INDEX = 7, COLOPHON = 8, BODY_MAX = 1 << 24 };

static void add(struct list *list, uint64_t key, uint64_t at, uint64_t bytes, uint64_t raw)
{
    struct ref ref = { 0, 0, 0, 0 };

    if (bytes > BODY_MAX || raw > 1 << 20)
        return;
    ref.key = key;
    ref.at = at;
    ref.bytes = (uint32_t)bytes;
    ref.raw = (uint32_t)raw;
    if (list->count == list->room) {
        list->room = 2 * list->room + 64;
        list->refs = room(list->refs, list->room * sizeof ref);
    }
    list->refs[list->count++] = ref;
}

static int by_key(const void *one, const void *other)
{
    const struct ref *a = one, *b = other;

    return a->key != b->key ? (a->key < b->key ? -1 : 1) : a->at != b->at ? (a->at < b->at ? -1 : 1) : 0;
}

static void put_in_order(struct list *list)
{
    size_t i, kept = 0;

    if (list->count > 0)
        qsort(list->refs, list->count, sizeof list->refs[0], by_key);
    for (i = 0; i < list->count; i++)
        if (kept == 0 || by_key(&list->refs[kept - 1], &list->refs[i]) != 0)
            list->refs[kept++] = list->refs[i];
    list->count = kept;
}

/* The last ref whose key is not greater; list->count when there is none. */
static size_t find(const struct list *list, uint64_t key)
{
    size_t low = 0, high = list->count;

    while (low < high) {
        size_t middle = low + (high - low) / 2;

        if (list->refs[middle].key <= key)
            low = middle + 1;
        else
            high = middle;
    }
    return low > 0 ? low - 1 : list->count;
}

/* An INDEX holds a BATCH again, which has a hash of its own, and tells where segments and sums are. */
static void note_index(struct container *c, uint64_t at, uint64_t bytes)
{
    byte *body = room(NULL, bytes), first[8];
    uint64_t batch, segments, i;
    bool good;

    read_stream(c, at, body, bytes);
    batch = get(body + 40, 4);
    segments = get(body + 44, 4);
    good = hash_is(body, body + 16, (size_t)bytes - 16) && 80 + batch + 24 * segments == bytes;
    if (batch >= 40 && batch <= bytes - 80)
        add(&c->batches, get(body + 96, 8), at + 80, batch, 0);
    for (i = 0; good && i < segments; i++) {
        const byte *place = body + 80 + batch + 24 * i;

        add(&c->segments, get(place, 8), get(place + 8, 8) + 32, get(place + 20, 4), get(place + 16, 4));
    }
    if (good && get(body + 48, 8) != 0 && read_stream(c, get(body + 48, 8) + 32 + 24, first, 8))
        add(&c->sums, get(first, 8), get(body + 48, 8) + 32, get(body + 56, 4), 0);
    free(body);
}

static void note_record(struct container *c, unsigned type, uint64_t at, uint64_t bytes)
{
    char text[2049] = "", *items;
    byte head[40];

    if (bytes > BODY_MAX || (type == INDEX && bytes < 80))
        return;
    switch (type) {
    case SPEC:
    case READER:
        add(&c->texts, type, at, bytes, 0);
        break;
    case BATCH:
        if (bytes >= 40 && read_stream(c, at, head, 40))
            add(&c->batches, get(head + 16, 8), at, bytes, 0);
        break;
    case SEGMENT:
        if (bytes >= 32 && read_stream(c, at, head, 32))
            add(&c->segments, get(head + 8, 8), at, bytes, get(head, 4));
        break;
    case SUMS:
        if (bytes >= 32 && read_stream(c, at, head, 32))
            add(&c->sums, get(head + 24, 8), at, bytes, 0);
        break;
    case INDEX:
        note_index(c, at, bytes);
        break;
    case COLOPHON:
        if (read_stream(c, at, (byte *)text, lesser(bytes, 2048))) {
            c->colophon_there = true;
            items = strstr(text, "\nitems: ");
            c->items_told = items == NULL ? 0 : strtoull(items + 8, NULL, 10);
        }
        break;
    default:
        break;
    }
}

static void walk(struct container *c)
{
    uint64_t at = 0, bytes;
    unsigned type = 0;
    byte head[32];

    while (at + 32 <= c->stream_bytes && type != COLOPHON) {
        type = 0;
        if (!read_stream(c, at, head, 32)) {
            at = (at / PAYLOAD + 1) * PAYLOAD;             /* a lost block: go on behind it */
            continue;
        }
        if (memcmp(head, "FREC", 4) == 0 && get(head + 16, 8) == at && get(head + 24, 8) == hash_of(head, 24).low) {
            type = (unsigned)get(head + 4, 2);
            bytes = get(head + 8, 8);
            note_record(c, type, at + 32, bytes);
            if (bytes <= c->stream_bytes - at - 32)
                at += (bytes + 31) / 32 * 32;
        }
        at += 32;
    }
    put_in_order(&c->batches);
    put_in_order(&c->segments);
    put_in_order(&c->sums);
    put_in_order(&c->texts);
}

/* Finds the layout and all records. False when there is not one sound block. */
static bool open_container(struct container *c, FILE *file)
{
    byte block[BLOCK];
    uint64_t number = 0, sheet;
    struct tag tag;

    memset(c, 0, sizeof *c);
    c->file = file;
    c->sheet = c->payload_of = UINT64_MAX;
    c->raw = room(NULL, 1 << 20);
    while (fread(block, 1, 1, file) == 1 && fseek(file, BLOCK - 1, SEEK_CUR) == 0)
        c->blocks++;
    c->blocks -= c->blocks > 0;                            /* the title page */
    rewind(file);
    while (number < c->blocks && !read_block(c, number, block, &tag))
        number++;
    if (number == c->blocks)
        return false;
    c->known = tag;
    c->sheet_data = (uint64_t)tag.full.k * tag.full.depth;
    c->sheet_blocks = c->sheet_data + (uint64_t)tag.full.m * tag.full.depth;
    c->rebuilt = room(NULL, c->sheet_data * sizeof c->rebuilt[0]);
    for (number = 0; number < c->sheet_data; number++)
        c->rebuilt[number] = NULL;
    sheet = (c->blocks - 1) / c->sheet_blocks;
    while (!enter_sheet(c, sheet) && sheet > 0)            /* what is behind the last sound block does not count */
        sheet--;
    c->stream_bytes = (sheet * c->sheet_data + c->t) * PAYLOAD;
    c->mended = 0;
    walk(c);
    return true;
}

static void close_container(struct container *c)
{
    if (c->rebuilt != NULL)
        leave_sheet(c);
    free(c->rebuilt);
    free(c->batches.refs);
    free(c->segments.refs);
    free(c->sums.refs);
    free(c->texts.refs);
    free(c->raw);
    free(c->body);
    free(c->sum_body);
}

/* ---- catalogue.md: items ------------------------------------------------------------------------------------------ */

struct item {
    uint64_t number, content_at, size;
    const byte *pax, *extents;
    uint32_t pax_bytes, extent_count;
    bool has_content, listed;
    char ustar_path[257], ustar_link[101];
    const char *path, *link;           /* not ended by a zero */
    size_t path_bytes, link_bytes;
    char type;
    unsigned mode;
    int64_t seconds;                   /* of the last change, since 1970 */
    unsigned nanoseconds;
};

static uint64_t octal(const byte *field, unsigned bytes)
{
    uint64_t value = 0;
    unsigned i;

    for (i = 0; i < bytes; i++)
        if (field[i] >= '0' && field[i] <= '7')
            value = value << 3 | (field[i] - '0');
    return value;
}

/* A time such as -12.25, as seconds rounded down and nanoseconds. */
static void read_time(struct item *item, const char *text, size_t bytes)
{
    bool minus = bytes > 0 && *text == '-', point = false;
    int64_t seconds = 0, fraction = 0, unit = 1000000000;
    size_t i;

    for (i = minus; i < bytes; i++)
        if (text[i] == '.') {
            point = true;
        } else if (text[i] >= '0' && text[i] <= '9') {
            if (point)
                fraction += (unit /= 10) * (text[i] - '0');
            else if (seconds < INT64_C(1) << 50)
                seconds = 10 * seconds + (text[i] - '0');
        }
    if (minus && fraction > 0) {
        seconds++;
        fraction = 1000000000 - fraction;
    }
    item->seconds = minus ? -seconds : seconds;
    item->nanoseconds = (unsigned)fraction;
}

/* Records of an extended header: "LENGTH KEYWORD=VALUE\n", LENGTH counting all of it. */
static void read_extended(struct item *item, const char *at, size_t left)
{
    while (left > 0) {
        size_t length = 0, digits = 0, key;
        const char *equals;

        for (; digits < left && digits < 8 && at[digits] >= '0' && at[digits] <= '9'; digits++)
            length = 10 * length + (size_t)(at[digits] - '0');
        if (digits == 0 || length > left || length < digits + 3)
            return;
        equals = memchr(at + digits, '=', length - digits);
        if (equals == NULL)
            return;
        key = (size_t)(equals - at) - digits - 1;
        left -= length;
        length -= (size_t)(equals + 1 - at) + 1;           /* of the value */
        if (key == 4 && memcmp(equals - 4, "path", 4) == 0) {
            item->path = equals + 1;
            item->path_bytes = length;
        } else if (key == 8 && memcmp(equals - 8, "linkpath", 8) == 0) {
            item->link = equals + 1;
            item->link_bytes = length;
        } else if (key == 5 && memcmp(equals - 5, "mtime", 5) == 0) {
            read_time(item, equals + 1, length);
        }
        at = equals + 1 + length + 1;
    }
}

/* POSIX.1-2001, pax interchange format: an extended header where one is needed, then the ustar header. */
static bool read_pax(struct item *item)
{
    const byte *ustar = item->pax;
    size_t left = item->pax_bytes, extended = 0;

    if (left >= 512 && ustar[156] == 'x') {
        extended = (size_t)lesser(octal(ustar + 124, 12), left);
        if ((extended + 511) / 512 * 512 > left - 512)
            return false;
        left -= 512 + (extended + 511) / 512 * 512;
        ustar += 512 + (extended + 511) / 512 * 512;
    }
    if (left < 512)
        return false;
    memcpy(item->ustar_link, ustar + 157, 100);
    memcpy(item->ustar_path, ustar + 345, 155);
    item->ustar_link[100] = item->ustar_path[155] = '\0';
    if (item->ustar_path[0] != '\0')
        strcat(item->ustar_path, "/");
    strncat(item->ustar_path, (const char *)ustar, 100);
    item->path = item->ustar_path;
    item->path_bytes = strlen(item->path);
    item->link = item->ustar_link;
    item->link_bytes = strlen(item->link);
    item->type = (char)ustar[156];
    item->mode = (unsigned)octal(ustar + 100, 8) & 07777;
    item->seconds = (int64_t)octal(ustar + 136, 12);
    item->nanoseconds = 0;
    if (extended > 0)
        read_extended(item, (const char *)item->pax + 512, extended);
    return true;
}

/* The entry at the front of `left` bytes; 0 when it breaks a rule, else how long it is. */
static size_t read_entry(const byte *entry, size_t left, struct item *item)
{
    uint64_t bytes, end = 0, i, holes;
    unsigned flags;

    if (left < 24)
        return 0;
    bytes = get(entry, 4);
    item->pax_bytes = (uint32_t)get(entry + 4, 4);
    item->extent_count = (uint32_t)get(entry + 8, 4);
    flags = (unsigned)get(entry + 12, 4);
    item->size = holes = get(entry + 16, 8);
    item->has_content = (flags & 1) != 0;
    item->listed = (flags & 2) != 0;
    if (bytes > left || bytes > 2097152 || item->extent_count > 65536 || (!item->listed && item->extent_count > 0) ||
        24 + 16 * (uint64_t)item->extent_count + item->pax_bytes != bytes)
        return 0;
    item->extents = entry + 24;
    item->pax = entry + 24 + 16 * item->extent_count;
    for (i = 0; i < item->extent_count; i++) {
        uint64_t at = get(item->extents + 16 * i, 8), length = get(item->extents + 16 * i + 8, 8);

        if (length == 0 || at < end || at > item->size || length > item->size - at)
            return 0;
        end = at + length;
        holes -= length;
    }
    if ((item->listed && holes > UINT64_C(1) << 43) || !read_pax(item))
        return 0;
    return (size_t)bytes;
}

static uint64_t stored_bytes(const struct item *item)
{
    uint64_t bytes = 0, i;

    if (!item->has_content)
        return 0;
    if (!item->listed)
        return item->size;
    for (i = 0; i < item->extent_count; i++)
        bytes += get(item->extents + 16 * i + 8, 8);
    return bytes;
}

/* Table 1: the entries of a batch, decoded and checked; NULL when this copy of it is lost. */
static byte *read_batch(struct container *c, const struct ref *ref, uint64_t *items, uint64_t *content_at, size_t *bytes)
{
    byte *body, *entries = NULL;
    uint64_t at = 40, done = 0, piece, coded;

    body = c->body = room(c->body, ref->bytes);
    if (!read_stream(c, ref->at, body, ref->bytes) || !hash_is(body, body + 16, ref->bytes - 16))
        return NULL;
    *content_at = get(body + 24, 8);
    *items = get(body + 32, 4);
    *bytes = (size_t)get(body + 36, 4);
    if (*bytes < 1 || *bytes > 8388608)
        return NULL;
    entries = room(NULL, *bytes);
    while (done < *bytes) {
        piece = lesser(*bytes - done, 1048576);
        coded = at + 4 <= ref->bytes ? get(body + at, 4) : 0;
        if (coded < 2 || coded > ref->bytes - at - 4 || !decode_segment(body + at + 4, (size_t)coded, entries + done,
                                                                        (size_t)piece)) {
            free(entries);
            return NULL;
        }
        done += piece;
        at += 4 + coded;
    }
    return entries;
}

/* Table 3: the digest of an item; false when there is none, or it is lost. */
static bool sum_of(struct container *c, uint64_t number, byte sum[32])
{
    size_t i = find(&c->sums, number);
    uint64_t n, item, j;
    const struct ref *ref;

    if (i == c->sums.count)
        return false;
    ref = &c->sums.refs[i];
    if (c->sum != ref) {
        c->sum = ref;
        c->sum_body = room(c->sum_body, ref->bytes);
        if (!read_stream(c, ref->at, c->sum_body, ref->bytes) ||
            !hash_is(c->sum_body, c->sum_body + 16, ref->bytes - 16) ||
            32 + 34 * get(c->sum_body + 16, 4) != ref->bytes)
            memset(c->sum_body, 0, 32);
    }
    n = get(c->sum_body + 16, 4);
    for (item = get(c->sum_body + 24, 8), j = 0; j < n; j++) {
        item += get(c->sum_body + 32 + 2 * j, 2);
        if (item >= number)
            break;
    }
    if (j == n || item != number)
        return false;
    memcpy(sum, c->sum_body + 32 + 2 * n + 32 * j, 32);
    return true;
}

/* Makes the segment that holds a place of content space the one at hand. NULL when there is none, with *until its end. */
static const struct ref *segment_at(struct container *c, uint64_t at, uint64_t *until)
{
    size_t i = find(&c->segments, at);
    const struct ref *ref;

    *until = i == c->segments.count ? (i > 0 ? c->segments.refs[0].key : UINT64_MAX)
             : i + 1 < c->segments.count ? c->segments.refs[i + 1].key : UINT64_MAX;
    if (i == c->segments.count || at - c->segments.refs[i].key >= c->segments.refs[i].raw)
        return NULL;
    ref = &c->segments.refs[i];
    *until = ref->key + ref->raw;
    if (c->segment != ref) {
        byte *body = c->body = room(c->body, ref->bytes);

        c->segment = ref;
        c->segment_good = ref->bytes > 32 && read_stream(c, ref->at, body, ref->bytes) && get(body, 4) == ref->raw &&
                          get(body + 8, 8) == ref->key && decode_segment(body + 32, ref->bytes - 32, c->raw, ref->raw) &&
                          hash_is(body + 16, c->raw, ref->raw);
    }
    return c->segment_good ? ref : NULL;
}

/* ---- giving back -------------------------------------------------------------------------------------------------- */

struct sink { FILE *out; struct sha sha; bool failed; };

static void give_bytes(struct sink *sink, const byte *bytes, uint64_t count)
{
    static const byte zeros[BLOCK];    /* for bytes == NULL */

    while (count > 0) {
        size_t step = (size_t)lesser(count, bytes == NULL ? sizeof zeros : 1 << 20);
        const byte *from = bytes == NULL ? zeros : bytes;

        sha_add(&sink->sha, from, step);
        if (sink->out != NULL && fwrite(from, 1, step, sink->out) != step)
            sink->failed = true;
        count -= step;
        bytes += bytes == NULL ? 0 : step;
    }
}

/* One extent: what is lost comes as zeros. How much that is. */
static uint64_t give_extent(struct container *c, struct sink *sink, uint64_t content_at, uint64_t file_at, uint64_t bytes,
                            bool tell)
{
    uint64_t lost = 0, until, step;

    while (bytes > 0) {
        const struct ref *segment = segment_at(c, content_at, &until);

        step = lesser(bytes, until - content_at);
        give_bytes(sink, segment == NULL ? NULL : c->raw + (content_at - segment->key), step);
        if (segment == NULL) {
            lost += step;
            if (tell)
                printf("    lost: bytes %" PRIu64 " to %" PRIu64 "\n", file_at, file_at + step - 1);
        }
        content_at += step;
        file_at += step;
        bytes -= step;
    }
    return lost;
}

/* All content of an item, to `out` when that is not NULL. True when every byte is there and the digest is right. */
static bool give_content(struct container *c, const struct item *item, FILE *out, bool tell, bool *failed)
{
    uint64_t lost = 0, at = 0, content_at = item->content_at, i;
    byte digest[32], sum[32];
    struct sink sink;

    sink.out = out;
    sink.failed = false;
    sha_start(&sink.sha);
    if (!item->listed) {
        lost = give_extent(c, &sink, content_at, 0, item->size, tell);
    } else {
        for (i = 0; i < item->extent_count; i++) {
            uint64_t start = get(item->extents + 16 * i, 8), length = get(item->extents + 16 * i + 8, 8);

            give_bytes(&sink, NULL, start - at);
            lost += give_extent(c, &sink, content_at, start, length, tell);
            at = start + length;
            content_at += length;
        }
        give_bytes(&sink, NULL, item->size - at);
    }
    sha_end(&sink.sha, digest);
    *failed = sink.failed;
    if (lost > 0)
        return false;
    if (!sum_of(c, item->number, sum)) {
        if (tell)
            printf("    no SHA-256: taken back when the container was made, or the digest is lost\n");
        return false;
    }
    if (memcmp(digest, sum, 32) != 0 && tell)
        printf("    the SHA-256 is not the one in the catalogue\n");
    return memcmp(digest, sum, 32) == 0;
}

/* A date of the Gregorian calendar, in UTC. */
static void put_date(FILE *out, int64_t seconds)
{
    static const int lengths[12] = { 31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31 };
    int64_t day = floor_of(seconds, 86400), second = seconds - 86400 * day, cycles = floor_of(day, 146097);
    int64_t year = 1970 + 400 * cycles;
    int month = 0, length;

    for (day -= 146097 * cycles;; year++) {
        length = (year % 4 == 0 && year % 100 != 0) || year % 400 == 0 ? 366 : 365;
        if (day < length)
            break;
        day -= length;
    }
    for (; day >= lengths[month] + (month == 1 && length == 366); month++)
        day -= lengths[month] + (month == 1 && length == 366);
    fprintf(out, "%04" PRId64 "-%02d-%02dT%02d:%02d:%02d", year, month + 1, (int)day + 1, (int)(second / 3600),
            (int)(second / 60 % 60), (int)(second % 60));
}

/* A name for people: what a terminal could take for a command is written as \ and three octal digits. */
static void put_name(const char *name, size_t bytes)
{
    for (; bytes > 0; bytes--, name++)
        if ((byte)*name < 0x20 || *name == 0x7F || *name == '\\')
            printf("\\%03o", (unsigned)(byte)*name);
        else
            putchar(*name);
}

static void list_item(const struct item *item)
{
    static const char letters[] = "rwxrwxrwx";
    const char *type = memchr("0\0001l2l3c4b5d6p", item->type == '\0' ? '0' : item->type, 14);
    unsigned i;

    putchar(item->type == '1' ? 'h' : type != NULL && item->type >= '2' && item->type <= '6' ? type[1] : '-');
    for (i = 0; i < 9; i++)
        putchar((item->mode >> (8 - i) & 1) != 0 ? letters[i] : '-');
    printf("  ");
    put_date(stdout, item->seconds);
    printf("Z  %12" PRIu64 "  ", item->has_content ? item->size : 0);
    put_name(item->path, item->path_bytes);
    if (item->link_bytes > 0) {
        printf(" -> ");
        put_name(item->link, item->link_bytes);
    }
    putchar('\n');
}

/* Whether a name leads nowhere but down. */
static bool leads_down(const char *name, size_t bytes)
{
    size_t i, from = 0;

    if (bytes == 0 || *name == '/' || memchr(name, '\0', bytes) != NULL)
        return false;
    for (i = 0; i <= bytes; i++)
        if (i == bytes || name[i] == '/') {
            if (i - from == 2 && memcmp(name + from, "..", 2) == 0)
                return false;
            from = i + 1;
        }
    return true;
}

enum mode { LIST = 'l', CHECK = 'c', ARCHIVE = 't', FOLDER = 'x' };

struct task { enum mode mode; const char *path; FILE *archive; uint64_t items, lost; bool failed; };

/* A new file in the folder: never over one that is there, and never outside, for the name has no '/'. NULL: failed. */
static FILE *new_file(struct task *task, const char *name, char *path, size_t path_room)
{
    FILE *file;

    snprintf(path, path_room, "%s/%s", task->path, name);
    file = fopen(path, "rb");
    if (file != NULL) {
        fclose(file);
        file = NULL;
    } else {
        file = fopen(path, "wb");
    }
    if (file == NULL) {
        fprintf(stderr, "reader: cannot write %s: is the folder there, and empty?\n", path);
        task->failed = true;
    }
    return file;
}

/* The last part of the name behind the item's number, without characters that some system could object to. */
static void give_file(struct container *c, struct task *task, const struct item *item)
{
    char name[100], path[4096], damaged[4200];
    size_t from = item->path_bytes, at;
    bool good, failed;
    FILE *file;

    while (from > 0 && item->path_bytes - from < 60 && item->path[from - 1] != '/')
        from--;
    at = (size_t)snprintf(name, sizeof name, "%06" PRIu64 "-", item->number);
    for (; from < item->path_bytes && at < sizeof name - 1; from++) {
        char letter = item->path[from];

        name[at++] = strchr("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-", letter) == NULL ||
                     letter == '\0' ? '_' : letter;
    }
    name[at] = '\0';
    file = new_file(task, name, path, sizeof path);
    if (file == NULL)
        return;
    good = give_content(c, item, file, true, &failed);
    if (fclose(file) != 0 || failed) {
        fprintf(stderr, "reader: writing %s failed: is there room?\n", path);
        task->failed = true;
    }
    if (!good) {
        snprintf(damaged, sizeof damaged, "%s.damaged", path);
        if (rename(path, damaged) != 0)
            fprintf(stderr, "reader: %s IS DAMAGED, and could not be given another name\n", path);
    }
    printf("    is %s%s\n", name, good ? "" : ".damaged");
    task->lost += !good;
}

/* A pax archive is headers and contents, each padded to 512. An item that is not whole is left out. */
static void give_member(struct container *c, struct task *task, const struct item *item)
{
    static const byte zeros[1024];
    bool failed = false, good = !item->has_content || give_content(c, item, NULL, true, &failed);

    if (!good || !leads_down(item->path, item->path_bytes)) {
        printf("    left out of the archive: %s\n", good ? "the name leads out of the folder" : "it is not whole");
        task->lost += !good;
        return;
    }
    if (fwrite(item->pax, 1, item->pax_bytes, task->archive) != item->pax_bytes)
        failed = true;
    if (item->has_content && !give_content(c, item, task->archive, true, &failed))
        task->lost++;
    if (item->has_content && item->size % 512 != 0)
        fwrite(zeros, 1, (size_t)(512 - item->size % 512), task->archive);
    if (failed || ferror(task->archive))
        task->failed = true;
}

static void do_item(struct container *c, struct task *task, const struct item *item)
{
    bool failed;

    task->items++;
    list_item(item);
    if (task->mode == ARCHIVE)
        give_member(c, task, item);
    else if (task->mode == FOLDER && item->has_content)
        give_file(c, task, item);
    else if (task->mode == CHECK && item->has_content && !give_content(c, item, NULL, true, &failed))
        task->lost++;
}

static void do_texts(struct container *c, struct task *task)
{
    char path[4096];
    size_t i;

    for (i = 0; i < c->texts.count; i++) {
        const struct ref *ref = &c->texts.refs[i];
        const char *name = ref->key == SPEC ? "specification.txt" : "reader.c";
        byte *text = room(NULL, ref->bytes);
        bool whole = read_stream(c, ref->at, text, ref->bytes);
        FILE *file = new_file(task, name, path, sizeof path);

        if (file != NULL && (fwrite(text, 1, ref->bytes, file) != ref->bytes) | (fclose(file) != 0))
            task->failed = true;
        if (!whole)
            printf("%s has gaps\n", name);
        task->lost += !whole;
        free(text);
    }
}

/* Items in the order of their numbers, each from the first copy of its batch that is whole. */
static void do_items(struct container *c, struct task *task)
{
    uint64_t next = 0, items, content_at, i;
    size_t bytes, at, r, step;
    struct item item;
    byte *entries;

    for (r = 0; r < c->batches.count && !task->failed; r++) {
        if (c->batches.refs[r].key < next)
            continue;
        entries = read_batch(c, &c->batches.refs[r], &items, &content_at, &bytes);
        if (entries == NULL)
            continue;
        if (c->batches.refs[r].key > next)
            printf("LOST from the catalogue: items %" PRIu64 " to %" PRIu64 "\n", next, c->batches.refs[r].key - 1);
        c->catalogue_lost += c->batches.refs[r].key - next;
        next = c->batches.refs[r].key;
        for (i = 0, at = 0; i < items && !task->failed; i++, at += step) {
            item.number = next++;
            item.content_at = content_at;
            step = read_entry(entries + at, bytes - at, &item);
            if (step == 0) {
                printf("item %" PRIu64 ": its catalogue entry is not of format 1\n", item.number);
                c->catalogue_lost += items - i;
                break;
            }
            content_at += stored_bytes(&item);
            do_item(c, task, &item);
        }
        free(entries);
    }
    if (c->colophon_there && c->items_told > next) {
        printf("LOST from the catalogue: items %" PRIu64 " to %" PRIu64 "\n", next, c->items_told - 1);
        c->catalogue_lost += c->items_told - next;
    }
}

static int run(struct container *c, struct task *task)
{
    do_items(c, task);
    if (task->mode == FOLDER && !task->failed)
        do_texts(c, task);
    printf("%" PRIu64 " items", task->items);
    if (c->mended + c->blocks_rebuilt > 0)
        printf("; damaged blocks were met and brought back");
    if (task->lost > 0)
        printf("; %" PRIu64 " ARE NOT WHOLE", task->lost);
    if (c->catalogue_lost > 0)
        printf("; %" PRIu64 " ARE LOST FROM THE CATALOGUE", c->catalogue_lost);
    if (!c->colophon_there)
        printf("; the last record is lost: THERE MAY HAVE BEEN MORE");
    printf("\n");
    if (task->failed)
        return CANNOT_CREATE;
    if (task->lost + c->catalogue_lost > 0 || !c->colophon_there)
        return LOSS;
    return c->mended + c->blocks_rebuilt + c->blocks_lost > 0 ? SAFE : 0;
}

int main(int count, char **words)
{
    struct task task = { LIST, NULL, NULL, 0, 0, false };
    static struct container c;
    int status = BAD_DATA;
    FILE *file;

    if (count > 2 && words[2][0] == '-' && words[2][1] != '\0' && words[2][2] == '\0')
        task.mode = (enum mode)words[2][1];
    task.path = count > 3 ? words[3] : NULL;
    if (count < 2 || count != (task.mode == LIST ? 2 : task.mode == CHECK ? 3 : 4) ||
        strchr("lctx", (int)task.mode) == NULL) {
        fprintf(stderr, "usage: reader FILE [-c | -t ARCHIVE | -x FOLDER]\n");
        return USAGE;
    }
    file = fopen(words[1], "rb");
    if (file == NULL) {
        fprintf(stderr, "reader: cannot open %s\n", words[1]);
        return NO_INPUT;
    }
    if (task.mode == ARCHIVE) {
        task.archive = fopen(task.path, "rb") == NULL ? fopen(task.path, "wb") : NULL;
        if (task.archive == NULL) {
            fprintf(stderr, "reader: cannot write %s: is it there already?\n", task.path);
            return CANNOT_CREATE;
        }
    }
    if (!open_container(&c, file))
        fprintf(stderr, "reader: %s holds no sound block of format 1\n", words[1]);
    else
        status = run(&c, &task);
    if (task.mode == ARCHIVE) {
        static const byte end[1024];

        if ((fwrite(end, 1, sizeof end, task.archive) != sizeof end) | (fclose(task.archive) != 0)) {
            fprintf(stderr, "reader: writing %s failed: is there room?\n", task.path);
            status = CANNOT_CREATE;
        }
    }
    close_container(&c);
    fclose(file);
    return status;
}
