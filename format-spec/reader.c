/* format-spec/reader.c - reads firn containers of format 1 when nothing else is left that can */
/* SPDX-License-Identifier: BSD-2-Clause */
/*
 * You have a file whose first line is FIRN CONTAINER, FORMAT 1. This program lists it, checks it, and gives back what
 * is in it. It is ISO C99, needs the standard library only, and is meant to be read beside the specification, whose
 * pages are named above each part. It is plain rather than fast.
 *
 *     cc -O2 -o reader reader.c
 *
 *     reader FILE               lists what is in the container
 *     reader FILE -c            reads everything, compares every digest, says what is lost
 *     reader FILE -t ARCHIVE    writes a pax archive of everything that is whole; tar can unpack it
 *     reader FILE -x FOLDER     writes the files into FOLDER, which must be there, each under its number and the last
 *                               part of its name, for standard C can make no folders: the list has the whole name.
 *                               Damaged files are written too, with zeros for what is lost, and .damaged behind the
 *                               name. Title page, specification and the source of this program come along.
 *
 * It never writes to FILE, and over nothing that is there. Exit status: 0 all is intact; 1 there is damage, and every
 * byte was brought back; 2 bytes are lost, and it says which; 64 and up: it could not work.
 */
#define _FILE_OFFSET_BITS 64 /* some systems open files of more than 2 GiB only then; others do not mind */
#include <inttypes.h>
#include <limits.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

typedef unsigned char byte;

enum { SAFE = 1, LOSS = 2, USAGE = 64, BAD_DATA = 65, NO_INPUT = 66, CANNOT_CREATE = 73 };

static uint64_t get(const byte *from, unsigned bytes) /* numbers in a container are little-endian */
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

static uint64_t swap(uint64_t value, unsigned bytes) /* its bytes in the opposite order */
{
    uint64_t swapped = 0;
    for (; bytes > 0; bytes--, value >>= 8)
        swapped = swapped << 8 | (value & 0xFF);
    return swapped;
}

static uint64_t lesser(uint64_t a, uint64_t b) { return a < b ? a : b; }

static void *room(void *old, uint64_t bytes) /* memory, or the end of the program */
{
    void *memory = bytes > (size_t)-1 / 2 ? NULL : realloc(old, bytes > 0 ? (size_t)bytes : 1);
    if (memory == NULL) {
        fprintf(stderr, "reader: not enough memory for %" PRIu64 " bytes\n", bytes);
        exit(BAD_DATA);
    }
    return memory;
}

/* ---- hash.md: XXH3-128, in the letters of that page ------------------------------------------------------------ */

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

static struct pair multiply(uint64_t a, uint64_t b) /* all 128 bits of the product */
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

static uint64_t s64(unsigned at) { return get(S + at, 8); }

static uint64_t pair_of(const byte *x, unsigned s) { return fold(get(x, 8) ^ s64(s), get(x + 8, 8) ^ s64(s + 8)); }

static struct pair hash_short(const byte *x, size_t n) /* sections 3 to 6: up to 16 bytes */
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
        h = multiply(product.low ^ swap(product.high, 8), P2);
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

static struct pair hash_middle(const byte *x, size_t n) /* section 7: 17 to 240 bytes */
{
    uint64_t a = n * P1, b = 0;
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
    struct pair h = { mix(a + b), 0 - mix(a * P1 + b * P4 + n * P2) };
    return h;
}

static void stripe(uint64_t A[8], const byte *x, unsigned s)
{
    for (unsigned e = 0; e < 8; e++) {
        uint64_t v = get(x + 8 * e, 8), key = v ^ s64(s + 8 * e);
        A[e ^ 1] += v;
        A[e] += (key & LOW32) * (key >> 32);
    }
}

static uint64_t merge(const uint64_t A[8], unsigned s, uint64_t t)
{
    for (unsigned e = 0; e < 4; e++)
        t += fold(A[2 * e] ^ s64(s + 16 * e), A[2 * e + 1] ^ s64(s + 16 * e + 8));
    return mix(t);
}

static struct pair hash_of(const byte *x, size_t n)
{
    if (n <= 240) return n <= 16 ? hash_short(x, n) : hash_middle(x, n);
    uint64_t A[8] = { Q3, P1, P2, P3, P4, Q2, P5, Q1 }; /* section 8 */
    for (size_t j = 0; j < (n - 1) / 64; j++) {
        stripe(A, x + 64 * j, 8 * (unsigned)(j % 16));
        for (unsigned e = 0; e < 8 && j % 16 == 15; e++)
            A[e] = (A[e] ^ A[e] >> 47 ^ s64(128 + 8 * e)) * Q1;
    }
    stripe(A, x + n - 64, 121);
    struct pair h = { merge(A, 11, n * P1), merge(A, 117, ~(n * P2)) };
    return h;
}

static bool hash_is(const byte *stored, const byte *x, size_t n)
{
    struct pair h = hash_of(x, n);
    return get(stored, 8) == h.low && get(stored + 8, 8) == h.high;
}

/* ---- SHA-256: FIPS 180-4 --------------------------------------------------------------------------------------- */

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

static uint32_t turn(uint32_t x, unsigned by) /* rotates to the right */
{
    return (uint32_t)(x >> by | x << (32 - by));
}

static void sha_block(struct sha *sha)
{
    uint32_t w[64], v[8];
    for (unsigned i = 0; i < 16; i++)
        w[i] = (uint32_t)swap(get(sha->block + 4 * i, 4), 4);
    for (unsigned i = 16; i < 64; i++)
        w[i] = (turn(w[i - 2], 17) ^ turn(w[i - 2], 19) ^ w[i - 2] >> 10) + w[i - 7]
               + (turn(w[i - 15], 7) ^ turn(w[i - 15], 18) ^ w[i - 15] >> 3) + w[i - 16];
    memcpy(v, sha->h, sizeof v);
    for (unsigned i = 0; i < 64; i++) {
        uint32_t t1 = v[7] + (turn(v[4], 6) ^ turn(v[4], 11) ^ turn(v[4], 25)) + ((v[4] & v[5]) ^ (~v[4] & v[6]));
        uint32_t most = (v[0] & v[1]) ^ (v[0] & v[2]) ^ (v[1] & v[2]);
        uint32_t t2 = (turn(v[0], 2) ^ turn(v[0], 13) ^ turn(v[0], 22)) + most;
        t1 += sha_k[i] + w[i];
        memmove(v + 1, v, 7 * sizeof v[0]);
        v[4] += t1;
        v[0] = t1 + t2;
    }
    for (unsigned i = 0; i < 8; i++)
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
    byte tail[72] = { 0x80 };
    uint64_t zeros = (119 - sha->bytes % 64) % 64;
    put(tail + 1 + zeros, swap(8 * sha->bytes, 8), 8);
    sha_add(sha, tail, 1 + zeros + 8);
    for (unsigned i = 0; i < 8; i++)
        put(digest + 4 * i, swap(sha->h[i], 4), 4);
}

/* ---- block.md: lanes, tag -------------------------------------------------------------------------------------- */

enum { BLOCK = 4096, PAYLOAD = 3968, TAG = 3968, HASH = 4000, HASHED = 4000, DATA_BLOCK = 1, RESERVE_BLOCK = 2 };

static bool mend_lanes(byte *block) /* flips what the lanes propose; true when they propose anything */
{
    unsigned word_of[512] = { 511 }, w = 0, guard = 502; /* label to word */
    uint64_t s[9] = { 0 }, p = 0;
    for (unsigned label = 0; label < 512; label++) {
        if (label > 0)
            word_of[label] = (label & (label - 1)) == 0 ? guard++ : w++;
        uint64_t word = get(block + 8 * word_of[label], 8);
        p ^= word;
        for (unsigned j = 0; j < 9; j++)
            s[j] ^= (label >> j & 1) != 0 ? word : 0;
    }
    for (unsigned b = 0; b < 64; b++)
        if ((p >> b & 1) != 0) {
            unsigned label = 0;
            for (unsigned j = 0; j < 9; j++)
                label |= (unsigned)(s[j] >> b & 1) << j;
            block[8 * word_of[label] + b / 8] ^= (byte)(1U << b % 8);
        }
    return p != 0;
}

struct shape { unsigned k, m, depth; };

struct tag { struct shape full; unsigned kind, t; uint64_t id, number; };

static struct shape shape_of(struct shape full, uint64_t t) /* sheet.md, section 2: a sheet of t data blocks */
{
    struct shape shape = full;
    if (t == (uint64_t)full.k * full.depth || t == 0) return shape;
    if (full.m == 0) {
        shape.depth = (unsigned)((t + full.k - 1) / full.k);
    } else {
        uint64_t w = (t * full.m + full.k - 1) / full.k;
        w = w < 4 ? 4 : w;
        while (shape.m > 4 && shape.m * ((w + shape.m - 1) / shape.m) > w + w / 4)
            shape.m /= 2;
        shape.depth = (unsigned)((w + shape.m - 1) / shape.m);
    }
    shape.k = (unsigned)((t + shape.depth - 1) / shape.depth);
    return shape;
}

static bool read_tag(const byte *block, struct tag *tag) /* false when it breaks a rule of format 1 */
{
    const byte *at = block + TAG;
    struct shape full = { at[6], at[7], (unsigned)get(at + 28, 2) };
    tag->full = full;
    tag->kind = at[5];
    tag->id = get(at + 8, 8);
    tag->number = get(at + 16, 8);
    tag->t = (unsigned)get(at + 24, 4);
    uint64_t sheet_blocks = (uint64_t)full.depth * (full.k + full.m);
    if (memcmp(at, "FIRN\1", 5) != 0 || full.k < 1 || full.depth < 1 || full.depth > 4096) return false;
    if (full.m != 0 && (full.m < 4 || full.m > 128 || (full.m & (full.m - 1)) != 0)) return false;
    if (full.k + full.m > 256 || sheet_blocks > 65536 || tag->t < 1 || tag->t > full.k * full.depth)
        return false;
    struct shape shape = shape_of(full, tag->t);
    uint64_t index = tag->number % sheet_blocks;
    if (index < tag->t) return tag->kind == DATA_BLOCK;
    return tag->kind == RESERVE_BLOCK && index < tag->t + (uint64_t)shape.m * shape.depth;
}

/* ---- the file, and what is known of it ------------------------------------------------------------------------- */

struct ref { uint64_t key, at; uint32_t bytes, raw; }; /* a body in the stream, and what it is found by */

struct list { struct ref *refs; size_t count, room; };

struct container {
    FILE *file;
    uint64_t blocks;                        /* that begin in the file */
    struct tag known;                       /* of the first sound block */
    uint64_t sheet_blocks, sheet_data;      /* of a full sheet */
    uint64_t stream_bytes;
    uint64_t sheet;                         /* the one at hand */
    unsigned t;
    struct shape shape;
    byte **rebuilt;                         /* of the sheet at hand, by index: a payload, or `gone` */
    uint64_t payload_of;                    /* the data block whose payload is at hand */
    byte payload[PAYLOAD];
    bool payload_there;
    struct list batches, segments, sums, texts; /* by first item; by place of content; by first item; by type */
    uint64_t items_told;                    /* by the colophon */
    bool colophon_there, damaged;
    const struct ref *segment, *sum;        /* those at hand */
    bool segment_good;
    byte *raw, *body, *sum_body;
};

static byte gone[1]; /* stands for a payload that cannot be rebuilt */

/* Standard C tells places in a long, which may be too short; then it takes several steps. */
static bool read_at(struct container *c, uint64_t at, byte *to, size_t bytes)
{
    uint64_t step = lesser(at, LONG_MAX);
    bool there = fseek(c->file, (long)step, SEEK_SET) == 0;
    for (at -= step; there && at > 0; at -= step) {
        step = lesser(at, LONG_MAX);
        there = fseek(c->file, (long)step, SEEK_CUR) == 0;
    }
    return there && fread(to, 1, bytes, c->file) == bytes;
}

/* block.md, section 4. True when the block of this number was read sound or mended, and belongs here. */
static bool read_block(struct container *c, uint64_t number, byte *block, struct tag *tag)
{
    bool mended = false;
    if (number >= c->blocks || !read_at(c, BLOCK * (number + 1), block, BLOCK)) return false;
    if (!hash_is(block + HASH, block, HASHED)) {
        mended = mend_lanes(block);
        if (!mended || !hash_is(block + HASH, block, HASHED)) return false;
    }
    const struct shape *full = &c->known.full;
    if (!read_tag(block, tag) || tag->number != number ||
        (full->k != 0 && (tag->id != c->known.id || memcmp(&tag->full, full, sizeof *full) != 0)))
        return false;
    c->damaged |= mended;
    return true;
}

/* ---- sheet.md: rows and the code ------------------------------------------------------------------------------- */

static unsigned gf_times(unsigned a, unsigned b)
{
    unsigned product = 0;
    for (; b != 0; b >>= 1) {
        product ^= (b & 1) != 0 ? a : 0;
        a = (a & 0x80) != 0 ? (a << 1) ^ 0x11D : a << 1;
    }
    return product;
}

static unsigned gf_inverse(unsigned a) /* a^254 */
{
    unsigned power = 1;
    for (unsigned i = 0; i < 254; i++)
        power = gf_times(power, a);
    return power;
}

/*
 * Lagrange's formula: the payload at point `at` from the others. there[s] is the payload at point s, NULL where it is
 * zero or lost; lost[] are the `count` points in E.
 */
static void row_value(byte *const there[256], const byte *lost, unsigned count, unsigned at, byte *payload,
                      size_t bytes)
{
    unsigned below = 1; /* L'(at) */
    for (unsigned i = 0; i < count; i++)
        below = lost[i] == at ? below : gf_times(below, at ^ lost[i]);
    memset(payload, 0, bytes);
    for (unsigned s = 0; s < 256; s++)
        if (there[s] != NULL) {
            unsigned factor = gf_inverse(gf_times(below, at ^ s));
            for (unsigned i = 0; i < count; i++)
                factor = gf_times(factor, s ^ lost[i]);
            byte times[256];
            for (unsigned v = 0; v < 256; v++)
                times[v] = (byte)gf_times(factor, v);
            for (size_t b = 0; b < bytes; b++)
                payload[b] ^= times[there[s][b]];
        }
}

static void leave_sheet(struct container *c)
{
    for (uint64_t i = 0; i < c->sheet_data; i++) {
        if (c->rebuilt[i] != gone)
            free(c->rebuilt[i]);
        c->rebuilt[i] = NULL;
    }
}

/* Makes a sheet the one at hand; any of its blocks tells t. False when it has no sound block. */
static bool enter_sheet(struct container *c, uint64_t sheet)
{
    if (sheet == c->sheet) return c->t > 0;
    leave_sheet(c);
    c->sheet = sheet;
    c->t = 0;
    for (uint64_t i = 0; i < c->sheet_blocks && c->t == 0; i++) {
        byte block[BLOCK];
        struct tag tag;
        if (read_block(c, sheet * c->sheet_blocks + i, block, &tag))
            c->t = tag.t;
    }
    c->shape = shape_of(c->known.full, c->t);
    return c->t > 0;
}

/* The index in the sheet of point `point` of a row; false when the row has no such block. */
static bool index_of(const struct container *c, uint64_t row, unsigned point, uint64_t *index)
{
    uint64_t depth = c->shape.depth;
    if (point >= c->shape.m) { /* data column point - m */
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
    unsigned count = 0;
    uint64_t index;
    struct tag tag;
    for (unsigned point = 0; point < 256; point++)
        if (index_of(c, row, point, &index)) {
            byte *block = blocks + (size_t)point * BLOCK;
            if (read_block(c, c->sheet * c->sheet_blocks + index, block, &tag) && tag.t == c->t)
                there[point] = block;
            else
                lost[count++] = (byte)point;
        }
    for (unsigned i = 0; i < count; i++)
        if (lost[i] >= c->shape.m && index_of(c, row, lost[i], &index)) {
            c->rebuilt[index] = count > c->shape.m ? gone : room(NULL, PAYLOAD);
            if (count <= c->shape.m)
                row_value(there, lost, count, lost[i], c->rebuilt[index], PAYLOAD);
        }
    free(blocks);
}

/* ---- stream.md: the stream ------------------------------------------------------------------------------------- */

/* Makes the payload of a data block the one at hand; data blocks count from 0 over the container. */
static bool fetch(struct container *c, uint64_t data_block)
{
    uint64_t index = data_block % c->sheet_data;
    byte block[BLOCK];
    struct tag tag;
    if (data_block == c->payload_of) return c->payload_there;
    c->payload_of = data_block;
    c->payload_there = false;
    if (!enter_sheet(c, data_block / c->sheet_data) || index >= c->t) return false;
    if (c->rebuilt[index] == NULL && read_block(c, c->sheet * c->sheet_blocks + index, block, &tag) && tag.t == c->t) {
        memcpy(c->payload, block, PAYLOAD);
        return c->payload_there = true;
    }
    c->damaged = true;
    if (c->rebuilt[index] == NULL)
        rebuild_row(c, index % c->shape.depth);
    if (c->rebuilt[index] == NULL || c->rebuilt[index] == gone) return false;
    memcpy(c->payload, c->rebuilt[index], PAYLOAD);
    return c->payload_there = true;
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

/* ---- segment.md: numbers, bits, codes -------------------------------------------------------------------------- */

struct bytes { const byte *from; size_t left; bool bad; };       /* of a segment, from the front */
struct bits { const byte *from; size_t bytes, used; bool bad; }; /* a bit string; used: bits */

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
    unsigned value = 0, group = 0x80, i;
    for (i = 0; i < 3 && group >= 0x80; i++) {
        group = one_byte(in);
        value |= (group & 0x7F) << 7 * i;
    }
    in->bad |= group >= 0x80 || (i > 1 && group == 0);
    return value;
}

static struct bits cut_bits(struct bytes *in, size_t bytes) /* a bit string of so many bytes, off the front */
{
    in->bad |= bytes > in->left;
    struct bits b = { in->from, bytes > in->left ? in->left : bytes, 0, false };
    in->from += b.bytes;
    in->left -= b.bytes;
    return b;
}

static uint32_t peek(const struct bits *b, unsigned n) /* the next n bits, at most 25; zeros behind the end */
{
    uint32_t word = 0;
    for (size_t i = b->used / 8; i < b->used / 8 + 4; i++)
        word = word << 8 | (i < b->bytes ? b->from[i] : 0);
    return n == 0 ? 0 : (uint32_t)(word << b->used % 8) >> (32 - n);
}

static void use(struct bits *b, unsigned n)
{
    b->used += n;
    b->bad |= b->used > 8 * b->bytes;
}

static uint32_t take(struct bits *b, unsigned n) /* the next n bits, at most 32 */
{
    uint32_t high = n > 16 ? take(b, n - 16) : 0, low = peek(b, n > 16 ? 16 : n);
    use(b, n > 16 ? 16 : n);
    return n > 16 ? high << 16 | low : low;
}

/* Ends a bit string that was begun with all that was left, for nobody told its length: what is behind it comes back. */
static void end_bits(struct bytes *in, struct bits *b)
{
    size_t bytes = (b->used + 7) / 8;
    in->bad |= b->bad || peek(b, (unsigned)(8 * bytes - b->used)) != 0;
    if (!in->bad) {
        in->from -= b->bytes - bytes;
        in->left += b->bytes - bytes;
    }
}

static bool used_up(struct bits *b) /* all but less than eight zero bits */
{
    return !b->bad && 8 * b->bytes - b->used < 8 && peek(b, 8) == 0;
}

static unsigned gamma_word(struct bits *b)
{
    unsigned zeros = 0;
    for (; zeros < 10 && peek(b, 1) == 0; zeros++)
        use(b, 1);
    b->bad |= zeros == 10;
    return take(b, zeros + 1);
}

enum { WORD_BITS = 11, WORDS = 1 << WORD_BITS, CODES = 16, CONTEXTS = 512, SYMBOLS = 512, TOKENS = 14 };

struct code { unsigned short symbol[WORDS]; byte length[WORDS]; }; /* by the next 11 bits; length 0: no word */

/* Gives out the words by the canonical rule. How much of the code they fill: WORDS is full, more is over-full. */
static unsigned assign(struct code *code, const byte *lengths, unsigned symbols)
{
    unsigned at = 0;
    memset(code->length, 0, sizeof code->length);
    for (unsigned length = 1; length <= WORD_BITS; length++)
        for (unsigned symbol = 0; symbol < symbols; symbol++) {
            if (lengths[symbol] != length) continue;
            if (at + (WORDS >> length) > WORDS) return WORDS + 1;
            for (unsigned i = 0; i < (unsigned)WORDS >> length; i++, at++) {
                code->symbol[at] = (unsigned short)symbol;
                code->length[at] = (byte)length;
            }
        }
    return at;
}

static unsigned decode(struct bits *b, const struct code *code)
{
    unsigned next = peek(b, WORD_BITS);
    b->bad |= code->length[next] == 0;
    use(b, code->length[next]);
    return code->symbol[next];
}

static void read_token_code(struct bits *b, struct code *code, unsigned tokens) /* full, or one word of one bit */
{
    byte lengths[CODES + 1] = { 0 };
    unsigned used = 0;
    for (unsigned i = 0; i < tokens; i++) {
        lengths[i] = (byte)take(b, 3);
        used += lengths[i] > 0;
    }
    unsigned full = assign(code, lengths, tokens);
    b->bad |= full != WORDS && !(used == 1 && full == WORDS / 2);
}

static void read_table(struct bits *b, const struct code *tokens, struct code *code, unsigned symbols)
{
    byte lengths[SYMBOLS] = { 0 };
    unsigned symbol = 0, before = 0, full = 0;
    while (!b->bad && full < WORDS) {
        unsigned token = decode(b, tokens), times = token < 12 ? 1 : gamma_word(b) + 1;
        before = token < 12 ? token : token == 12 ? 0 : before;
        if (b->bad || (token == 13 && before == 0) || times > symbols - symbol) {
            b->bad = true;
            return;
        }
        for (; times > 0; times--) {
            lengths[symbol++] = (byte)before;
            full += before > 0 ? (unsigned)WORDS >> before : 0;
        }
    }
    b->bad |= full != WORDS || assign(code, lengths, symbols) != WORDS;
}

struct codes { byte of[CONTEXTS]; unsigned count; struct code code[CODES]; };

static void read_codes(struct bits *b, struct codes *codes, unsigned contexts, unsigned symbols, unsigned most)
{
    static struct code tokens;
    memset(codes->of, 0, sizeof codes->of);
    codes->count = take(b, 4) + 1;
    b->bad |= codes->count > most;
    if (codes->count > 1 && !b->bad) {
        read_token_code(b, &tokens, codes->count + 1);
        for (unsigned context = 0; context < contexts && !b->bad;) {
            unsigned token = decode(b, &tokens), same = token == codes->count, times = same ? gamma_word(b) : 1;
            b->bad |= (same && context == 0) || times > contexts - context;
            for (; times > 0 && !b->bad; times--, context++)
                codes->of[context] = same ? codes->of[context - 1] : (byte)token;
        }
    }
    read_token_code(b, &tokens, TOKENS); /* once for all tables */
    for (unsigned i = 0; i < codes->count && !b->bad; i++)
        read_table(b, &tokens, &codes->code[i], symbols);
}

static unsigned decode_in(struct bits *b, const struct codes *codes, unsigned context)
{
    return decode(b, &codes->code[codes->of[context]]);
}

/* ---- segment.md: stretches ------------------------------------------------------------------------------------- */

static bool prefix_stretch(struct bytes *in, unsigned streams, bool last, byte *raw, size_t n)
{
    static struct code tokens, code;
    struct bits table = cut_bits(in, in->left);
    size_t sizes[6] = { 0 };
    read_token_code(&table, &tokens, TOKENS);
    read_table(&table, &tokens, &code, 256);
    end_bits(in, &table);
    for (unsigned i = 0; i < (last ? streams - 1 : streams); i++) {
        sizes[i] = number(in);
        if (i > 0) /* a difference, folded; should it lead below 0, the sum is too large for any stream */
            sizes[i] = sizes[i - 1] + (sizes[i] % 2 == 0 ? sizes[i] / 2 : ~(sizes[i] / 2));
    }
    for (unsigned i = 0; i < streams && !in->bad; i++) {
        size_t share = i == streams - 1 ? n - i * (n / streams) : n / streams;
        struct bits stream = cut_bits(in, last && i == streams - 1 ? in->left : sizes[i]);
        for (; share > 0 && !stream.bad; share--)
            *raw++ = (byte)decode(&stream, &code);
        in->bad |= !used_up(&stream);
    }
    return !in->bad;
}

static bool stretches(struct bytes *in, byte *raw, size_t n)
{
    for (bool last = false; !last;) {
        unsigned kind = one_byte(in), method = kind & 3;
        last = (kind & 8) != 0;
        size_t length = last ? n : number(in);
        if (in->bad || kind > 15 || method == 3 || ((kind & 4) != 0 && (method != 2 || length < 6)) ||
            (!last && (length < 256 || length >= n)))
            return false;
        if (method == 2 && !prefix_stretch(in, (kind & 4) != 0 ? 6 : 1, last, raw, length)) return false;
        if (method == 1)
            memset(raw, (int)one_byte(in), length);
        for (size_t i = 0; method == 0 && i < length; i++)
            raw[i] = (byte)one_byte(in);
        raw += length;
        n -= length;
    }
    return !in->bad && in->left == 0;
}

/* ---- segment.md: matched --------------------------------------------------------------------------------------- */

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
static uint32_t distance_of(struct bits *b, const struct codes *codes, unsigned context, unsigned fine,
                            uint32_t recent[4])
{
    unsigned symbol = decode_in(b, codes, context), place = symbol < 4 ? symbol : 3;
    uint32_t distance = recent[place];
    if (symbol >= 4) {
        unsigned low = (symbol - 4) & ((1U << fine) - 1), q = (symbol - 4) >> fine;
        distance = ((((2 + q % 2) << q / 2) + take(b, q / 2) - 2) << fine) + low + 1;
    }
    memmove(recent + 1, recent, place * sizeof recent[0]);
    return recent[0] = distance;
}

static bool matched(struct bytes *in, byte *raw, size_t n)
{
    static struct codes commands, distances, literals;
    struct bits tables = cut_bits(in, in->left), b[3];
    unsigned fine = take(&tables, 2);
    read_codes(&tables, &commands, 4, 512, 4);
    read_codes(&tables, &distances, 8, 4 + 2 * (20 - fine) * (1U << fine), 8);
    read_codes(&tables, &literals, 512, 256, 16);
    end_bits(in, &tables);
    size_t sizes[2] = { number(in), 0 }, made = 0, length = 0;
    sizes[1] = number(in);
    for (unsigned i = 0; i < 3; i++)
        b[i] = cut_bits(in, i < 2 ? sizes[i] : in->left);
    uint32_t recent[4] = { 1, 2, 4, 8 };
    while (made < n && !in->bad) {
        unsigned command = decode_in(&b[0], &commands, length < 4 ? 0 : length < 7 ? 1 : length < 16 ? 2 : 3);
        size_t literal_count = runs[command / 32].base + take(&b[0], runs[command / 32].extra);
        if (b[0].bad || literal_count > n - made) return false;
        for (size_t i = 0; i < literal_count; i++, made++)
            raw[made] = (byte)decode_in(&b[2], &literals, i > 0 ? raw[made - 1]
                                        : recent[0] <= made ? 256U + raw[made - recent[0]] : 256);
        if (made == n) break;
        length = copies[command % 32].base + take(&b[0], copies[command % 32].extra);
        unsigned context = (unsigned)lesser(length - 2, 3) + (literal_count == 0 ? 4 : 0);
        if (b[0].bad || length > n - made || distance_of(&b[1], &distances, context, fine, recent) > made)
            return false;
        for (size_t i = 0; i < length; i++, made++)
            raw[made] = raw[made - recent[0]];
    }
    return !in->bad && used_up(&b[0]) && used_up(&b[1]) && used_up(&b[2]);
}

/* ---- segment.md: branches -------------------------------------------------------------------------------------- */

static bool is_field(const byte *at, size_t free) /* `free` bytes before it belong to no other field */
{
    return at[-1] == 0xE8 || at[-1] == 0xE9 || (free >= 2 && at[-2] == 0x0F && (at[-1] & 0xF0) == 0x80) ||
           (free >= 3 && (at[-1] & 0xC7) == 0x05 && (at[-2] == 0x8B || at[-2] == 0x8D) && (at[-3] & 0xF8) == 0x48);
}

static void turn_branches_back(byte *raw, size_t n)
{
    size_t from = 0;
    for (size_t a = 1; a + 4 <= n; a++) {
        if (!is_field(raw + a, a - from)) continue;
        if (raw[a + 3] == 0x00 || raw[a + 3] == 0xFF) {
            uint32_t value = (uint32_t)(get(raw + a, 4) - a) & 0x1FFFFFF;
            put(raw + a, (value & 0x1000000) != 0 ? value | 0xFE000000 : value, 4);
        }
        from = a + 4;
        a += 4;
    }
}

/* ---- segment.md: samples --------------------------------------------------------------------------------------- */

struct grid {
    unsigned width, predictor, channels, row;
    bool big_endian, floats, leaning;
    size_t head, pixels;
    uint32_t *x; /* residuals, then numbers */
};

static int64_t signed_of(uint32_t value, unsigned bits)
{
    uint32_t top = (uint32_t)1 << (bits - 1);
    return (int64_t)(value & (top - 1)) - (int64_t)(value & top);
}

static int64_t number_at(const struct grid *g, size_t i) /* as it counts in predictions */
{
    return g->width == 1 ? (int64_t)g->x[i] : signed_of(g->x[i], 8 * g->width);
}

static int64_t wrap(int64_t value) /* round at 32 bits, with sign */
{
    return signed_of((uint32_t)((uint64_t)value & LOW32), 32);
}

static int64_t floor_of(int64_t value, int64_t by) { return value >= 0 ? value / by : -((by - 1 - value) / by); }

static int64_t prediction(const struct grid *g, size_t i)
{
    size_t c = g->channels;
    if (i < c || g->predictor == 8) return 0;
    int64_t W = number_at(g, i - c);
    if (g->predictor == 6 && i >= 2 * c) return wrap(2 * W - number_at(g, i - 2 * c));
    if (g->predictor == 7 && i >= 3 * c)
        return wrap(3 * W - 3 * number_at(g, i - 2 * c) + number_at(g, i - 3 * c));
    if (g->predictor == 0 || g->predictor > 5 || i < g->row + c) return W;
    int64_t N = number_at(g, i - g->row), NW = number_at(g, i - g->row - c), plane = wrap(W + N - NW);
    int64_t low = W < N ? W : N, high = W < N ? N : W;
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
    unsigned i = 0;
    while (i < 15 && steps[i] <= k)
        i++;
    return i;
}

/* The size of a residual of a part of bytes; x may be -2 .. line + 1, and the line above the first one. */
static unsigned size_at(const struct grid *g, const uint32_t *r, size_t pixels, size_t line, long y, long x,
                        unsigned channel)
{
    size_t at = (size_t)y * line + (size_t)x;
    if (y < 0 || x < 0 || (size_t)x >= line || at >= pixels) return 0;
    uint32_t value = r[at * g->channels + channel];
    return (unsigned)lesser(lesser(value, 256 - value), 60);
}

/* One part of numbers of a byte: line after line, within a line channel after channel. */
static void part_of_bytes(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels)
{
    size_t line = g->row > 0 ? g->row / g->channels : 512;
#define SIZE(y, x, channel) size_at(g, r, pixels, line, y, x, channel)
    for (long y = 0; (size_t)y * line < pixels; y++)
        for (unsigned ch = 0; ch < g->channels; ch++)
            for (long x = 0; (size_t)x < line && (size_t)y * line + (size_t)x < pixels && !b->bad; x++) {
                unsigned n = 2 * SIZE(y - 1, x, ch) + SIZE(y - 1, x - 1, ch) + SIZE(y - 1, x + 1, ch);
                unsigned m = ch == 0 ? 2 * SIZE(y - 2, x, 0) + SIZE(y - 1, x - 2, 0) + SIZE(y - 1, x + 2, 0)
                                     : 2 * SIZE(y, x, ch - 1) + SIZE(y, x - 1, ch - 1) + SIZE(y, x + 1, ch - 1);
                r[((size_t)y * line + (size_t)x) * g->channels + ch]
                    = decode_in(b, codes, 16 * level(n) + level(m) + (ch > 0 ? 256 : 0));
            }
#undef SIZE
}

/* One part of wider numbers, in their order. */
static void part_of_wide(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels,
                         byte *tokens)
{
    unsigned mean[8] = { 0 };
    for (size_t i = 0; i < pixels * g->channels && !b->bad; i++) {
        unsigned ch = (unsigned)(i % g->channels), context = mean[ch] / 8;
        if (g->row > 0)
            context = (context + (i >= g->row ? tokens[i - g->row] : 0)) / 2;
        uint32_t token = decode_in(b, codes, context + (ch > 0 ? 128 : 0)), z = token;
        if (token >= 16)
            z = ((4 + token % 4) << (token / 4 - 2)) + take(b, token / 4 - 2);
        r[i] = z % 2 == 0 ? z / 2 : ~(z / 2);
        tokens[i] = (byte)token;
        mean[ch] = mean[ch] - mean[ch] / 8 + token;
    }
}

static void numbers_from(struct grid *g, byte *to) /* residuals become numbers, numbers become bytes */
{
    uint32_t mask = 0xFFFFFFFF >> (32 - 8 * g->width), residual = 0;
    for (size_t i = 0; i < g->pixels * g->channels; i++, to += g->width) {
        residual = g->leaning && i % g->channels != 0 ? residual + g->x[i] : g->x[i];
        uint32_t value = g->x[i] = (residual + (uint32_t)((uint64_t)prediction(g, i) & LOW32)) & mask;
        value = g->floats && (value & 0x80000000) != 0 ? value ^ 0x7FFFFFFF : value;
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
    if (in->bad || kind > 31 || more > 127 || g->predictor > 8 || g->head > 16383 || g->head > n ||
        (g->floats && g->width != 4) || (g->leaning && g->channels == 1) ||
        (g->row > 0 && (g->row % g->channels != 0 || g->row <= g->channels || g->row > 32768)) ||
        (g->row == 0 && g->predictor >= 1 && g->predictor <= 5))
        return false;
    g->pixels = (n - g->head) / (g->channels * g->width);
    return g->pixels >= 4;
}

static bool samples(struct bytes *in, byte *raw, size_t n)
{
    static struct codes codes;
    struct grid g;
    if (!read_grid(in, &g, n)) return false;
    size_t quarter = g.pixels / 4, sizes[3];
    for (size_t i = 0; i < n; i++)
        if (i < g.head || i >= g.head + g.pixels * g.channels * g.width)
            raw[i] = (byte)one_byte(in);
    struct bits tables = cut_bits(in, in->left);
    read_codes(&tables, &codes, CONTEXTS, 256, CODES);
    end_bits(in, &tables);
    for (unsigned i = 0; i < 3; i++)
        sizes[i] = number(in);
    for (unsigned i = 0; i < codes.count && g.width > 1 && !in->bad; i++)
        for (unsigned j = 0; j < WORDS; j++)
            in->bad |= codes.code[i].symbol[j] >= 128;
    g.x = room(NULL, g.pixels * g.channels * sizeof g.x[0]);
    byte *tokens = room(NULL, g.pixels * g.channels);
    for (unsigned i = 0; i < 4 && !in->bad; i++) {
        size_t part = i < 3 ? quarter : g.pixels - 3 * quarter;
        struct bits b = cut_bits(in, i < 3 ? sizes[i] : in->left);
        if (g.width == 1)
            part_of_bytes(&b, &codes, &g, g.x + i * quarter * g.channels, part);
        else
            part_of_wide(&b, &codes, &g, g.x + i * quarter * g.channels, part, tokens);
        in->bad |= !used_up(&b);
    }
    if (!in->bad)
        numbers_from(&g, raw + g.head);
    free(g.x);
    free(tokens);
    return !in->bad;
}

static bool decode_segment(const byte *coded, size_t bytes, byte *raw, size_t n)
{
    struct bytes in = { coded, bytes, false };
    unsigned method = one_byte(&in), transform = one_byte(&in);
    if (in.bad || transform > 1 || (transform == 1 && method != 3)) return false;
    if (method == 0 && in.left == n)
        memcpy(raw, in.from, n);
    else if (method == 1 && in.left == 1)
        memset(raw, *in.from, n);
    else if (method == 2)
        return stretches(&in, raw, n);
    else if (method == 3 && matched(&in, raw, n)) {
        if (transform == 1)
            turn_branches_back(raw, n);
    } else
        return method == 4 && samples(&in, raw, n);
    return true;
}

/* ---- stream.md and catalogue.md: which records there are ------------------------------------------------------- */

enum { TITLE = 1, SPEC = 2, READER = 3, BATCH = 4, SEGMENT = 5, SUMS = 6, INDEX = 7, COLOPHON = 8, BODY_MAX = 1 << 24 };

static void add(struct list *list, uint64_t key, uint64_t at, uint64_t bytes, uint64_t raw)
{
    struct ref ref = { key, at, (uint32_t)bytes, (uint32_t)raw };
    if (bytes > BODY_MAX || raw > 1 << 20) return;
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

static void put_in_order(struct list *list) /* each ref once */
{
    size_t kept = 0;
    if (list->count > 0)
        qsort(list->refs, list->count, sizeof list->refs[0], by_key);
    for (size_t i = 0; i < list->count; i++)
        if (kept == 0 || by_key(&list->refs[kept - 1], &list->refs[i]) != 0)
            list->refs[kept++] = list->refs[i];
    list->count = kept;
}

static size_t refs_up_to(const struct list *list, uint64_t key) /* how many have no greater key */
{
    size_t low = 0, high = list->count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (list->refs[middle].key <= key)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

/* An INDEX holds a BATCH again, which has a hash of its own, and tells where segments and sums are. */
static void note_index(struct container *c, uint64_t at, uint64_t bytes)
{
    byte *body = room(NULL, bytes), first[8];
    read_stream(c, at, body, bytes);
    uint64_t batch = get(body + 40, 4), segments = get(body + 44, 4), sums_at = get(body + 48, 8);
    if (batch >= 40 && batch <= bytes - 80)
        add(&c->batches, get(body + 96, 8), at + 80, batch, 0);
    if (80 + batch + 24 * segments == bytes && hash_is(body, body + 16, (size_t)bytes - 16)) {
        for (const byte *place = body + 80 + batch; place < body + bytes; place += 24)
            add(&c->segments, get(place, 8), get(place + 8, 8) + 32, get(place + 20, 4), get(place + 16, 4));
        if (sums_at != 0 && read_stream(c, sums_at + 32 + 24, first, 8))
            add(&c->sums, get(first, 8), sums_at + 32, get(body + 56, 4), 0);
    }
    free(body);
}

static void note_colophon(struct container *c, uint64_t at, uint64_t bytes)
{
    char text[2049] = "";
    c->colophon_there = read_stream(c, at, (byte *)text, lesser(bytes, 2048));
    const char *items = strstr(text, "\nitems: ");
    c->items_told = items == NULL ? 0 : strtoull(items + 8, NULL, 10);
}

static void note_record(struct container *c, unsigned type, uint64_t at, uint64_t bytes)
{
    byte head[32];
    if (bytes < 32 || bytes > BODY_MAX || (type == INDEX && bytes < 80)) return;
    if (type == TITLE || type == SPEC || type == READER)
        add(&c->texts, type, at, bytes, 0);
    else if (type == BATCH && bytes >= 40 && read_stream(c, at, head, 32))
        add(&c->batches, get(head + 16, 8), at, bytes, 0);
    else if (type == SEGMENT && read_stream(c, at, head, 32))
        add(&c->segments, get(head + 8, 8), at, bytes, get(head, 4));
    else if (type == SUMS && read_stream(c, at, head, 32))
        add(&c->sums, get(head + 24, 8), at, bytes, 0);
    else if (type == INDEX)
        note_index(c, at, bytes);
    else if (type == COLOPHON)
        note_colophon(c, at, bytes);
}

static void walk(struct container *c)
{
    uint64_t at = 0;
    byte head[32];
    while (at + 32 <= c->stream_bytes && !c->colophon_there) {
        bool there = read_stream(c, at, head, 32);
        uint64_t bytes = get(head + 8, 8), left = c->stream_bytes - at - 32;
        if (there && memcmp(head, "FREC", 4) == 0 && get(head + 16, 8) == at &&
            get(head + 24, 8) == hash_of(head, 24).low && bytes <= left) {
            note_record(c, (unsigned)get(head + 4, 2), at + 32, bytes);
            at += (bytes + 31) / 32 * 32;
        }
        at = there ? at + 32 : (at / PAYLOAD + 1) * PAYLOAD; /* a lost block: go on behind it */
    }
    put_in_order(&c->batches);
    put_in_order(&c->segments);
    put_in_order(&c->sums);
    put_in_order(&c->texts);
}

static uint64_t count_blocks(struct container *c) /* that begin in the file; the title page is none of them */
{
    uint64_t there = 0, step = 1;
    byte any[1];
    while (step < UINT64_C(1) << 48 && read_at(c, BLOCK * step, any, 1))
        step *= 2;
    for (; step > 0; step /= 2)
        if (read_at(c, BLOCK * (there + step), any, 1))
            there += step;
    return there;
}

/* Finds the layout and all records. False when there is not one sound block. */
static bool open_container(struct container *c, FILE *file)
{
    byte block[BLOCK];
    struct tag tag;
    memset(c, 0, sizeof *c);
    c->file = file;
    c->sheet = c->payload_of = UINT64_MAX;
    c->raw = room(NULL, 1 << 20);
    c->blocks = count_blocks(c);
    uint64_t number = 0;
    while (number < c->blocks && !read_block(c, number, block, &tag))
        number++;
    if (number == c->blocks) return false;
    c->known = tag;
    c->sheet_data = (uint64_t)tag.full.k * tag.full.depth;
    c->sheet_blocks = c->sheet_data + (uint64_t)tag.full.m * tag.full.depth;
    c->rebuilt = room(NULL, c->sheet_data * sizeof c->rebuilt[0]);
    for (uint64_t i = 0; i < c->sheet_data; i++)
        c->rebuilt[i] = NULL;
    uint64_t sheet = (c->blocks - 1) / c->sheet_blocks;
    while (!enter_sheet(c, sheet) && sheet > 0) /* what is behind the last sound block does not count */
        sheet--;
    c->stream_bytes = (sheet * c->sheet_data + c->t) * PAYLOAD;
    c->damaged |= c->blocks < sheet * c->sheet_blocks + c->t + (uint64_t)c->shape.m * c->shape.depth;
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

/* ---- catalogue.md: items --------------------------------------------------------------------------------------- */

struct item {
    uint64_t number, content_at, size;
    const byte *pax, *extents; /* of these 16 bytes each */
    uint32_t pax_bytes, extent_count;
    bool has_content, listed, in_front;
    char ustar_path[257], ustar_link[101];
    const char *path, *link; /* not ended by a zero */
    size_t path_bytes, link_bytes;
    char type;
    unsigned mode;
    int64_t seconds; /* of the last change, since 1970 */
};

static uint64_t octal(const byte *field, unsigned bytes)
{
    uint64_t value = 0;
    for (unsigned i = 0; i < bytes; i++)
        value = field[i] >= '0' && field[i] <= '7' ? value << 3 | (field[i] - '0') : value;
    return value;
}

static int64_t seconds_of(const char *text, size_t bytes) /* a time such as -12.25, rounded down */
{
    size_t i = bytes > 0 && *text == '-';
    int64_t seconds = 0;
    bool minus = i > 0, fraction = false;
    for (; i < bytes && text[i] >= '0' && text[i] <= '9' && seconds < INT64_C(1) << 50; i++)
        seconds = 10 * seconds + (text[i] - '0');
    for (; i < bytes; i++)
        fraction |= text[i] >= '1' && text[i] <= '9';
    return minus ? -seconds - fraction : seconds;
}

static bool is_key(const char *from, const char *to, const char *key)
{
    return (size_t)(to - from) == strlen(key) && memcmp(from, key, strlen(key)) == 0;
}

/* Records of an extended header: "LENGTH KEYWORD=VALUE\n", LENGTH counting all of it. */
static void read_extended(struct item *item, const char *at, size_t left)
{
    while (left > 0) {
        size_t length = 0, digits = 0;
        for (; digits < left && digits < 8 && at[digits] >= '0' && at[digits] <= '9'; digits++)
            length = 10 * length + (size_t)(at[digits] - '0');
        const char *key = at + digits + 1;
        if (digits == 0 || length > left || length < digits + 3) return;
        const char *equals = memchr(key, '=', length - digits - 2), *end = at + length - 1;
        if (equals == NULL) return;
        const char *value = equals + 1;
        if (is_key(key, equals, "path")) {
            item->path = value;
            item->path_bytes = (size_t)(end - value);
        } else if (is_key(key, equals, "linkpath")) {
            item->link = value;
            item->link_bytes = (size_t)(end - value);
        } else if (is_key(key, equals, "mtime")) {
            item->seconds = seconds_of(value, (size_t)(end - value));
        }
        at += length;
        left -= length;
    }
}

/* POSIX.1-2001, pax interchange format: an extended header where one is needed, then the ustar header. */
static bool read_pax(struct item *item)
{
    const byte *ustar = item->pax;
    uint64_t left = item->pax_bytes, extended = 0, padded = 0;
    if (left >= 512 && ustar[156] == 'x') {
        extended = lesser(octal(ustar + 124, 12), left);
        padded = 512 + (extended + 511) / 512 * 512;
    }
    if (left < padded + 512) return false;
    ustar += padded;
    memcpy(item->ustar_link, ustar + 157, 100);
    memcpy(item->ustar_path, ustar + 345, 155);
    item->ustar_link[100] = item->ustar_path[155] = '\0';
    strcat(item->ustar_path, item->ustar_path[0] != '\0' ? "/" : "");
    strncat(item->ustar_path, (const char *)ustar, 100);
    item->path = item->ustar_path;
    item->path_bytes = strlen(item->path);
    item->link = item->ustar_link;
    item->link_bytes = strlen(item->link);
    item->type = (char)ustar[156];
    item->mode = (unsigned)octal(ustar + 100, 8) & 07777;
    item->seconds = (int64_t)octal(ustar + 136, 12);
    if (extended > 0)
        read_extended(item, (const char *)item->pax + 512, (size_t)extended);
    return true;
}

static uint64_t extent_at(const struct item *item, uint32_t i)
{
    return item->listed ? get(item->extents + 16 * (size_t)i, 8) : 0;
}

static uint64_t extent_bytes(const struct item *item, uint32_t i)
{
    return item->listed ? get(item->extents + 16 * (size_t)i + 8, 8) : item->size;
}

static uint64_t largest_holes = UINT64_C(1) << 43;

static void put_octal(byte *field, unsigned digits, uint64_t value)
{
    for (; digits > 0; value >>= 3)
        field[--digits] = (byte)('0' + (value & 7));
}

static void put_sum(byte *header) /* over all bytes, those of the sum taken as spaces */
{
    unsigned sum = 8 * ' ';
    for (unsigned i = 0; i < 512; i++)
        sum += i < 148 || i >= 156 ? header[i] : 0u;
    put_octal(header + 148, 6, sum);
}

/*
 * Table 2. The entry at the front of `left` bytes: how long it is; 0 if it breaks a rule. *stored: content it takes.
 * Digits that are left out of its headers are put back.
 */
static size_t read_entry(byte *entry, size_t left, struct item *item, uint64_t *stored)
{
    if (left < 24) return 0;
    uint64_t bytes = get(entry, 4), end = 0;
    unsigned flags = (unsigned)get(entry + 12, 4);
    item->pax_bytes = (uint32_t)get(entry + 4, 4);
    item->extent_count = (uint32_t)get(entry + 8, 4);
    item->size = get(entry + 16, 8);
    item->has_content = (flags & 1) != 0;
    item->listed = (flags & 2) != 0;
    item->in_front = (flags & 8) != 0;
    if (bytes > left || bytes > 2097152 || item->extent_count > 65536 || (!item->listed && item->extent_count > 0) ||
        24 + 16 * (uint64_t)item->extent_count + item->pax_bytes != bytes)
        return 0;
    if ((flags & 4) != 0 && item->pax_bytes >= 512) {
        byte *last = entry + bytes - 512;
        put_octal(last + 124, 11, item->size);
        put_sum(last);
        put_sum(entry + 24 + 16 * item->extent_count);
    }
    item->extents = entry + 24;
    item->pax = entry + 24 + 16 * item->extent_count;
    item->extent_count = item->listed ? item->extent_count : item->has_content && item->size > 0;
    *stored = 0;
    for (uint32_t i = 0; i < item->extent_count; i++) {
        uint64_t at = extent_at(item, i), length = extent_bytes(item, i);
        if (length == 0 || at < end || at > item->size || length > item->size - at) return 0;
        end = at + length;
        *stored += length;
    }
    return (item->listed && item->size - *stored > largest_holes) || !read_pax(item) ? 0 : (size_t)bytes;
}

/* Table 1. The entries of a batch, decoded; NULL when this copy of it is lost. */
static byte *read_batch(struct container *c, const struct ref *ref, uint64_t *items, uint64_t *place, size_t *bytes)
{
    const byte *body = c->body = room(c->body, ref->bytes);
    c->segment = NULL;
    if (ref->bytes < 40 || !read_stream(c, ref->at, c->body, ref->bytes) || !hash_is(body, body + 16, ref->bytes - 16))
        return NULL;
    *place = get(body + 24, 8);
    *items = get(body + 32, 4);
    *bytes = (size_t)lesser(get(body + 36, 4), 8388608);
    byte *entries = room(NULL, *bytes);
    const byte *at = body + 40, *end = body + ref->bytes;
    for (uint64_t done = 0; done < *bytes; done += 1048576) {
        uint64_t coded = end - at >= 4 ? get(at, 4) : UINT64_MAX;
        if (coded > (uint64_t)(end - at) - 4 ||
            !decode_segment(at + 4, (size_t)coded, entries + done, (size_t)lesser(*bytes - done, 1048576))) {
            free(entries);
            return NULL;
        }
        at += 4 + coded;
    }
    return entries;
}

/* Table 3. The digest of an item; false when there is none, or it is lost. */
static bool sum_of(struct container *c, uint64_t number, byte sum[32])
{
    size_t count = refs_up_to(&c->sums, number);
    const struct ref *ref = count == 0 ? NULL : &c->sums.refs[count - 1];
    if (ref == NULL || ref->bytes < 32) return false;
    if (c->sum != ref) {
        c->sum = ref;
        c->sum_body = room(c->sum_body, ref->bytes);
        if (!read_stream(c, ref->at, c->sum_body, ref->bytes) ||
            !hash_is(c->sum_body, c->sum_body + 16, ref->bytes - 16) ||
            32 + 34 * get(c->sum_body + 16, 4) != ref->bytes)
            memset(c->sum_body, 0, 32);
    }
    uint64_t n = get(c->sum_body + 16, 4), item = get(c->sum_body + 24, 8), i = 0;
    for (; i < n; i++) {
        item += get(c->sum_body + 32 + 2 * i, 2);
        if (item >= number) break;
    }
    if (i == n || item != number) return false;
    memcpy(sum, c->sum_body + 32 + 2 * n + 32 * i, 32);
    return true;
}

/* The good bytes of content space from `at` on; NULL when they are lost. *until: how far that goes. */
static const byte *content_at(struct container *c, uint64_t at, uint64_t *until)
{
    size_t count = refs_up_to(&c->segments, at);
    const struct ref *ref = count == 0 ? NULL : &c->segments.refs[count - 1];
    *until = count < c->segments.count ? c->segments.refs[count].key : UINT64_MAX;
    if (ref == NULL || at - ref->key >= ref->raw) return NULL;
    *until = ref->key + ref->raw;
    if (c->segment != ref) {
        byte *body = c->body = room(c->body, ref->bytes);
        c->segment = ref;
        c->segment_good = ref->bytes > 32 && read_stream(c, ref->at, body, ref->bytes) && get(body, 4) == ref->raw &&
                          get(body + 8, 8) == ref->key &&
                          decode_segment(body + 32, ref->bytes - 32, c->raw, ref->raw) &&
                          hash_is(body + 16, c->raw, ref->raw);
    }
    return c->segment_good ? c->raw + (at - ref->key) : NULL;
}

/* ---- giving back ----------------------------------------------------------------------------------------------- */

struct task { char mode; const char *path; FILE *out; uint64_t items, lost, unknown; bool failed; };

/* Bytes of an item; zeros when from is NULL. Nobody compares the digest of an item that has lost bytes. */
static void give(struct task *task, FILE *out, struct sha *sha, const byte *from, uint64_t bytes)
{
    static const byte zeros[BLOCK];
    while (bytes > 0 && !task->failed && (out != NULL || sha != NULL)) {
        size_t step = (size_t)lesser(bytes, from == NULL ? sizeof zeros : bytes);
        if (sha != NULL)
            sha_add(sha, from == NULL ? zeros : from, step);
        task->failed |= out != NULL && fwrite(from == NULL ? zeros : from, 1, step, out) != step;
        bytes -= step;
    }
}

/* The content of an item, to out if that is not NULL. True when every byte is there and the digest is right. */
static bool give_content(struct container *c, struct task *task, const struct item *item, FILE *out)
{
    uint64_t at = 0, place = item->content_at, until;
    byte digest[32], sum[32];
    struct sha sum_so_far, *sha = &sum_so_far;
    sha_start(sha);
    for (uint32_t i = 0; i < item->extent_count; i++) {
        uint64_t end = extent_at(item, i) + extent_bytes(item, i);
        give(task, out, sha, NULL, extent_at(item, i) - at);
        for (at = extent_at(item, i); at < end && !task->failed;) {
            const byte *bytes = content_at(c, place, &until);
            uint64_t step = lesser(end - at, until - place);
            if (bytes == NULL) {
                printf("    lost: bytes %" PRIu64 " to %" PRIu64 "\n", at, at + step - 1);
                sha = NULL;
            }
            give(task, out, sha, bytes, step);
            at += step;
            place += step;
        }
    }
    give(task, out, sha, NULL, item->size - at);
    if (sha == NULL) {
        if (!sum_of(c, item->number, sum))
            printf("    it has no SHA-256 either: perhaps its source failed while the container was made\n");
        return false;
    }
    sha_end(sha, digest);
    bool known = sum_of(c, item->number, sum), good = !known || memcmp(digest, sum, 32) == 0;
    if (!known)
        printf("    its SHA-256 is lost; each of its bytes satisfies the hash of a segment\n");
    if (!good)
        printf("    LOST: its SHA-256 is not the one in the catalogue\n");
    return good;
}

static void put_date(int64_t seconds) /* in the Gregorian calendar, UTC */
{
    static const int lengths[12] = { 31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31 };
    int64_t day = floor_of(seconds, 86400), cycles = floor_of(day, 146097), year = 1970 + 400 * cycles;
    int second = (int)(seconds - 86400 * day), month = 0, leap;
    for (day -= 146097 * cycles;; year++) {
        leap = (year % 4 == 0 && year % 100 != 0) || year % 400 == 0;
        if (day < 365 + leap) break;
        day -= 365 + leap;
    }
    for (; day >= lengths[month] + (month == 1 && leap); month++)
        day -= lengths[month] + (month == 1 && leap);
    printf("%04" PRId64 "-%02d-%02dT%02d:%02d:%02dZ", year, month + 1, (int)day + 1, second / 3600, second / 60 % 60,
           second % 60);
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
    putchar(item->type >= '0' && item->type <= '6' ? "-hlcbdp"[item->type - '0'] : '-');
    for (unsigned i = 0; i < 9; i++)
        putchar((item->mode >> (8 - i) & 1) != 0 ? "rwx"[i % 3] : '-');
    printf("  ");
    put_date(item->seconds);
    printf("  %12" PRIu64 "  ", item->has_content ? item->size : 0);
    put_name(item->path, item->path_bytes);
    if (item->link_bytes > 0) {
        printf(" -> ");
        put_name(item->link, item->link_bytes);
    }
    putchar('\n');
}

static bool leads_down(const char *name, size_t bytes) /* and nowhere else */
{
    if (bytes == 0 || *name == '/' || memchr(name, '\0', bytes) != NULL) return false;
    for (size_t i = 0, from = 0; i <= bytes; i++)
        if (i == bytes || name[i] == '/') {
            if (i - from == 2 && memcmp(name + from, "..", 2) == 0) return false;
            from = i + 1;
        }
    return true;
}

static FILE *new_file(struct task *task, const char *path) /* never over one that is there */
{
    FILE *file = fopen(path, "rb");
    bool there = file != NULL;
    if (there)
        fclose(file);
    file = there ? NULL : fopen(path, "wb");
    if (file == NULL)
        fprintf(stderr, "reader: cannot write %s: %s\n", path, there ? "it is there already" : "is its folder there?");
    task->failed |= file == NULL;
    return file;
}

static void end_file(struct task *task, FILE *file)
{
    if (fclose(file) != 0)
        task->failed = true;
    if (task->failed)
        fprintf(stderr, "reader: writing failed: is there room?\n");
}

/* A file in the folder: number and last part of the name, but for characters that some system could object to. */
static void give_file(struct container *c, struct task *task, const struct item *item)
{
    char path[4096], damaged[4200];
    size_t from = item->path_bytes;
    while (from > 0 && item->path_bytes - from < 60 && item->path[from - 1] != '/')
        from--;
    int at = snprintf(path, sizeof path - 80, "%s/%06" PRIu64 "-", task->path, item->number);
    if (at < 0 || (size_t)at >= sizeof path - 80) {
        task->failed = true;
        return;
    }
    for (; from < item->path_bytes; from++) {
        char letter = item->path[from];
        bool plain = (letter >= 'a' && letter <= 'z') || (letter >= 'A' && letter <= 'Z') ||
                     (letter >= '0' && letter <= '9') || letter == '.' || letter == '-';
        path[at++] = plain ? letter : '_';
    }
    path[at] = '\0';
    FILE *file = new_file(task, path);
    if (file == NULL) return;
    bool good = give_content(c, task, item, file);
    end_file(task, file);
    snprintf(damaged, sizeof damaged, "%s.damaged", path);
    if (!good && rename(path, damaged) != 0)
        fprintf(stderr, "reader: %s IS DAMAGED, and could not be given another name\n", path);
    printf("    is %s\n", good ? path : damaged);
    task->lost += !good;
}

/* A pax archive is headers and contents, each padded to 512. An item that is not whole is left out. */
static void give_member(struct container *c, struct task *task, const struct item *item)
{
    static const byte zeros[512];
    bool down = leads_down(item->path, item->path_bytes) &&
                (item->type != '1' || leads_down(item->link, item->link_bytes));
    if (!down || (item->has_content && !give_content(c, task, item, NULL))) {
        printf("    left out: %s\n", down ? "it is not whole" : "its name leads out of the folder");
        task->lost++;
        return;
    }
    task->failed |= fwrite(item->pax, 1, item->pax_bytes, task->out) != item->pax_bytes;
    if (item->has_content) {
        size_t padding = (size_t)((512 - item->size % 512) % 512);
        task->lost += !give_content(c, task, item, task->out);
        task->failed |= fwrite(zeros, 1, padding, task->out) != padding;
    }
}

static void do_item(struct container *c, struct task *task, const struct item *item)
{
    task->items++;
    list_item(item);
    if (task->mode == 't')
        give_member(c, task, item);
    else if (task->mode == 'x' && item->has_content)
        give_file(c, task, item);
    else if (task->mode == 'c' && item->has_content)
        task->lost += !give_content(c, task, item, NULL);
}

static void miss(struct task *task, uint64_t from, uint64_t to)
{
    if (from < to)
        printf("LOST from the catalogue: items %" PRIu64 " to %" PRIu64 "\n", from, to - 1);
    task->unknown += from < to ? to - from : 0;
}

/* How much of a batch's content lies in front of the rest. */
static uint64_t front_of(byte *entries, size_t bytes, uint64_t items)
{
    uint64_t front = 0, stored;
    struct item item;
    for (size_t at = 0, step; items > 0; items--, at += step) {
        step = read_entry(entries + at, bytes - at, &item, &stored);
        if (step == 0) break;
        front += item.in_front ? stored : 0;
    }
    return front;
}

/* Items in the order of their numbers, each from the first copy of its batch that is whole. */
static void do_items(struct container *c, struct task *task)
{
    uint64_t next = 0, items, place, front, stored;
    size_t bytes, step;
    for (size_t r = 0; r < c->batches.count && !task->failed; r++) {
        const struct ref *ref = &c->batches.refs[r];
        byte *entries = ref->key < next ? NULL : read_batch(c, ref, &items, &place, &bytes);
        if (entries == NULL) continue;
        miss(task, next, ref->key);
        next = ref->key;
        front = place;
        place += front_of(entries, bytes, items);
        for (size_t at = 0; items > 0 && !task->failed; items--, at += step) {
            struct item item = { .number = next };
            step = read_entry(entries + at, bytes - at, &item, &stored);
            if (step == 0) break;
            item.content_at = item.in_front ? front : place;
            *(item.in_front ? &front : &place) += stored;
            do_item(c, task, &item);
            next++;
        }
        free(entries);
    }
    if (!task->failed)
        miss(task, next, c->items_told);
}

/* The title page, the specification, the source of this program: into the folder, or only read. */
static void do_texts(struct container *c, struct task *task)
{
    for (size_t i = 0; i < c->texts.count && !task->failed; i++) {
        const struct ref *ref = &c->texts.refs[i];
        char path[4096];
        snprintf(path, sizeof path, "%s/%s", task->path == NULL ? "" : task->path,
                 ref->key == TITLE ? "title.txt" : ref->key == SPEC ? "specification.txt" : "reader.c");
        byte *text = room(NULL, ref->bytes);
        bool whole = read_stream(c, ref->at, text, ref->bytes);
        FILE *file = task->mode == 'x' ? new_file(task, path) : NULL;
        if (file != NULL) {
            task->failed |= fwrite(text, 1, ref->bytes, file) != ref->bytes;
            end_file(task, file);
        }
        if (file != NULL || !whole)
            printf("%s%s\n", path, whole ? "" : " HAS GAPS");
        task->lost += !whole;
        byte page[BLOCK];
        if (ref->key == TITLE && whole && ref->bytes == BLOCK &&
            (!read_at(c, 0, page, BLOCK) || memcmp(page, text, BLOCK) != 0)) {
            printf("the title page is damaged; -x writes it as it was\n");
            c->damaged = true;
        }
        free(text);
    }
}

static int run(struct container *c, struct task *task)
{
    static const byte zeros[1024];
    do_items(c, task);
    if (task->mode == 'x' || task->mode == 'c')
        do_texts(c, task);
    if (task->mode == 't') {
        task->failed |= fwrite(zeros, 1, sizeof zeros, task->out) != sizeof zeros;
        end_file(task, task->out);
    }
    bool whole = task->lost + task->unknown == 0 && c->colophon_there;
    printf("%" PRIu64 " items", task->items);
    if (task->lost > 0)
        printf("; %" PRIu64 " ARE NOT WHOLE", task->lost);
    if (task->unknown > 0)
        printf("; %" PRIu64 " ARE LOST FROM THE CATALOGUE", task->unknown);
    if (!c->colophon_there)
        printf("; the end is lost, so THERE MAY HAVE BEEN MORE");
    if (c->damaged)
        printf("; damaged blocks were met%s", whole ? " and mended" : "");
    printf("\n");
    if (task->failed) return CANNOT_CREATE;
    return !whole ? LOSS : c->damaged ? SAFE : 0;
}

int main(int count, char **words)
{
    struct task task = { .mode = 'l', .path = count > 3 ? words[3] : NULL };
    if (count > 2 && words[2][0] == '-')
        task.mode = words[2][1];
    if (count < 2 || strchr("lctx", task.mode) == NULL || (count > 2 && strlen(words[2]) != 2) ||
        count != (task.mode == 'l' ? 2 : task.mode == 'c' ? 3 : 4)) {
        fprintf(stderr, "usage: reader FILE [-c | -t ARCHIVE | -x FOLDER]\n");
        return USAGE;
    }
    FILE *file = fopen(words[1], "rb");
    if (file == NULL) {
        fprintf(stderr, "reader: cannot open %s\n", words[1]);
        return NO_INPUT;
    }
    static struct container c;
    int status = BAD_DATA;
    if (!open_container(&c, file))
        fprintf(stderr, "reader: %s holds no sound block of format 1\n", words[1]);
    else if (task.mode == 't' && (task.out = new_file(&task, task.path)) == NULL)
        status = CANNOT_CREATE;
    else
        status = run(&c, &task);
    close_container(&c);
    fclose(file);
    return status;
}
