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
 *     reader FILE -t ARCHIVE    writes a pax archive of what is whole; tar can unpack it, with names, dates and modes
 *     reader FILE -d ARCHIVE    writes one of the files that are not whole, with zeros for what is lost
 *     reader FILE -1            prints the title page; -2, the specification; -3, the source of this program
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

static uint64_t get(const byte *from, unsigned bytes) { /* numbers in a container are little-endian */
    uint64_t value = 0;
    while (bytes-- > 0) value = value << 8 | from[bytes];
    return value;
}

static void put(byte *to, uint64_t value, unsigned bytes) {
    for (; bytes-- > 0; value >>= 8) *to++ = (byte)(value & 0xFF);
}

static uint64_t swap(uint64_t value, unsigned bytes) { /* its bytes in the opposite order */
    uint64_t swapped = 0;
    for (; bytes > 0; bytes--, value >>= 8) swapped = swapped << 8 | (value & 0xFF);
    return swapped;
}

static uint64_t lesser(uint64_t a, uint64_t b) { return a < b ? a : b; }

static int complain(int status, const char *what, const char *name) {
    fprintf(stderr, "reader: %s %s\n", what, name);
    return status;
}

static void *room(void *old, uint64_t bytes) { /* memory, or the end of the program */
    void *memory = bytes > (size_t)-1 / 2 ? NULL : realloc(old, bytes > 0 ? (size_t)bytes : 1);
    if (memory == NULL) exit(complain(BAD_DATA, "there is not enough memory for", "what it holds"));
    return memory;
}

/* ---- hash.md: XXH3-128, in the letters of that page ------------------------------------------------------------ */

static const uint64_t P1 = UINT64_C(0x9E3779B185EBCA87), P2 = UINT64_C(0xC2B2AE3D27D4EB4F),
                      P3 = UINT64_C(0x165667B19E3779F9), P4 = UINT64_C(0x85EBCA77C2B2AE63),
                      P5 = UINT64_C(0x27D4EB2F165667C5), M1 = UINT64_C(0x165667919E3779F9),
                      M2 = UINT64_C(0x9FB21C651E98DF25), LOW32 = UINT64_C(0xFFFFFFFF),
                      Q1 = UINT64_C(0x9E3779B1), Q2 = UINT64_C(0x85EBCA77), Q3 = UINT64_C(0xC2B2AE3D);

static const byte S[193] =
    "\xB8\xFE\x6C\x39\x23\xA4\x4B\xBE\x7C\x01\x81\x2C\xF7\x21\xAD\x1C\xDE\xD4\x6D\xE9\x83\x90\x97\xDB"
    "\x72\x40\xA4\xA4\xB7\xB3\x67\x1F\xCB\x79\xE6\x4E\xCC\xC0\xE5\x78\x82\x5A\xD0\x7D\xCC\xFF\x72\x21"
    "\xB8\x08\x46\x74\xF7\x43\x24\x8E\xE0\x35\x90\xE6\x81\x3A\x26\x4C\x3C\x28\x52\xBB\x91\xC3\x00\xCB"
    "\x88\xD0\x65\x8B\x1B\x53\x2E\xA3\x71\x64\x48\x97\xA2\x0D\xF9\x4E\x38\x19\xEF\x46\xA9\xDE\xAC\xD8"
    "\xA8\xFA\x76\x3F\xE3\x9C\x34\x3F\xF9\xDC\xBB\xC7\xC7\x0B\x4F\x1D\x8A\x51\xE0\x4B\xCD\xB4\x59\x31"
    "\xC8\x9F\x7E\xC9\xD9\x78\x73\x64\xEA\xC5\xAC\x83\x34\xD3\xEB\xC3\xC5\x81\xA0\xFF\xFA\x13\x63\xEB"
    "\x17\x0D\xDD\x51\xB7\xF0\xDA\x49\xD3\x16\x55\x26\x29\xD4\x68\x9E\x2B\x16\xBE\x58\x7D\x47\xA1\xFC"
    "\x8F\xF8\xB8\xD1\x7A\xD0\x31\xCE\x45\xCB\x3A\x8F\x95\x16\x04\x28\xAF\xD7\xFB\xCA\xBB\x4B\x40\x7E";

struct pair { uint64_t low, high; };

static struct pair multiply(uint64_t a, uint64_t b) { /* all 128 bits of the product */
    uint64_t ll = (a & LOW32) * (b & LOW32), lh = (a & LOW32) * (b >> 32);
    uint64_t hl = (a >> 32) * (b & LOW32), hh = (a >> 32) * (b >> 32);
    uint64_t middle = (ll >> 32) + (lh & LOW32) + hl;
    return (struct pair){ middle << 32 | (ll & LOW32), hh + (lh >> 32) + (middle >> 32) };
}

static uint64_t fold(uint64_t a, uint64_t b) {
    struct pair product = multiply(a, b);
    return product.low ^ product.high;
}

static uint64_t mix(uint64_t h) {
    h = (h ^ h >> 37) * M1;
    return h ^ h >> 32;
}

static uint64_t mix64(uint64_t h) {
    h = (h ^ h >> 33) * P2;
    h = (h ^ h >> 29) * P3;
    return h ^ h >> 32;
}

static uint64_t s64(unsigned at) { return get(S + at, 8); }
static uint64_t pair_of(const byte *x, unsigned s) { return fold(get(x, 8) ^ s64(s), get(x + 8, 8) ^ s64(s + 8)); }

static struct pair hash_short(const byte *x, size_t n) { /* sections 3 to 6: up to 16 bytes */
    if (n == 0) return (struct pair){ mix64(s64(64) ^ s64(72)), mix64(s64(80) ^ s64(88)) };
    if (n <= 3) {
        uint64_t a = (uint64_t)x[n / 2] << 24 | (uint64_t)x[0] << 16 | (uint64_t)n << 8 | x[n - 1], b = swap(a, 4);
        b = (b << 13 | b >> 19) & LOW32;
        return (struct pair){ mix64(a ^ get(S, 4) ^ get(S + 4, 4)), mix64(b ^ get(S + 8, 4) ^ get(S + 12, 4)) };
    }
    if (n <= 8) {
        struct pair p = multiply((get(x, 4) | get(x + n - 4, 4) << 32) ^ s64(16) ^ s64(24), P1 + 4 * n);
        p.high += 2 * p.low;
        p.low ^= p.high >> 3;
        p.low = (p.low ^ p.low >> 35) * M2;
        return (struct pair){ p.low ^ p.low >> 28, mix(p.high) };
    }
    uint64_t a = get(x, 8), b = get(x + n - 8, 8);
    struct pair p = multiply(a ^ b ^ s64(32) ^ s64(40), P1);
    b ^= s64(48) ^ s64(56);
    p.low += (uint64_t)(n - 1) << 54;
    p.high += b + (b & LOW32) * (Q2 - 1);
    struct pair p2 = multiply(p.low ^ swap(p.high, 8), P2);
    return (struct pair){ mix(p2.low), mix(p2.high + p.high * P2) };
}

static void take_two(uint64_t *a, uint64_t *b, const byte *x, size_t i, size_t j, unsigned s) {
    *a = (*a + pair_of(x + i, s)) ^ (get(x + j, 8) + get(x + j + 8, 8));
    *b = (*b + pair_of(x + j, s + 16)) ^ (get(x + i, 8) + get(x + i + 8, 8));
}

static struct pair hash_middle(const byte *x, size_t n) { /* section 7: 17 to 240 bytes */
    uint64_t a = n * P1, b = 0;
    unsigned i;
    if (n <= 128) {
        for (i = (unsigned)(n - 1) / 32 + 1; i-- > 0;) take_two(&a, &b, x, 16 * i, n - 16 * i - 16, 32 * i);
    } else {
        for (i = 0; i < 4; i++) take_two(&a, &b, x, 32 * i, 32 * i + 16, 32 * i);
        a = mix(a);
        b = mix(b);
        for (; i < n / 32; i++) take_two(&a, &b, x, 32 * i, 32 * i + 16, 32 * i - 125);
        take_two(&a, &b, x, n - 16, n - 32, 103);
    }
    return (struct pair){ mix(a + b), 0 - mix(a * P1 + b * P4 + n * P2) };
}

static void stripe(uint64_t A[8], const byte *x, unsigned s) {
    for (unsigned e = 0; e < 8; e++) {
        uint64_t v = get(x + 8 * e, 8), key = v ^ s64(s + 8 * e);
        A[e ^ 1] += v;
        A[e] += (key & LOW32) * (key >> 32);
    }
}

static uint64_t merge(const uint64_t A[8], unsigned s, uint64_t t) {
    for (unsigned e = 0; e < 8; e += 2) t += fold(A[e] ^ s64(s + 8 * e), A[e + 1] ^ s64(s + 8 * e + 8));
    return mix(t);
}

static struct pair hash_of(const byte *x, size_t n) {
    if (n <= 240) return n <= 16 ? hash_short(x, n) : hash_middle(x, n);
    uint64_t A[8] = { Q3, P1, P2, P3, P4, Q2, P5, Q1 }; /* section 8 */
    for (size_t j = 0; j < (n - 1) / 64; j++) {
        stripe(A, x + 64 * j, 8 * (unsigned)(j % 16));
        for (unsigned e = 0; e < 8 && j % 16 == 15; e++) A[e] = (A[e] ^ A[e] >> 47 ^ s64(128 + 8 * e)) * Q1;
    }
    stripe(A, x + n - 64, 121);
    return (struct pair){ merge(A, 11, n * P1), merge(A, 117, ~(n * P2)) };
}

static bool hash_is(const byte *stored, const byte *x, size_t n) {
    struct pair h = hash_of(x, n);
    return get(stored, 8) == h.low && get(stored + 8, 8) == h.high;
}

/* ---- SHA-256: FIPS 180-4 --------------------------------------------------------------------------------------- */

struct sha { uint32_t h[8]; uint64_t bytes; byte block[64]; };

static const struct sha sha_empty = {
    { 0x6a09e667, 0xbb67ae85, 0x3c6ef372, 0xa54ff53a, 0x510e527f, 0x9b05688c, 0x1f83d9ab, 0x5be0cd19 }, 0, { 0 }
};

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

static uint32_t turn(uint32_t x, unsigned by) { return (uint32_t)(x >> by | x << (32 - by)); } /* to the right */

static void sha_block(struct sha *sha) {
    uint32_t w[64], v[8];
    memcpy(v, sha->h, sizeof v);
    for (unsigned i = 0; i < 64; i++) {
        if (i < 16) w[i] = (uint32_t)swap(get(sha->block + 4 * i, 4), 4);
        else
            w[i] = (turn(w[i - 2], 17) ^ turn(w[i - 2], 19) ^ w[i - 2] >> 10) + w[i - 7]
                   + (turn(w[i - 15], 7) ^ turn(w[i - 15], 18) ^ w[i - 15] >> 3) + w[i - 16];
        uint32_t t1 = v[7] + (turn(v[4], 6) ^ turn(v[4], 11) ^ turn(v[4], 25)) + ((v[4] & v[5]) ^ (~v[4] & v[6]));
        uint32_t most = (v[0] & v[1]) ^ (v[0] & v[2]) ^ (v[1] & v[2]);
        uint32_t t2 = (turn(v[0], 2) ^ turn(v[0], 13) ^ turn(v[0], 22)) + most;
        t1 += sha_k[i] + w[i];
        memmove(v + 1, v, 7 * sizeof v[0]);
        v[4] += t1;
        v[0] = t1 + t2;
    }
    for (unsigned i = 0; i < 8; i++) sha->h[i] += v[i];
}

static void sha_add(struct sha *sha, const byte *x, uint64_t n) {
    for (; n > 0; n--) {
        sha->block[sha->bytes++ % 64] = *x++;
        if (sha->bytes % 64 == 0) sha_block(sha);
    }
}

static void sha_end(struct sha *sha, byte digest[32]) {
    byte tail[72] = { 0x80 };
    uint64_t zeros = (119 - sha->bytes % 64) % 64;
    put(tail + 1 + zeros, swap(8 * sha->bytes, 8), 8);
    sha_add(sha, tail, 1 + zeros + 8);
    for (unsigned i = 0; i < 8; i++) put(digest + 4 * i, swap(sha->h[i], 4), 4);
}

/* ---- block.md: lanes, tag -------------------------------------------------------------------------------------- */

enum { BLOCK = 4096, PAYLOAD = 3968, TAG = 3968, HASH = 4000, HASHED = 4000, DATA_BLOCK = 1, RESERVE_BLOCK = 2 };

static bool mend_lanes(byte *block) { /* flips what the lanes propose; true when they propose anything */
    unsigned word_of[512] = { 511 }, w = 0, guard = 502; /* label to word */
    uint64_t s[9] = { 0 }, p = 0;
    for (unsigned label = 0; label < 512; label++) {
        if (label > 0) word_of[label] = (label & (label - 1)) == 0 ? guard++ : w++;
        uint64_t word = get(block + 8 * word_of[label], 8);
        p ^= word;
        for (unsigned j = 0; j < 9; j++) s[j] ^= (label >> j & 1) != 0 ? word : 0;
    }
    for (unsigned b = 0; b < 64; b++) {
        unsigned label = 0;
        for (unsigned j = 0; j < 9; j++) label |= (unsigned)(s[j] >> b & 1) << j;
        block[8 * word_of[label] + b / 8] ^= (byte)((p >> b & 1) << b % 8);
    }
    return p != 0;
}

struct shape { unsigned k, m, depth; };
struct tag { struct shape full; unsigned t; uint64_t id, number; };

static uint64_t ceil_of(uint64_t value, uint64_t by) { return (value + by - 1) / by; }

/* sheet.md, section 2: the shape of a sheet of t data blocks, from that of a full one. */
static struct shape shape_of(struct shape shape, uint64_t t) {
    if (t == (uint64_t)shape.k * shape.depth || t == 0) return shape;
    uint64_t w = ceil_of(t * shape.m, shape.k);
    w = w < 4 ? 4 : w;
    while (shape.m > 4 && shape.m * ceil_of(w, shape.m) > w + w / 4) shape.m /= 2;
    shape.depth = (unsigned)(shape.m == 0 ? ceil_of(t, shape.k) : ceil_of(w, shape.m));
    shape.k = (unsigned)ceil_of(t, shape.depth);
    return shape;
}

static bool read_tag(const byte *block, struct tag *tag) { /* false when it breaks a rule of format 1 */
    const byte *at = block + TAG;
    struct shape full = { at[6], at[7], (unsigned)get(at + 28, 2) };
    tag->full = full;
    tag->id = get(at + 8, 8);
    tag->number = get(at + 16, 8);
    tag->t = (unsigned)get(at + 24, 4);
    uint64_t sheet_blocks = (uint64_t)full.depth * (full.k + full.m);
    if (memcmp(at, "FIRN\1", 5) != 0 || full.k < 1 || full.depth < 1 || full.depth > 4096) return false;
    if (full.m != 0 && (full.m < 4 || full.m > 128 || (full.m & (full.m - 1)) != 0)) return false;
    if (full.k + full.m > 256 || sheet_blocks > 65536 || tag->t < 1 || tag->t > full.k * full.depth) return false;
    struct shape shape = shape_of(full, tag->t);
    uint64_t index = tag->number % sheet_blocks;
    if (index < tag->t) return at[5] == DATA_BLOCK;
    return at[5] == RESERVE_BLOCK && index < tag->t + (uint64_t)shape.m * shape.depth;
}

/* ---- the file, and what is known of it ------------------------------------------------------------------------- */

enum { TITLE = 1, SPEC = 2, READER = 3, BATCH = 4, SEGMENT = 5, SUMS = 6, INDEX = 7, COLOPHON = 8 }; /* records */
enum { BODY_MAX = 1 << 24, RAW_MAX = 1 << 20, ROW_MAX = 32768 };

struct ref { uint64_t key, at; unsigned type; uint32_t bytes, raw; }; /* a body in the stream, found by its key */

struct container {
    FILE *file;
    uint64_t blocks;                   /* that begin in the file, the title page not counted */
    struct tag known;                  /* of the first sound block */
    uint64_t sheet_blocks, sheet_data; /* of a full sheet */
    uint64_t stream_bytes;
    uint64_t sheet;                    /* the one at hand */
    unsigned t;
    struct shape shape;
    uint64_t payload_of;               /* the data block whose payload is at hand */
    byte payload[PAYLOAD];
    bool payload_there, colophon_there, damaged;
    struct ref *refs;                  /* in the order of types, keys, places */
    size_t count, room;
    uint64_t items_told;               /* by the colophon */
    const struct ref *segment, *sums;  /* those at hand */
    bool segment_good, sums_good;
    byte *body, *sums_body;
};

/* Standard C tells places in a long, which may be too short; then it takes several steps. */
static bool read_at(struct container *c, uint64_t at, byte *to, size_t bytes) {
    int from = SEEK_SET;
    do {
        uint64_t step = lesser(at, LONG_MAX);
        if (fseek(c->file, (long)step, from) != 0) return false;
        from = SEEK_CUR;
        at -= step;
    } while (at > 0);
    return fread(to, 1, bytes, c->file) == bytes;
}

/* block.md, section 4. True when the block of this number was read sound or mended, and belongs here. */
static bool read_block(struct container *c, uint64_t number, byte *block, struct tag *tag) {
    if (number >= c->blocks || !read_at(c, BLOCK * (number + 1), block, BLOCK)) return false;
    bool sound = hash_is(block + HASH, block, HASHED);
    bool mended = !sound && mend_lanes(block) && hash_is(block + HASH, block, HASHED);
    const struct shape *full = &c->known.full;
    if (!(sound || mended) || !read_tag(block, tag) || tag->number != number) return false;
    if (full->k != 0 && (tag->id != c->known.id || memcmp(&tag->full, full, sizeof *full) != 0)) return false;
    c->damaged |= mended;
    return true;
}

/* ---- sheet.md: rows and the code ------------------------------------------------------------------------------- */

static unsigned gf_times(unsigned a, unsigned b) {
    unsigned product = 0;
    for (; b != 0; b >>= 1) {
        product ^= (b & 1) != 0 ? a : 0;
        a = (a & 0x80) != 0 ? (a << 1) ^ 0x11D : a << 1;
    }
    return product;
}

static unsigned gf_inverse(unsigned a) { /* a^254, the product of a^2, a^4, a^8 ... a^128 */
    unsigned product = 1;
    for (unsigned i = 0; i < 7; i++) product = gf_times(product, a = gf_times(a, a));
    return product;
}

/*
 * Lagrange's formula: the payload at point `at` from the others. there[s] is the payload at point s, NULL where it is
 * zero or lost; lost[] are the `count` points in E.
 */
static void row_value(byte *const there[256], const byte *lost, unsigned count, unsigned at, byte *to, size_t bytes) {
    unsigned below = 1; /* L'(at) */
    for (unsigned i = 0; i < count; i++) below = lost[i] == at ? below : gf_times(below, at ^ lost[i]);
    memset(to, 0, bytes);
    for (unsigned s = 0; s < 256; s++) {
        if (there[s] == NULL) continue;
        unsigned factor = gf_inverse(gf_times(below, at ^ s));
        for (unsigned i = 0; i < count; i++) factor = gf_times(factor, s ^ lost[i]);
        byte times[256];
        for (unsigned v = 0; v < 256; v++) times[v] = (byte)gf_times(factor, v);
        for (size_t b = 0; b < bytes; b++) to[b] ^= times[there[s][b]];
    }
}

/* Makes a sheet the one at hand; any of its blocks tells t. False when it has no sound block. */
static bool enter_sheet(struct container *c, uint64_t sheet) {
    byte block[BLOCK];
    struct tag tag;
    if (sheet == c->sheet) return c->t > 0;
    c->sheet = sheet;
    c->t = 0;
    for (uint64_t i = 0; i < c->sheet_blocks && c->t == 0; i++)
        if (read_block(c, sheet * c->sheet_blocks + i, block, &tag)) c->t = tag.t;
    c->shape = shape_of(c->known.full, c->t);
    return c->t > 0;
}

/* Rebuilds the payload of a data block of the sheet at hand from its row, whose blocks are `depth` apart. */
static bool rebuild(struct container *c, uint64_t lost_index, byte *payload) {
    static byte blocks[256][BLOCK];
    byte *there[256] = { NULL }, lost[256];
    unsigned count = 0, m = c->shape.m, depth = c->shape.depth;
    struct tag tag;
    for (uint64_t index = lost_index % depth; index < c->t + (uint64_t)m * depth; index += depth) {
        uint64_t point = index < c->t ? m + index / depth : (index - c->t) / depth;
        bool read = index != lost_index && read_block(c, c->sheet * c->sheet_blocks + index, blocks[point], &tag);
        if (read && tag.t == c->t) there[point] = blocks[point];
        else lost[count++] = (byte)point;
    }
    if (count <= m) row_value(there, lost, count, m + (unsigned)lost_index / depth, payload, PAYLOAD);
    return count <= m;
}

/* ---- stream.md: the stream ------------------------------------------------------------------------------------- */

/* Makes the payload of a data block the one at hand; data blocks count from 0 over the container. */
static bool fetch(struct container *c, uint64_t data_block) {
    uint64_t index = data_block % c->sheet_data;
    byte block[BLOCK];
    struct tag tag;
    if (data_block == c->payload_of) return c->payload_there;
    c->payload_of = data_block;
    if (!enter_sheet(c, data_block / c->sheet_data) || index >= c->t) return c->payload_there = false;
    if (read_block(c, c->sheet * c->sheet_blocks + index, block, &tag) && tag.t == c->t) {
        memcpy(c->payload, block, PAYLOAD);
        return c->payload_there = true;
    }
    c->damaged = true;
    return c->payload_there = rebuild(c, index, c->payload);
}

/* Copies bytes of the stream; what is lost comes as zeros. True when nothing is lost. */
static bool read_stream(struct container *c, uint64_t at, byte *to, uint64_t bytes) {
    bool whole = at <= c->stream_bytes && bytes <= c->stream_bytes - at;
    memset(to, 0, (size_t)bytes);
    for (uint64_t step; bytes > 0 && at < c->stream_bytes; at += step, to += step, bytes -= step) {
        step = lesser(bytes, PAYLOAD - at % PAYLOAD);
        if (fetch(c, at / PAYLOAD)) memcpy(to, c->payload + at % PAYLOAD, (size_t)step);
        else whole = false;
    }
    return whole;
}

/* ---- segment.md: bits, numbers, codes -------------------------------------------------------------------------- */

struct bits { const byte *from; size_t bytes, at; bool bad; }; /* a bit string; at: bits used; bad: it broke a rule */

static unsigned bit(struct bits *b) {
    b->bad |= b->at >= 8 * b->bytes;
    if (b->bad) return 0;
    unsigned shift = 7 - (unsigned)(b->at % 8);
    return b->from[b->at++ / 8] >> shift & 1U;
}

static uint32_t take(struct bits *b, unsigned n) { /* the next n bits, at most 32 */
    uint32_t value = 0;
    while (n-- > 0) value = value << 1 | bit(b);
    return value;
}

static void align(struct bits *b) { /* bits up to the byte boundary are zero */
    uint32_t rest = take(b, (unsigned)(8 - b->at % 8) % 8);
    b->bad |= rest != 0;
}

static size_t left(const struct bits *b) { return b->bytes - b->at / 8; }

static struct bits cut(struct bits *b, size_t bytes) { /* the next so many bytes, as a string of their own */
    struct bits part = { b->from + (b->bytes - left(b)), (size_t)lesser(bytes, left(b)), 0, false };
    b->bad |= bytes > left(b);
    b->at += 8 * part.bytes;
    return part;
}

static bool used_up(struct bits *b) { /* all but less than eight zero bits */
    align(b);
    return !b->bad && left(b) == 0;
}

static unsigned number(struct bits *b) {
    unsigned value = 0, group = 0x80, i;
    for (i = 0; i < 3 && group >= 0x80; i++) {
        group = take(b, 8);
        value |= (group & 0x7F) << 7 * i;
    }
    b->bad |= group >= 0x80 || (i > 1 && group == 0);
    return value;
}

static unsigned gamma_word(struct bits *b) {
    unsigned zeros = 0;
    while (zeros < 10 && bit(b) == 0) zeros++;
    b->bad |= zeros == 10;
    return 1U << zeros | take(b, zeros);
}

enum { WORD_BITS = 11, FULL = 1 << WORD_BITS, CODES = 16, CONTEXTS = 512, SYMBOLS = 512, TOKENS = 14 };

struct code { unsigned count[WORD_BITS + 1], symbol[SYMBOLS]; }; /* of each length; in the order of their words */

/* Gives out the words by the canonical rule. How much of the code they fill: FULL is full, more is over-full. */
static unsigned assign(struct code *code, const byte *lengths, unsigned symbols) {
    unsigned at = 0, filled = 0;
    memset(code->count, 0, sizeof code->count);
    for (unsigned length = 1; length <= WORD_BITS; length++)
        for (unsigned symbol = 0; symbol < symbols; symbol++)
            if (lengths[symbol] == length) {
                code->symbol[at++] = symbol;
                code->count[length]++;
                filled += (unsigned)FULL >> length;
            }
    return filled;
}

static unsigned decode(struct bits *b, const struct code *code) {
    unsigned word = 0, first = 0, before = 0; /* the first word of a length; symbols with shorter ones */
    for (unsigned length = 1; length <= WORD_BITS; length++) {
        word = 2 * word + bit(b);
        first = 2 * (first + code->count[length - 1]);
        if (word < first + code->count[length]) return code->symbol[before + word - first];
        before += code->count[length];
    }
    b->bad = true;
    return 0;
}

static void read_token_code(struct bits *b, struct code *code, unsigned tokens) { /* full, or one word of one bit */
    byte lengths[CODES + 1] = { 0 };
    for (unsigned i = 0; i < tokens; i++) lengths[i] = (byte)take(b, 3);
    unsigned filled = assign(code, lengths, tokens);
    b->bad |= filled != FULL && !(filled == FULL / 2 && code->count[1] == 1);
}

static void read_table(struct bits *b, const struct code *tokens, struct code *code, unsigned symbols) {
    byte lengths[SYMBOLS] = { 0 };
    unsigned symbol = 0, before = 0, filled = 0;
    while (!b->bad && filled < FULL) {
        unsigned token = decode(b, tokens), times = token < 12 ? 1 : gamma_word(b) + 1;
        before = token < 12 ? token : token == 12 ? 0 : before;
        b->bad |= (token == 13 && before == 0) || times > symbols - symbol;
        for (; times > 0 && !b->bad; times--) {
            lengths[symbol++] = (byte)before;
            filled += before > 0 ? (unsigned)FULL >> before : 0;
        }
    }
    b->bad |= assign(code, lengths, symbols) != FULL;
}

struct codes { byte of[CONTEXTS]; unsigned count; struct code code[CODES]; };

static void read_codes(struct bits *b, struct codes *codes, unsigned contexts, unsigned symbols, unsigned most) {
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
    for (unsigned i = 0; i < codes->count && !b->bad; i++) read_table(b, &tokens, &codes->code[i], symbols);
}

static unsigned decode_in(struct bits *b, const struct codes *codes, unsigned context) {
    return decode(b, &codes->code[codes->of[context]]);
}

/* ---- segment.md: stretches ------------------------------------------------------------------------------------- */

static void prefix_stretch(struct bits *in, unsigned streams, bool last, byte *raw, size_t n) {
    static struct code tokens, code;
    size_t sizes[6] = { 0 };
    read_token_code(in, &tokens, TOKENS);
    read_table(in, &tokens, &code, 256);
    align(in);
    for (unsigned i = 0; i < (last ? streams - 1 : streams); i++) {
        sizes[i] = number(in);
        if (i > 0) /* a difference, folded; should it lead below 0, the sum is too large for any stream */
            sizes[i] = sizes[i - 1] + (sizes[i] % 2 == 0 ? sizes[i] / 2 : ~(sizes[i] / 2));
    }
    for (unsigned i = 0; i < streams && !in->bad; i++) {
        size_t share = i == streams - 1 ? n - i * (n / streams) : n / streams;
        struct bits stream = cut(in, last && i == streams - 1 ? left(in) : sizes[i]);
        for (; share > 0 && !stream.bad; share--) *raw++ = (byte)decode(&stream, &code);
        in->bad |= !used_up(&stream);
    }
}

static bool stretches(struct bits *in, byte *raw, size_t n) {
    for (bool last = false; !last && !in->bad;) {
        unsigned kind = take(in, 8), method = kind & 3, six = kind & 4;
        last = (kind & 8) != 0;
        size_t length = last ? n : number(in);
        if (in->bad || kind > 15 || method == 3 || (six != 0 && (method != 2 || length < 6)) ||
            (!last && (length < 256 || length >= n)))
            return false;
        if (method == 2) prefix_stretch(in, six != 0 ? 6 : 1, last, raw, length);
        else if (method == 1) memset(raw, (int)take(in, 8), length);
        else
            for (size_t i = 0; i < length && !in->bad; i++) raw[i] = (byte)take(in, 8);
        raw += length;
        n -= length;
    }
    return used_up(in);
}

/* ---- segment.md: matched --------------------------------------------------------------------------------------- */

/* Extra bits of run codes and length codes. The base of a code is where the values of the one before end. */
static const byte run_extra[16] = { 0, 0, 0, 0, 0, 0, 1, 1, 2, 3, 4, 5, 6, 9, 13, 20 };
static const byte copy_extra[32] = { 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0,  0,  0, 0,
                                     1, 1, 2, 2, 3, 3, 4, 4, 5, 5, 6, 7, 8, 10, 13, 20 };

static size_t value_of_code(struct bits *b, const byte *extra, unsigned code, size_t base) {
    for (unsigned before = 0; before < code; before++) base += (size_t)1 << extra[before];
    return base + take(b, extra[code]);
}

/* A distance; it becomes the first of the recent ones. */
static size_t distance_of(struct bits *b, const struct codes *codes, unsigned context, unsigned fine, size_t *recent) {
    unsigned symbol = decode_in(b, codes, context), place = symbol < 4 ? symbol : 3;
    size_t distance = recent[place];
    if (symbol >= 4) {
        unsigned low = (symbol - 4) & ((1U << fine) - 1), q = (symbol - 4) >> fine;
        distance = ((((2 + q % 2) << q / 2) + take(b, q / 2) - 2) << fine) + low + 1;
    }
    memmove(recent + 1, recent, place * sizeof recent[0]);
    return recent[0] = distance;
}

static bool matched(struct bits *in, byte *raw, size_t n) {
    static struct codes commands, distances, literals;
    unsigned fine = take(in, 2);
    read_codes(in, &commands, 4, 512, 4);
    read_codes(in, &distances, 8, 4 + 2 * (20 - fine) * (1U << fine), 8);
    read_codes(in, &literals, 512, 256, 16);
    align(in);
    size_t commands_bytes = number(in), distances_bytes = number(in), made = 0, length = 0;
    struct bits of_commands = cut(in, commands_bytes), of_distances = cut(in, distances_bytes);
    struct bits of_literals = cut(in, left(in));
    size_t recent[4] = { 1, 2, 4, 8 };
    while (made < n && !in->bad) {
        unsigned context = length < 4 ? 0 : length < 7 ? 1 : length < 16 ? 2 : 3;
        unsigned command = decode_in(&of_commands, &commands, context);
        size_t literal_count = value_of_code(&of_commands, run_extra, command / 32, 0);
        if (of_commands.bad || literal_count > n - made) return false;
        for (size_t i = 0; i < literal_count && !of_literals.bad; i++, made++) {
            context = i > 0 ? raw[made - 1] : recent[0] <= made ? 256U + raw[made - recent[0]] : 256;
            raw[made] = (byte)decode_in(&of_literals, &literals, context);
        }
        if (made == n) break;
        length = value_of_code(&of_commands, copy_extra, command % 32, 2);
        context = (unsigned)lesser(length - 2, 3) + (literal_count == 0 ? 4 : 0);
        size_t distance = distance_of(&of_distances, &distances, context, fine, recent);
        if (of_commands.bad || of_literals.bad || of_distances.bad) return false;
        if (length > n - made || distance > made) return false;
        for (size_t i = 0; i < length; i++, made++) raw[made] = raw[made - distance];
    }
    return !in->bad && used_up(&of_commands) && used_up(&of_distances) && used_up(&of_literals);
}

/* ---- segment.md: branches -------------------------------------------------------------------------------------- */

static bool is_field(const byte *at, size_t free) { /* `free` bytes before it belong to no other field */
    return at[-1] == 0xE8 || at[-1] == 0xE9 || (free >= 2 && at[-2] == 0x0F && (at[-1] & 0xF0) == 0x80) ||
           (free >= 3 && (at[-1] & 0xC7) == 0x05 && (at[-2] == 0x8B || at[-2] == 0x8D) && (at[-3] & 0xF8) == 0x48);
}

static void turn_branches_back(byte *raw, size_t n) {
    for (size_t a = 1, from = 0; a + 4 <= n; a++) {
        if (!is_field(raw + a, a - from)) continue;
        if (raw[a + 3] == 0x00 || raw[a + 3] == 0xFF) {
            uint64_t value = (get(raw + a, 4) - a) & 0x1FFFFFF;
            put(raw + a, (value & 0x1000000) != 0 ? value | 0xFE000000 : value, 4);
        }
        from = a += 4;
    }
}

/* ---- segment.md: samples --------------------------------------------------------------------------------------- */

struct grid { unsigned width, predictor, channels, row; size_t pixels; uint32_t *x; }; /* x: residuals, then numbers */

/* One part of numbers of a byte: line after line, within a line channel after channel. */
static void part_of_bytes(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels) {
    static const byte steps[15] = { 1, 2, 3, 4, 6, 8, 11, 15, 20, 27, 36, 50, 70, 100, 150 };
    static byte sizes[3][8][ROW_MAX + 4]; /* of three lines, with two zeros on either side */
    byte level[256] = { 0 };
    for (unsigned k = 0; k < 256; k++)
        for (unsigned i = 0; i < 15; i++) level[k] = (byte)(level[k] + (steps[i] <= k));
    memset(sizes, 0, sizeof sizes);
    size_t line = g->row > 0 ? g->row / g->channels : 512, length;
    for (size_t y = 0, done = 0; done < pixels && !b->bad; y++, done += length) {
        length = (size_t)lesser(line, pixels - done);
        for (unsigned ch = 0; ch < g->channels; ch++) {
            byte *own = sizes[y % 3][ch] + 2;
            const byte *A = sizes[(y + 2) % 3][ch] + 2, *AA = sizes[(y + 1) % 3][ch] + 2;
            const byte *L = ch > 0 ? sizes[y % 3][ch - 1] + 2 : NULL;
            for (int x = 0; x < (int)length; x++) {
                int n = 2 * A[x] + A[x - 1] + A[x + 1];
                int m = ch > 0 ? 2 * L[x] + L[x - 1] + L[x + 1] : 2 * AA[x] + A[x - 2] + A[x + 2];
                uint32_t value = decode_in(b, codes, 16U * level[n] + level[m] + (ch > 0 ? 256 : 0));
                r[(done + (size_t)x) * g->channels + ch] = value;
                own[x] = (byte)lesser(lesser(value, 256 - value), 60);
            }
            own[length] = 0; /* the last line may be shorter than the ones before */
        }
    }
}

/* One part of wider numbers, in their order. */
static void part_of_wide(struct bits *b, const struct codes *codes, const struct grid *g, uint32_t *r, size_t pixels) {
    static byte tokens[RAW_MAX];
    unsigned mean[8] = { 0 };
    for (size_t i = 0; i < pixels * g->channels && !b->bad; i++) {
        unsigned ch = (unsigned)(i % g->channels), context = mean[ch] / 8;
        if (g->row > 0) context = (context + (i >= g->row ? tokens[i - g->row] : 0)) / 2;
        uint32_t token = decode_in(b, codes, context + (ch > 0 ? 128 : 0)), z = token;
        if (token >= 16) z = ((4 + token % 4) << (token / 4 - 2)) + take(b, token / 4 - 2);
        r[i] = z % 2 == 0 ? z / 2 : ~(z / 2);
        tokens[i] = (byte)token;
        mean[ch] = mean[ch] - mean[ch] / 8 + token;
    }
}

static int64_t signed_of(uint64_t value, unsigned bits) { /* the low bits of a value, the topmost being the sign */
    uint64_t top = UINT64_C(1) << (bits - 1);
    return (int64_t)(value & (top - 1)) - (int64_t)(value & top);
}

static int64_t number_at(const struct grid *g, size_t i) { /* as it counts in predictions */
    return g->width == 1 ? (int64_t)g->x[i] : signed_of(g->x[i], 8 * g->width);
}

static int64_t floor_of(int64_t value, int64_t by) { return value >= 0 ? value / by : -((by - 1 - value) / by); }

static int64_t prediction(const struct grid *g, size_t i) { /* not wrapped yet, where that makes no difference */
    size_t c = g->channels;
    unsigned predictor = g->predictor;
    if (i < c || predictor == 8) return 0;
    int64_t W = number_at(g, i - c);
    if (predictor == 6 && i >= 2 * c) return 2 * W - number_at(g, i - 2 * c);
    if (predictor == 7 && i >= 3 * c) return 3 * W - 3 * number_at(g, i - 2 * c) + number_at(g, i - 3 * c);
    if (predictor == 0 || predictor > 5 || i < g->row + c) return W;
    int64_t N = number_at(g, i - g->row), NW = number_at(g, i - g->row - c);
    if (predictor == 1) return N;
    if (predictor == 4) return floor_of(W + N, 2);
    if (predictor == 5) return floor_of(3 * W + 3 * N - 2 * NW, 4);
    int64_t plane = signed_of((uint64_t)(W + N - NW), 32), low = W < N ? W : N, high = W < N ? N : W;
    return predictor == 2 ? plane : plane < low ? low : plane > high ? high : plane;
}

/* Residuals become numbers, numbers become bytes. */
static void numbers_from(struct grid *g, bool leaning, bool floats, bool big_endian, byte *to) {
    uint32_t mask = 0xFFFFFFFF >> (32 - 8 * g->width), residual = 0;
    for (size_t i = 0; i < g->pixels * g->channels; i++, to += g->width) {
        residual = leaning && i % g->channels != 0 ? residual + g->x[i] : g->x[i];
        uint32_t value = g->x[i] = (residual + (uint32_t)((uint64_t)prediction(g, i) & LOW32)) & mask;
        value = floats && (value & 0x80000000) != 0 ? value ^ 0x7FFFFFFF : value;
        put(to, big_endian ? swap(value, g->width) : value, g->width);
    }
}

static bool samples(struct bits *in, byte *raw, size_t n) {
    static struct codes codes;
    static uint32_t numbers[RAW_MAX];
    unsigned kind = take(in, 8), more = take(in, 8);
    struct grid g = { .width = (kind & 3) + 1, .predictor = more & 15, .channels = (more >> 4 & 7) + 1, .x = numbers };
    bool floats = (kind & 8) != 0, leaning = (kind & 16) != 0;
    size_t head = number(in), sizes[3];
    g.row = number(in);
    if (in->bad || kind > 31 || more > 127 || g.predictor > 8 || head > 16383 || head > n ||
        (floats && g.width != 4) || (leaning && g.channels == 1) ||
        (g.row > 0 && (g.row % g.channels != 0 || g.row <= g.channels || g.row > ROW_MAX)) ||
        (g.row == 0 && g.predictor >= 1 && g.predictor <= 5) || (n - head) / (g.channels * g.width) < 4)
        return false;
    g.pixels = (n - head) / (g.channels * g.width);
    for (size_t i = 0; i < n && !in->bad; i++)
        if (i < head || i >= head + g.pixels * g.channels * g.width) raw[i] = (byte)take(in, 8);
    read_codes(in, &codes, CONTEXTS, g.width == 1 ? 256 : 32 * g.width, CODES);
    align(in);
    for (unsigned i = 0; i < 3; i++) sizes[i] = number(in);
    for (unsigned i = 0; i < 4 && !in->bad; i++) {
        size_t first = i * (g.pixels / 4), pixels = i < 3 ? g.pixels / 4 : g.pixels - first;
        struct bits b = cut(in, i < 3 ? sizes[i] : left(in));
        (g.width == 1 ? part_of_bytes : part_of_wide)(&b, &codes, &g, g.x + first * g.channels, pixels);
        in->bad |= !used_up(&b);
    }
    if (!in->bad) numbers_from(&g, leaning, floats, (kind & 4) != 0, raw + head);
    return !in->bad;
}

static bool decode_segment(const byte *coded, size_t bytes, byte *raw, size_t n) { /* n: at most RAW_MAX */
    struct bits in = { coded, bytes, 0, false };
    unsigned method = take(&in, 8), transform = take(&in, 8);
    if (in.bad || transform > (method == 3 ? 1 : 0)) return false;
    if (method == 2) return stretches(&in, raw, n);
    if (method == 4) return samples(&in, raw, n);
    if (method == 0 && left(&in) == n) memcpy(raw, coded + 2, n);
    else if (method == 1 && left(&in) == 1) memset(raw, coded[2], n);
    else if (method != 3 || !matched(&in, raw, n)) return false;
    if (transform == 1) turn_branches_back(raw, n);
    return true;
}

/* ---- stream.md and catalogue.md: which records there are ------------------------------------------------------- */

static void add(struct container *c, unsigned type, uint64_t key, uint64_t at, uint64_t bytes, uint64_t raw) {
    struct ref ref = { key, at, type, (uint32_t)bytes, (uint32_t)raw };
    if (bytes > BODY_MAX || raw > RAW_MAX) return;
    if (c->count == c->room) c->refs = room(c->refs, (c->room = 2 * c->room + 64) * (uint64_t)sizeof ref);
    c->refs[c->count++] = ref;
}

static int in_order(const void *one, const void *other) {
    const struct ref *a = one, *b = other;
    if (a->type != b->type) return a->type < b->type ? -1 : 1;
    if (a->key != b->key) return a->key < b->key ? -1 : 1;
    return a->at < b->at ? -1 : a->at > b->at;
}

/* The last ref of a type with no greater key; NULL if there is none. *next: the key of the one behind it. */
static const struct ref *find(const struct container *c, unsigned type, uint64_t key, uint64_t *next) {
    struct ref wanted = { key, UINT64_MAX, type, 0, 0 };
    size_t at = 0; /* how many refs are not behind it */
    for (size_t step = (size_t)1 << 24; step > 0; step /= 2)
        while (at + step <= c->count && in_order(&c->refs[at + step - 1], &wanted) <= 0) at += step;
    *next = at < c->count && c->refs[at].type == type ? c->refs[at].key : UINT64_MAX;
    return at > 0 && c->refs[at - 1].type == type ? &c->refs[at - 1] : NULL;
}

/* Reads a body that begins with the hash of the rest of it. True when it is whole. */
static bool read_hashed(struct container *c, uint64_t at, uint64_t bytes, byte **body) {
    *body = room(*body, bytes);
    return read_stream(c, at, *body, bytes) && bytes >= 16 && hash_is(*body, *body + 16, (size_t)bytes - 16);
}

/* An INDEX holds a BATCH again, which has a hash of its own, and tells where segments are. */
static void note_index(struct container *c, uint64_t at, uint64_t bytes) {
    bool good = read_hashed(c, at, bytes, &c->body);
    const byte *body = c->body;
    uint64_t batch = get(body + 40, 4), segments = get(body + 44, 4);
    if (batch >= 40 && batch <= bytes - 80) add(c, BATCH, get(body + 96, 8), at + 80, batch, 0);
    if (!good || 80 + batch + 24 * segments != bytes) return;
    for (const byte *place = body + 80 + batch; place < body + bytes; place += 24)
        add(c, SEGMENT, get(place, 8), get(place + 8, 8) + 32, get(place + 20, 4), get(place + 16, 4));
}

/* Texts are found by their type, batches and sums by their first item, segments by their place in content space. */
static void note_record(struct container *c, unsigned type, uint64_t at, uint64_t bytes) {
    static const byte key_at[] = { [BATCH] = 16, [SEGMENT] = 8, [SUMS] = 24 };
    char text[2049] = "";
    const byte *head = (const byte *)text;
    bool there = read_stream(c, at, (byte *)text, lesser(bytes, type == COLOPHON ? 2048 : 32));
    if (type >= TITLE && type <= READER) {
        add(c, type, 0, at, bytes, 0);
    } else if (type >= BATCH && type <= SUMS && there) {
        add(c, type, get(head + key_at[type], 8), at, bytes, type == SEGMENT ? get(head, 4) : 0);
    } else if (type == INDEX && bytes >= 80 && bytes <= BODY_MAX) {
        note_index(c, at, bytes);
    } else if (type == COLOPHON) {
        const char *items = strstr(text, "\nitems: ");
        c->colophon_there = there;
        c->items_told = items == NULL ? 0 : strtoull(items + 8, NULL, 10);
    }
}

static void walk(struct container *c) {
    byte head[32];
    for (uint64_t at = 0; at + 32 <= c->stream_bytes && !c->colophon_there;) {
        bool there = read_stream(c, at, head, 32);
        uint64_t bytes = get(head + 8, 8);
        if (there && memcmp(head, "FREC", 4) == 0 && get(head + 16, 8) == at &&
            get(head + 24, 8) == hash_of(head, 24).low && bytes <= c->stream_bytes - at - 32) {
            note_record(c, (unsigned)get(head + 4, 2), at + 32, bytes);
            at += (bytes + 31) / 32 * 32;
        }
        at = there ? at + 32 : (at / PAYLOAD + 1) * PAYLOAD; /* a lost block: go on behind it */
    }
    if (c->count > 0) qsort(c->refs, c->count, sizeof c->refs[0], in_order);
}

static uint64_t count_blocks(struct container *c) { /* that begin in the file; the title page is none of them */
    uint64_t there = 0;
    byte any[1];
    for (uint64_t step = UINT64_C(1) << 48; step > 0; step /= 2)
        if (read_at(c, BLOCK * (there + step), any, 1)) there += step;
    return there;
}

/* Finds the layout and all records. False when there is not one sound block. */
static bool open_container(struct container *c, FILE *file) {
    byte block[BLOCK];
    struct tag tag;
    memset(c, 0, sizeof *c);
    c->file = file;
    c->sheet = c->payload_of = UINT64_MAX;
    c->blocks = count_blocks(c);
    uint64_t number = 0;
    while (number < c->blocks && !read_block(c, number, block, &tag)) number++;
    if (number == c->blocks) return false;
    c->known = tag;
    c->sheet_data = (uint64_t)tag.full.k * tag.full.depth;
    c->sheet_blocks = c->sheet_data + (uint64_t)tag.full.m * tag.full.depth;
    uint64_t sheet = (c->blocks - 1) / c->sheet_blocks;
    while (!enter_sheet(c, sheet) && sheet > 0) /* what is behind the last sound block does not count */
        sheet--;
    c->stream_bytes = (sheet * c->sheet_data + c->t) * PAYLOAD;
    c->damaged |= c->blocks < sheet * c->sheet_blocks + c->t + (uint64_t)c->shape.m * c->shape.depth;
    walk(c);
    return true;
}

/* ---- catalogue.md: items --------------------------------------------------------------------------------------- */

struct text { const char *from; size_t bytes; }; /* not ended by a zero */

struct item {
    uint64_t number, content_at, stored, size;
    const byte *pax, *ustar, *extents; /* extents: pairs of numbers of eight bytes */
    uint32_t pax_bytes, extent_count;
    bool has_content, in_front;
    byte whole[16];                    /* the extent of a file without holes */
    char ustar_path[257];
    struct text path, link;
    int64_t seconds; /* of the last change, since 1970 */
};

static uint64_t octal(const byte *field, unsigned bytes) {
    uint64_t value = 0;
    for (unsigned i = 0; i < bytes; i++)
        value = field[i] >= '0' && field[i] <= '7' ? value << 3 | (field[i] - '0') : value;
    return value;
}

static void put_octal(byte *field, unsigned digits, uint64_t value) {
    for (; digits > 0; value >>= 3) field[--digits] = (byte)('0' + (value & 7));
}

static void put_sum(byte *header) { /* over all bytes, those of the sum taken as spaces */
    unsigned sum = 8 * ' ';
    for (unsigned i = 0; i < 512; i++) sum += i < 148 || i >= 156 ? header[i] : 0U;
    put_octal(header + 148, 6, sum);
}

static int64_t seconds_of(const char *time) { /* such as -12.25, rounded down; 0 if it is out of all reason */
    char *end;
    int64_t seconds = strtoll(time, &end, 10), limit = INT64_C(1) << 50;
    bool fraction = *end == '.' && end[strspn(end, ".0")] > '0';
    return seconds < -limit || seconds > limit ? 0 : *time == '-' && fraction ? seconds - 1 : seconds;
}

/* Records of an extended header: "LENGTH KEYWORD=VALUE\n", LENGTH counting all of it. */
static void read_extended(struct item *item, const char *at, const char *end) {
    for (size_t length; at < end; at += length) {
        char *keyword;
        length = strtoul(at, &keyword, 10);
        if (length > (size_t)(end - at) || keyword >= at + length) return;
        const char *equals = memchr(keyword, '=', (size_t)(at + length - 1 - keyword));
        if (equals == NULL) return;
        struct text value = { equals + 1, (size_t)(at + length - equals) - 2 };
        if (strncmp(keyword, " path=", 6) == 0) item->path = value;
        else if (strncmp(keyword, " linkpath=", 10) == 0) item->link = value;
        else if (strncmp(keyword, " mtime=", 7) == 0) item->seconds = seconds_of(value.from);
    }
}

/* POSIX.1-2001, pax interchange format: an extended header where one is needed, then the ustar header. */
static bool read_pax(struct item *item) {
    uint64_t extended = 0, padded = 0;
    if (item->pax_bytes >= 512 && item->pax[156] == 'x') {
        extended = lesser(octal(item->pax + 124, 12), item->pax_bytes);
        padded = 512 + (extended + 511) / 512 * 512;
    }
    if (item->pax_bytes < padded + 512) return false;
    const byte *ustar = item->ustar = item->pax + padded;
    bool prefix = ustar[345] != '\0';
    snprintf(item->ustar_path, sizeof item->ustar_path, "%.155s%s%.100s", prefix ? (const char *)ustar + 345 : "",
             prefix ? "/" : "", (const char *)ustar);
    item->path = (struct text){ item->ustar_path, strlen(item->ustar_path) };
    item->link = (struct text){ (const char *)ustar + 157, 0 };
    while (item->link.bytes < 100 && item->link.from[item->link.bytes] != '\0') item->link.bytes++;
    item->seconds = (int64_t)octal(ustar + 136, 12);
    read_extended(item, (const char *)item->pax + 512, (const char *)item->pax + 512 + extended);
    return true;
}

static uint64_t largest_holes = UINT64_C(1) << 43;

/*
 * Table 2. The entry at the front of so many bytes: how long it is; 0 if it breaks a rule. Digits that are left out of
 * its headers are put back. Behind the last entry there is a zero, which ends all texts.
 */
static size_t read_entry(byte *entry, size_t bytes_left, struct item *item) {
    if (bytes_left < 24) return 0;
    uint64_t bytes = get(entry, 4), end = 0, listed = get(entry + 8, 4);
    unsigned flags = (unsigned)get(entry + 12, 4);
    item->pax_bytes = (uint32_t)get(entry + 4, 4);
    item->size = get(entry + 16, 8);
    item->has_content = (flags & 1) != 0;
    item->in_front = (flags & 8) != 0;
    if (bytes > bytes_left || bytes > 2097152 || listed > 65536 || ((flags & 2) == 0 && listed > 0) ||
        24 + 16 * listed + item->pax_bytes != bytes)
        return 0;
    byte *pax = entry + 24 + 16 * listed;
    if ((flags & 4) != 0 && item->pax_bytes >= 512) {
        byte *last = entry + bytes - 512;
        put_octal(last + 124, 11, item->size);
        put_sum(last);
        put_sum(pax);
    }
    item->pax = pax;
    put(item->whole + 8, item->size, 8);
    item->extents = (flags & 2) != 0 ? entry + 24 : item->whole;
    item->extent_count = (flags & 2) != 0 ? (uint32_t)listed : item->has_content && item->size > 0;
    item->stored = 0;
    for (uint32_t i = 0; i < item->extent_count; i++) {
        uint64_t at = get(item->extents + 16 * (size_t)i, 8), length = get(item->extents + 16 * (size_t)i + 8, 8);
        if (length == 0 || at < end || at > item->size || length > item->size - at) return 0;
        end = at + length;
        item->stored += length;
    }
    if ((flags & 2) != 0 && item->size - item->stored > largest_holes) return 0;
    return read_pax(item) ? (size_t)bytes : 0;
}

struct batch { uint64_t place, items; size_t bytes; byte *entries; };

/* Table 1. The entries of a batch, decoded; false when this copy of it is lost. */
static bool read_batch(struct container *c, const struct ref *ref, struct batch *batch) {
    if (!read_hashed(c, ref->at, ref->bytes, &c->body) || ref->bytes < 40) return false;
    const byte *at = c->body + 40, *end = c->body + ref->bytes;
    batch->place = get(c->body + 24, 8);
    batch->items = get(c->body + 32, 4);
    batch->bytes = (size_t)lesser(get(c->body + 36, 4), 8388608);
    batch->entries = room(NULL, batch->bytes + 1);
    batch->entries[batch->bytes] = '\0';
    for (size_t done = 0, raw; done < batch->bytes; done += raw) {
        uint64_t coded = end - at >= 4 ? get(at, 4) : UINT64_MAX;
        raw = (size_t)lesser(batch->bytes - done, RAW_MAX);
        if (coded > (uint64_t)(end - at) - 4 || !decode_segment(at + 4, (size_t)coded, batch->entries + done, raw)) {
            free(batch->entries);
            return false;
        }
        at += 4 + coded;
    }
    return true;
}

/* Table 3. The digest of an item; false when there is none, or it is lost. */
static bool sum_of(struct container *c, uint64_t number, byte sum[32]) {
    uint64_t next;
    const struct ref *ref = find(c, SUMS, number, &next);
    if (ref == NULL || ref->bytes < 32) return false;
    if (c->sums != ref) {
        c->sums = ref;
        c->sums_good = read_hashed(c, ref->at, ref->bytes, &c->sums_body) &&
                       32 + 34 * get(c->sums_body + 16, 4) == ref->bytes;
    }
    if (!c->sums_good) return false;
    const byte *body = c->sums_body, *steps = body + 32;
    uint64_t n = get(body + 16, 4), item = get(body + 24, 8);
    for (uint64_t i = 0; i < n; i++) {
        item += get(steps + 2 * i, 2);
        if (item == number) memcpy(sum, steps + 2 * n + 32 * i, 32);
        if (item >= number) return item == number;
    }
    return false;
}

/* The good bytes of content space from `at` on; NULL when they are lost. *until: how far that goes. */
static const byte *content_at(struct container *c, uint64_t at, uint64_t *until) {
    static byte raw[RAW_MAX];
    const struct ref *ref = find(c, SEGMENT, at, until);
    if (ref == NULL || at - ref->key >= ref->raw) return NULL;
    *until = ref->key + ref->raw;
    if (c->segment != ref) {
        byte *body = c->body = room(c->body, ref->bytes);
        c->segment = ref;
        c->segment_good = ref->bytes > 32 && read_stream(c, ref->at, body, ref->bytes) && get(body, 4) == ref->raw &&
                          get(body + 8, 8) == ref->key &&
                          decode_segment(body + 32, ref->bytes - 32, raw, ref->raw) &&
                          hash_is(body + 16, raw, ref->raw);
    }
    return c->segment_good ? raw + (at - ref->key) : NULL;
}

/* ---- giving back ----------------------------------------------------------------------------------------------- */

struct task { char mode; FILE *out; uint64_t items, lost, unknown; bool failed; };

/* Bytes of an item, zeros when from is NULL: to out, if that is not NULL, and to sha, while nothing of it is lost. */
static void give(struct task *task, FILE *out, struct sha *sha, const byte *from, uint64_t bytes) {
    static const byte zeros[BLOCK];
    for (uint64_t step; bytes > 0 && !task->failed && (out != NULL || sha != NULL); bytes -= step) {
        const byte *at = from == NULL ? zeros : from;
        step = from == NULL ? lesser(bytes, sizeof zeros) : bytes;
        if (sha != NULL) sha_add(sha, at, step);
        task->failed |= out != NULL && fwrite(at, 1, (size_t)step, out) != step;
    }
}

/* The content of an item, to out if that is not NULL. True when every byte is there and the digest is right. */
static bool give_content(struct container *c, struct task *task, const struct item *item, FILE *out) {
    uint64_t at = 0, place = item->content_at, until;
    byte digest[32], sum[32];
    struct sha whole = sha_empty, *sha = &whole;
    for (const byte *extent = item->extents; extent < item->extents + 16 * (size_t)item->extent_count; extent += 16) {
        give(task, out, sha, NULL, get(extent, 8) - at);
        at = get(extent, 8);
        for (uint64_t end = at + get(extent + 8, 8), step; at < end && !task->failed; at += step, place += step) {
            const byte *bytes = content_at(c, place, &until);
            step = lesser(end - at, until - place);
            if (bytes == NULL && out == NULL)
                printf("    lost: bytes %" PRIu64 " to %" PRIu64 "\n", at, at + step - 1);
            sha = bytes == NULL ? NULL : sha;
            give(task, out, sha, bytes, step);
        }
    }
    give(task, out, sha, NULL, item->size - at);
    bool known = sum_of(c, item->number, sum), good = sha != NULL;
    if (good && known) {
        sha_end(sha, digest);
        good = memcmp(digest, sum, 32) == 0;
    }
    if (out == NULL && !known)
        printf("    its SHA-256 is lost, or its source failed while the container was made\n");
    if (out == NULL && sha != NULL && !good) printf("    LOST: its SHA-256 is not the one in the catalogue\n");
    return good;
}

static int64_t days_before(int64_t year) { /* from 1 March of year 0, in the Gregorian calendar */
    return 365 * year + floor_of(year, 4) - floor_of(year, 100) + floor_of(year, 400);
}

static void put_date(int64_t seconds) { /* UTC; years are taken to begin in March, so that the leap day is their last */
    int64_t day = floor_of(seconds, 86400) + 719468, year = floor_of(10000 * day, 3652425);
    int second = (int)(seconds - 86400 * (day - 719468));
    year += days_before(year + 1) <= day ? 1 : days_before(year) > day ? -1 : 0;
    day -= days_before(year);
    int month = (int)(5 * day + 2) / 153; /* five of them in turn have 31, 30, 31, 30, 31 days */
    day -= (153 * month + 2) / 5;
    printf("  %04" PRId64 "-%02d-%02dT%02d:%02d:%02dZ", year + month / 10, (month + 2) % 12 + 1, (int)day + 1,
           second / 3600, second / 60 % 60, second % 60);
}

/* A name for people: what a terminal could take for a command is written as \ and three octal digits. */
static void put_name(const char *before, struct text name) {
    fputs(before, stdout);
    for (const char *at = name.from; at < name.from + name.bytes; at++)
        if ((byte)*at < 0x20 || *at == 0x7F || *at == '\\') printf("\\%03o", (unsigned)(byte)*at);
        else putchar(*at);
}

static void list_item(const struct item *item) {
    unsigned type = item->ustar[156], mode = (unsigned)octal(item->ustar + 100, 8);
    putchar(type >= '0' && type <= '6' ? "-hlcbdp"[type - '0'] : '-');
    for (unsigned i = 0; i < 9; i++) putchar((mode >> (8 - i) & 1) != 0 ? "rwx"[i % 3] : '-');
    put_date(item->seconds);
    printf("  %12" PRIu64, item->has_content ? item->size : 0);
    put_name("  ", item->path);
    if (item->link.bytes > 0) put_name(" -> ", item->link);
    putchar('\n');
}

static bool leads_down(struct text name) { /* and nowhere else */
    bool down = name.bytes > 0 && *name.from != '/' && memchr(name.from, '\0', name.bytes) == NULL;
    for (size_t i = 0, part = 0; i <= name.bytes && down; i++)
        if (i == name.bytes || name.from[i] == '/') {
            down = i - part != 2 || memcmp(name.from + part, "..", 2) != 0;
            part = i + 1;
        }
    return down;
}

/* A pax archive is headers and contents, padded to 512. Mode t takes the items that are whole, d the other ones. */
static void give_member(struct container *c, struct task *task, const struct item *item) {
    bool down = leads_down(item->path) && (item->ustar[156] != '1' || leads_down(item->link));
    bool whole = !item->has_content || give_content(c, task, item, NULL);
    if (down && whole == (task->mode == 't')) {
        give(task, task->out, NULL, item->pax, item->pax_bytes);
        whole &= !item->has_content || give_content(c, task, item, task->out);
        give(task, task->out, NULL, NULL, item->has_content ? (512 - item->size % 512) % 512 : 0);
    } else if (task->mode == 't')
        printf("    left out: %s\n", down ? "it is not whole; -d takes it" : "its name leads out of the folder");
    task->lost += !whole || !down;
}

static void miss(struct task *task, uint64_t from, uint64_t to) {
    if (from < to) printf("LOST from the catalogue: items %" PRIu64 " to %" PRIu64 "\n", from, to - 1);
    task->unknown += from < to ? to - from : 0;
}

/* The items of a batch, from number `next` on; the contents of those in front come first. */
static uint64_t do_batch(struct container *c, struct task *task, const struct batch *batch, uint64_t next) {
    uint64_t front = batch->place, place = batch->place;
    for (unsigned round = 0; round < 2; round++)
        for (uint64_t i = 0, at = 0, step; i < batch->items && !task->failed; i++, at += step) {
            struct item item = { .number = next };
            step = read_entry(batch->entries + at, batch->bytes - (size_t)at, &item);
            if (step == 0) break;
            if (round == 0) {
                place += item.in_front ? item.stored : 0;
                continue;
            }
            item.content_at = item.in_front ? front : place;
            *(item.in_front ? &front : &place) += item.stored;
            list_item(&item);
            if (task->out != NULL) give_member(c, task, &item);
            else if (task->mode == 'c' && item.has_content) task->lost += !give_content(c, task, &item, NULL);
            task->items++;
            next++;
        }
    return next;
}

/* Items in the order of their numbers, each from the first copy of its batch that is whole. */
static void do_items(struct container *c, struct task *task) {
    uint64_t next = 0;
    for (size_t r = 0; r < c->count && !task->failed; r++) {
        const struct ref *ref = &c->refs[r];
        struct batch batch;
        if (ref->type != BATCH || ref->key < next || !read_batch(c, ref, &batch)) continue;
        miss(task, next, ref->key);
        next = do_batch(c, task, &batch, ref->key);
        free(batch.entries);
    }
    if (!task->failed) miss(task, next, c->items_told);
}

static const char *const text_names[] = { "", "the title page", "the specification", "the source of the reader" };

/* One of the three texts: to out, if that is not NULL. */
static void do_text(struct container *c, struct task *task, unsigned type, FILE *out) {
    byte page[BLOCK];
    uint64_t next;
    const struct ref *ref = find(c, type, 0, &next);
    if (ref == NULL && out != NULL) complain(LOSS, "nothing is left, if there ever was one, of", text_names[type]);
    task->lost += ref == NULL && out != NULL;
    if (ref == NULL) return;
    c->body = room(c->body, ref->bytes);
    bool whole = read_stream(c, ref->at, c->body, ref->bytes);
    give(task, out, NULL, c->body, ref->bytes);
    task->lost += !whole;
    if (!whole) complain(LOSS, "there are GAPS in", text_names[type]);
    if (type != TITLE || !whole) return;
    if (ref->bytes == BLOCK && read_at(c, 0, page, BLOCK) && memcmp(page, c->body, BLOCK) == 0) return;
    complain(SAFE, "page 0 is damaged; -1 prints", text_names[TITLE]);
    c->damaged = true;
}

static int run(struct container *c, struct task *task) {
    bool text = task->mode >= '1' && task->mode <= '3';
    if (!text) do_items(c, task);
    for (unsigned type = TITLE; type <= READER; type++)
        if (task->mode == 'c' || task->mode == (char)('0' + type)) do_text(c, task, type, text ? stdout : NULL);
    bool whole = task->lost + task->unknown == 0 && c->colophon_there;
    if (!text) {
        printf("%" PRIu64 " items", task->items);
        if (task->lost > 0) printf("; %" PRIu64 " ARE NOT WHOLE", task->lost);
        if (task->unknown > 0) printf("; %" PRIu64 " ARE LOST FROM THE CATALOGUE", task->unknown);
        if (!c->colophon_there) printf("; the end is lost, so THERE MAY HAVE BEEN MORE");
        printf("%s%s\n", c->damaged ? "; damaged blocks were met" : "", c->damaged && whole ? " and mended" : "");
    }
    give(task, task->out, NULL, NULL, 1024); /* the end of an archive */
    if (task->failed || (task->out != NULL && fclose(task->out) != 0))
        return complain(CANNOT_CREATE, "writing failed, is there room for", text ? "the text" : "the archive");
    return !whole ? LOSS : c->damaged ? SAFE : 0;
}

int main(int count, char **words) {
    static struct container c;
    struct task task = { .mode = 'l' };
    if (count > 2 && words[2][0] == '-' && strlen(words[2]) == 2) task.mode = words[2][1];
    bool archive = task.mode == 't' || task.mode == 'd';
    if (strchr("lctd123", task.mode) == NULL || count != (task.mode == 'l' ? 2 : archive ? 4 : 3))
        return complain(USAGE, "use it like this:", "reader FILE [-c | -t ARCHIVE | -d ARCHIVE | -1 | -2 | -3]");
    FILE *file = fopen(words[1], "rb"), *there = archive ? fopen(words[3], "rb") : NULL;
    if (file == NULL) return complain(NO_INPUT, "cannot open", words[1]);
    if (!open_container(&c, file)) return complain(BAD_DATA, "there is no sound block of format 1 in", words[1]);
    if (there != NULL) return complain(CANNOT_CREATE, "never writes over what is there:", words[3]);
    if (archive) task.out = fopen(words[3], "wb");
    if (archive && task.out == NULL) return complain(CANNOT_CREATE, "cannot write", words[3]);
    return run(&c, &task);
}
