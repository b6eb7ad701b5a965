/* care/mend.c - the mend journal: written and sealed, looked at, played (format-spec/mend.md) */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/mend.h"

#include "base/bytes.h"
#include "base/fault.h"
#include "base/memory.h"
#include "base/text.h"
#include "guard/hash.h"

#include <errno.h>

/* format-spec/mend.md, table 1: the head of the journal */
enum { MAGIC_AT = 0, VERSION_AT = 8, ID_AT = 16, SIZE_AT = 24, HEAD_HASH_AT = 32, HEAD_BYTES = 48, VERSION = 1 };

/* table 2: an entry; the seal is one of no bytes. In memory the hash of what comes before stands in front of it. */
enum {
    ENTRY_PLACE_AT = 0, ENTRY_LENGTH_AT = 8, ENTRY_ZERO_AT = 12, ENTRY_HEAD_BYTES = 16,
    ENTRY_BLOCKS_MAX = 64, ENTRY_BYTES_MAX = ENTRY_BLOCKS_MAX * FIRN_BLOCK_BYTES,
    PIECE_ENTRY_AT = FIRN_HASH_BYTES, PIECE_BYTES_AT = PIECE_ENTRY_AT + ENTRY_HEAD_BYTES,
    PIECE_ROOM = PIECE_BYTES_AT + ENTRY_BYTES_MAX + FIRN_HASH_BYTES
};

static const uint8_t magic[8] = { 'F', 'I', 'R', 'N', 'M', 'E', 'N', 'D' };

/* A journal being written. */
struct firn_mend {
    struct firn_mend_subject subject;
    struct firn_store journal;
    bool made;                 /* journal is open, and its file is there */
    bool stays;                /* sealed, and blocks may have been written: only a finished repair removes it */
    uint8_t id[FIRN_BLOCK_ID_BYTES];
    uint64_t at;               /* its end */
    uint64_t entries;
    uint64_t pending_place;    /* of the entry that is being gathered in piece */
    size_t pending_bytes;
    uint8_t *piece;
};

/* A journal being read, piece by piece; every piece is judged by its hash before it is believed. */
struct walk {
    const struct firn_mend_subject *subject;
    struct firn_store *journal;
    bool open;
    uint8_t *piece;
    uint8_t id[FIRN_BLOCK_ID_BYTES];
    uint64_t at, size, entries;
    /* the entry in piece */
    uint64_t place;
    size_t length;
};

static enum firn_status tell(const struct firn_mend_subject *subject, struct firn_fault *fault, enum firn_status status,
                             int why, const char *words)
{
    char what[sizeof fault->what];
    struct firn_text text;

    firn_text_start(&text, what, sizeof what);
    firn_text_add(&text, "%s%s", subject->place->name, words);
    return firn_fault_tell(fault, status, why, 0, what);
}

/* --- writing --- */

static enum firn_status append(struct firn_mend *mend, const uint8_t *bytes, size_t count, struct firn_fault *fault)
{
    int why;
    enum firn_status status = mend->journal.write_at(mend->journal.self, mend->at, bytes, count, &why);

    if (status != FIRN_OK)
        return tell(&mend->subject, fault, FIRN_IO, why, "");
    mend->at += count;
    return FIRN_OK;
}

/* Puts head and hash around the bytes that stand in piece, and appends them. word: the place; in a seal the count. */
static enum firn_status append_piece(struct firn_mend *mend, uint64_t word, size_t length, struct firn_fault *fault)
{
    uint8_t *entry = mend->piece + PIECE_ENTRY_AT, *hash = mend->piece + PIECE_BYTES_AT + length;
    enum firn_status status;

    firn_bytes_put64(entry + ENTRY_PLACE_AT, word);
    firn_bytes_put32(entry + ENTRY_LENGTH_AT, (uint32_t)length);
    firn_bytes_put32(entry + ENTRY_ZERO_AT, 0);
    firn_hash_put(mend->piece, PIECE_BYTES_AT + length, hash);
    status = append(mend, entry, ENTRY_HEAD_BYTES + length + FIRN_HASH_BYTES, fault);
    memmove(mend->piece, hash, FIRN_HASH_BYTES);
    return status;
}

static enum firn_status append_head(struct firn_mend *mend, struct firn_fault *fault)
{
    struct firn_store *container = mend->subject.container;
    uint8_t head[HEAD_BYTES] = { 0 };
    uint64_t size;
    int why;

    if (container->size(container->self, &size, &why) != FIRN_OK)
        return firn_fault_tell(fault, FIRN_IO, why, 0, "");
    memcpy(head + MAGIC_AT, magic, sizeof magic);
    firn_bytes_put32(head + VERSION_AT, VERSION);
    memcpy(head + ID_AT, mend->id, sizeof mend->id);
    firn_bytes_put64(head + SIZE_AT, size);
    firn_hash_put(head, HEAD_HASH_AT, head + HEAD_HASH_AT);
    memcpy(mend->piece, head + HEAD_HASH_AT, FIRN_HASH_BYTES);
    return append(mend, head, sizeof head, fault);
}

enum firn_status firn_mend_begin(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                 struct firn_fault *fault, struct firn_mend **out)
{
    const struct firn_memory *memory = subject->memory;
    struct firn_mend *mend = firn_memory_get_zeroed(memory, 1, sizeof *mend);
    enum firn_status status;

    *out = NULL;
    if (mend == NULL)
        return tell(subject, fault, FIRN_NO_MEMORY, 0, "");
    mend->subject = *subject;
    memcpy(mend->id, id, sizeof mend->id);
    mend->piece = memory->get(memory->self, PIECE_ROOM);
    status = mend->piece == NULL ? tell(subject, fault, FIRN_NO_MEMORY, 0, "")
                                 : subject->place->make(subject->place->self, &mend->journal, fault);
    mend->made = status == FIRN_OK;
    if (status == FIRN_OK)
        status = append_head(mend, fault);
    if (status != FIRN_OK) {
        firn_mend_free(mend);
        return status;
    }
    *out = mend;
    return FIRN_OK;
}

static enum firn_status append_pending(struct firn_mend *mend, struct firn_fault *fault)
{
    size_t length = mend->pending_bytes;

    if (length == 0)
        return FIRN_OK;
    mend->pending_bytes = 0;
    mend->entries++;
    return append_piece(mend, mend->pending_place, length, fault);
}

enum firn_status firn_mend_add(struct firn_mend *mend, uint64_t at, const uint8_t *block, struct firn_fault *fault)
{
    enum firn_status status = FIRN_OK;

    if (mend->pending_bytes == ENTRY_BYTES_MAX || at != mend->pending_place + mend->pending_bytes)
        status = append_pending(mend, fault);
    if (mend->pending_bytes == 0)
        mend->pending_place = at;
    memcpy(mend->piece + PIECE_BYTES_AT + mend->pending_bytes, block, FIRN_BLOCK_BYTES);
    mend->pending_bytes += FIRN_BLOCK_BYTES;
    return status;
}

/* After this the journal is on the medium, name and all. */
static enum firn_status seal(struct firn_mend *mend, struct firn_fault *fault)
{
    const struct firn_mend_place *place = mend->subject.place;
    enum firn_status status = append_pending(mend, fault);
    int why;

    if (status == FIRN_OK)
        status = append_piece(mend, mend->entries, 0, fault);
    if (status == FIRN_OK && mend->journal.sync(mend->journal.self, &why) != FIRN_OK)
        status = tell(&mend->subject, fault, FIRN_IO, why, "");
    return status == FIRN_OK ? place->settle(place->self, fault) : status;
}

void firn_mend_free(struct firn_mend *mend)
{
    const struct firn_memory *memory;

    if (mend == NULL)
        return;
    memory = mend->subject.memory;
    if (mend->made)
        mend->journal.close(mend->journal.self);
    if (mend->made && !mend->stays)
        (void)mend->subject.place->remove(mend->subject.place->self, NULL);      /* unsealed it does no harm */
    memory->put(memory->self, mend->piece);
    memory->put(memory->self, mend);
}

/* --- reading --- */

/* Reads count bytes. FIRN_END when so many are not there. */
static enum firn_status fetch(struct walk *walk, uint8_t *bytes, size_t count, struct firn_fault *fault)
{
    size_t got;
    int why;

    if (walk->journal->read_at(walk->journal->self, walk->at, bytes, count, &got, &why) != FIRN_OK)
        return tell(walk->subject, fault, FIRN_IO, why, "");
    walk->at += got;
    return got < count ? FIRN_END : FIRN_OK;
}

static bool all_zero(const uint8_t *bytes, size_t count)
{
    while (count > 0 && bytes[count - 1] == 0)
        count--;
    return count == 0;
}

/* Starts at the head. state is FIRN_MEND_SEALED when the head is fine: then the pieces decide. */
static enum firn_status start(struct walk *walk, enum firn_mend_state *state, struct firn_fault *fault)
{
    uint8_t head[HEAD_BYTES] = { 0 };
    enum firn_status status;
    size_t there;
    int why;

    walk->at = walk->entries = 0;
    if (walk->journal->size(walk->journal->self, &walk->size, &why) != FIRN_OK)
        return tell(walk->subject, fault, FIRN_IO, why, "");
    there = walk->size < HEAD_BYTES ? (size_t)walk->size : HEAD_BYTES;
    status = fetch(walk, head, there, fault);
    if (status == FIRN_IO)
        return status;
    /* Whatever is not ours must not be removed. Power cuts leave beginnings of what is, and zeros. */
    if (!all_zero(head, there) && memcmp(head, magic, there < sizeof magic ? there : sizeof magic) != 0)
        *state = FIRN_MEND_STRANGE;
    else if (there < HEAD_BYTES || !firn_hash_matches(head, HEAD_HASH_AT, head + HEAD_HASH_AT))
        *state = FIRN_MEND_UNSEALED;
    else
        *state = firn_bytes_get32(head + VERSION_AT) == VERSION ? FIRN_MEND_SEALED : FIRN_MEND_STRANGE;
    memcpy(walk->id, head + ID_AT, sizeof walk->id);
    memcpy(walk->piece, head + HEAD_HASH_AT, FIRN_HASH_BYTES);
    return FIRN_OK;
}

/* The next entry into piece. FIRN_OK, FIRN_END after the seal, FIRN_BAD_DATA when there is none, FIRN_IO. */
static enum firn_status next(struct walk *walk, struct firn_fault *fault)
{
    uint8_t *entry = walk->piece + PIECE_ENTRY_AT, *hash;
    enum firn_status status = fetch(walk, entry, ENTRY_HEAD_BYTES, fault);

    if (status != FIRN_OK)
        return status == FIRN_END ? FIRN_BAD_DATA : status;
    walk->place = firn_bytes_get64(entry + ENTRY_PLACE_AT);
    walk->length = firn_bytes_get32(entry + ENTRY_LENGTH_AT);
    if (walk->length > ENTRY_BYTES_MAX || walk->length % FIRN_BLOCK_BYTES != 0)
        return FIRN_BAD_DATA;
    hash = walk->piece + PIECE_BYTES_AT + walk->length;
    status = fetch(walk, walk->piece + PIECE_BYTES_AT, walk->length + FIRN_HASH_BYTES, fault);
    if (status != FIRN_OK)
        return status == FIRN_END ? FIRN_BAD_DATA : status;
    if (!firn_hash_matches(walk->piece, PIECE_BYTES_AT + walk->length, hash))
        return FIRN_BAD_DATA;
    memmove(walk->piece, hash, FIRN_HASH_BYTES);
    if (walk->length == 0)
        return walk->place == walk->entries && walk->at == walk->size ? FIRN_END : FIRN_BAD_DATA;
    walk->entries++;
    return FIRN_OK;
}

/* Whether every block of the entry says itself that it belongs to this container at this place. */
static bool vouched(struct walk *walk)
{
    uint64_t place = walk->place;
    struct firn_block_tag tag;

    if (place % FIRN_BLOCK_BYTES != 0 || place > INT64_MAX - walk->length)
        return false;
    for (size_t i = 0; i < walk->length; i += FIRN_BLOCK_BYTES, place += FIRN_BLOCK_BYTES)
        if (place > 0      /* the title page has no tag; the seal alone vouches for it */
            && (firn_block_open(walk->piece + PIECE_BYTES_AT + i, true, &tag) != FIRN_BLOCK_SOUND
                || memcmp(tag.id, walk->id, sizeof tag.id) != 0 || tag.number != place / FIRN_BLOCK_BYTES - 1))
            return false;
    return true;
}

/* Reads all of it and says what it is; a sealed one can be played then. */
static enum firn_status classify(struct walk *walk, const uint8_t *id, enum firn_mend_state *state,
                                 struct firn_fault *fault)
{
    enum firn_status status = start(walk, state, fault);
    bool fine = true;

    if (status != FIRN_OK || *state != FIRN_MEND_SEALED)
        return status;
    while ((status = next(walk, fault)) == FIRN_OK)
        fine = fine && vouched(walk);
    if (status == FIRN_IO)
        return status;
    if (status == FIRN_BAD_DATA)
        *state = FIRN_MEND_UNSEALED;
    else if (memcmp(walk->id, id, sizeof walk->id) != 0)
        *state = FIRN_MEND_OTHER;
    else if (!fine)
        *state = FIRN_MEND_STRANGE;
    return FIRN_OK;
}

/* --- playing --- */

/* Calls deed for every entry of a journal that was found sealed. */
static enum firn_status for_all(struct walk *walk, void (*deed)(struct walk *walk, void *self), void *self,
                                struct firn_fault *fault)
{
    enum firn_mend_state state;
    enum firn_status status = start(walk, &state, fault);

    while (status == FIRN_OK && (status = next(walk, fault)) == FIRN_OK)
        deed(walk, self);
    if (status == FIRN_BAD_DATA)      /* it was fine a moment ago */
        return tell(walk->subject, fault, FIRN_IO, EIO, "");
    return status == FIRN_END ? FIRN_OK : status;
}

struct play {
    struct firn_mend_outcome *outcome;
    uint8_t *seen;      /* what the medium gives back: one block */
};

/* What the medium does not take is found out when it is read back, so a failed write only leads to smaller ones. */
static void write_entry(struct walk *walk, void *self)
{
    struct firn_mend_outcome *outcome = ((struct play *)self)->outcome;
    struct firn_store *container = walk->subject->container;
    const uint8_t *bytes = walk->piece + PIECE_BYTES_AT;
    int why;

    if (container->write_at(container->self, walk->place, bytes, walk->length, &why) == FIRN_OK)
        return;
    for (size_t i = 0; i < walk->length; i += FIRN_BLOCK_BYTES)
        if (container->write_at(container->self, walk->place + i, bytes + i, FIRN_BLOCK_BYTES, &why) != FIRN_OK
            && outcome->os_error == 0) {
            outcome->os_error = why;
            outcome->refused_at = walk->place + i;
        }
}

static void read_back(struct walk *walk, void *self)
{
    struct play *play = self;
    struct firn_mend_outcome *outcome = play->outcome;
    struct firn_store *container = walk->subject->container;
    const uint8_t *bytes = walk->piece + PIECE_BYTES_AT;

    container->forget(container->self, walk->place, walk->length);
    for (size_t i = 0; i < walk->length; i += FIRN_BLOCK_BYTES) {
        size_t got;
        int why;

        if (container->read_at(container->self, walk->place + i, play->seen, FIRN_BLOCK_BYTES, &got, &why) == FIRN_OK
            && got == FIRN_BLOCK_BYTES && memcmp(play->seen, bytes + i, FIRN_BLOCK_BYTES) == 0) {
            outcome->written++;
        } else if (outcome->refused++ == 0 && outcome->os_error == 0) {
            outcome->refused_at = walk->place + i;
        }
    }
}

/* Plays a sealed journal that is on the medium, and removes it. */
static enum firn_status play_and_remove(struct walk *walk, struct firn_mend_outcome *outcome, struct firn_fault *fault)
{
    const struct firn_mend_subject *subject = walk->subject;
    struct firn_store *container = subject->container;
    uint8_t seen[FIRN_BLOCK_BYTES];
    struct play play = { outcome, seen };
    enum firn_status status = for_all(walk, write_entry, &play, fault);
    int why;

    if (status == FIRN_OK && container->sync(container->self, &why) != FIRN_OK)
        status = firn_fault_tell(fault, FIRN_IO, why, 0, "");
    if (status == FIRN_OK)
        status = for_all(walk, read_back, &play, fault);
    return status == FIRN_OK ? subject->place->remove(subject->place->self, fault) : status;
}

enum firn_status firn_mend_finish(struct firn_mend *mend, struct firn_mend_outcome *outcome, struct firn_fault *fault)
{
    struct walk walk = { .subject = &mend->subject, .journal = &mend->journal, .piece = mend->piece };
    enum firn_mend_state state = FIRN_MEND_NONE;
    enum firn_status status = seal(mend, fault);

    *outcome = (struct firn_mend_outcome){ 0 };
    if (status == FIRN_OK)
        status = classify(&walk, mend->id, &state, fault);
    if (status != FIRN_OK)
        return status;
    if (state == FIRN_MEND_STRANGE)
        return tell(&mend->subject, fault, FIRN_BAD_DATA, 0, " holds a block that is not sound");
    if (state != FIRN_MEND_SEALED)
        return tell(&mend->subject, fault, FIRN_IO, EIO, " does not read back as it was written");
    mend->stays = true;
    return play_and_remove(&walk, outcome, fault);
}

/* Opens what is there, if anything, and says what it is. Whatever is returned, end_walk follows. */
static enum firn_status begin_walk(struct walk *walk, const uint8_t *id, enum firn_mend_state *state,
                                   struct firn_fault *fault)
{
    const struct firn_mend_subject *subject = walk->subject;
    enum firn_status status;

    *state = FIRN_MEND_NONE;
    walk->piece = subject->memory->get(subject->memory->self, PIECE_ROOM);
    if (walk->piece == NULL)
        return tell(subject, fault, FIRN_NO_MEMORY, 0, "");
    status = subject->place->open(subject->place->self, walk->journal, fault);
    walk->open = status == FIRN_OK;
    if (status == FIRN_OK)
        return classify(walk, id, state, fault);
    if (status == FIRN_BAD_DATA)
        *state = FIRN_MEND_STRANGE;
    return status == FIRN_END || status == FIRN_BAD_DATA ? FIRN_OK : status;
}

static void end_walk(struct walk *walk)
{
    if (walk->open)
        walk->journal->close(walk->journal->self);
    walk->subject->memory->put(walk->subject->memory->self, walk->piece);
}

enum firn_status firn_mend_look(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                enum firn_mend_state *state, struct firn_fault *fault)
{
    struct firn_store journal;
    struct walk walk = { .subject = subject, .journal = &journal };
    enum firn_status status = begin_walk(&walk, id, state, fault);

    end_walk(&walk);
    return status;
}

/* Does what the state of the journal asks for. */
static enum firn_status deal_with(struct walk *walk, enum firn_mend_state state, struct firn_mend_outcome *outcome,
                               struct firn_fault *fault)
{
    const struct firn_mend_place *place = walk->subject->place;

    switch (state) {
    case FIRN_MEND_SEALED:
        return play_and_remove(walk, outcome, fault);
    case FIRN_MEND_UNSEALED:
        return place->remove(place->self, fault);
    case FIRN_MEND_OTHER:
        return tell(walk->subject, fault, FIRN_BAD_DATA, 0,
                    ", the mend journal of another container: put it beside that one, or remove it");
    case FIRN_MEND_STRANGE:
        return tell(walk->subject, fault, FIRN_BAD_DATA, 0,
                    ", which is no mend journal that can be used: move it elsewhere");
    default:
        return FIRN_OK;
    }
}

enum firn_status firn_mend_resume(const struct firn_mend_subject *subject, const uint8_t id[FIRN_BLOCK_ID_BYTES],
                                  enum firn_mend_state *state, struct firn_mend_outcome *outcome,
                                  struct firn_fault *fault)
{
    struct firn_store journal;
    struct walk walk = { .subject = subject, .journal = &journal };
    enum firn_status status = begin_walk(&walk, id, state, fault);

    *outcome = (struct firn_mend_outcome){ 0 };
    if (status == FIRN_OK)
        status = deal_with(&walk, *state, outcome, fault);
    end_walk(&walk);
    return status;
}
