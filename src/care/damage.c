/* care/damage.c - models of damage: where the next spoiled bit, block or run is, and a walk over the file */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "care/damage.h"

#include "base/fault.h"

#include <string.h>

enum { PORTION_BYTES = 1 << 20, LOST_BYTES = 4096 };

/* Each model has a sequence of its own. */
enum model { FLIPS, LOSSES, BURSTS, RUNS };

static uint64_t scramble(uint64_t x)
{
    x = (x ^ x >> 30) * UINT64_C(0xBF58476D1CE4E5B9);
    x = (x ^ x >> 27) * UINT64_C(0x94D049BB133111EB);
    return x ^ x >> 31;
}

uint64_t firn_damage_random(uint64_t *state)
{
    *state += UINT64_C(0x9E3779B97F4A7C15);
    return scramble(*state);
}

static uint64_t sequence_of(uint64_t seed, uint64_t trial, enum model model)
{
    return scramble(scramble(scramble(seed) + trial) + (uint64_t)model + 1);
}

void firn_damage_wait_make(double rate, struct firn_damage_wait *wait)
{
    double missed = rate;      /* 1 - (1 - rate)^(2^i), which stays exact where the rate is tiny */

    wait->never = rate <= 0;
    for (unsigned i = 0; i < 64; i++) {
        wait->digit_chances[i] = (uint64_t)((1 - missed) / (2 - missed) * 18446744073709551616.0);
        missed *= 2 - missed;
        missed = missed < 1 ? missed : 1;
    }
}

uint64_t firn_damage_wait_next(const struct firn_damage_wait *wait, uint64_t *state)
{
    uint64_t number = 0;

    if (wait->never)
        return UINT64_MAX;
    for (unsigned i = 0; i < 64 && wait->digit_chances[i] > 0; i++)
        number |= (uint64_t)(firn_damage_random(state) < wait->digit_chances[i]) << i;
    return number;
}

static uint64_t add_capped(uint64_t a, uint64_t b)
{
    return b > UINT64_MAX - a ? UINT64_MAX : a + b;
}

/* Things of one kind that are independently hit: bits, blocks. */
struct strikes {
    struct firn_damage_wait wait;
    uint64_t state;
    uint64_t next;      /* the next one hit */
};

static void strikes_start(struct strikes *strikes, double rate, uint64_t state)
{
    firn_damage_wait_make(rate, &strikes->wait);
    strikes->state = state;
    strikes->next = firn_damage_wait_next(&strikes->wait, &strikes->state);
}

static void strikes_advance(struct strikes *strikes)
{
    strikes->next = add_capped(strikes->next, add_capped(firn_damage_wait_next(&strikes->wait, &strikes->state), 1));
}

/* The chain of Gilbert and Elliott; index 1 is the bad state. */
struct chain {
    struct firn_damage_wait leave[2], wrong[2];
    uint64_t state;
    uint64_t bits;             /* of the file */
    unsigned bad;
    uint64_t until;            /* the bit with which the other state begins */
    uint64_t next;             /* the next flipped bit; `bits` when there is none */
    uint64_t bursts, bad_bits;
};

/* Spends some time in the state that the chain is in, from bit `at` on. */
static void chain_dwell(struct chain *chain, uint64_t at)
{
    uint64_t stay = add_capped(firn_damage_wait_next(&chain->leave[chain->bad], &chain->state), 1);

    chain->until = add_capped(at, stay);
    chain->until = chain->until < chain->bits ? chain->until : chain->bits;
    if (chain->bad) {
        chain->bursts++;
        chain->bad_bits += chain->until - at;
    }
}

/* Looks for the next flipped bit from `at` on; waiting has no memory, so every state starts afresh. */
static void chain_seek(struct chain *chain, uint64_t at)
{
    for (;;) {
        uint64_t hit = add_capped(at, firn_damage_wait_next(&chain->wrong[chain->bad], &chain->state));

        if (hit < chain->until || chain->until == chain->bits) {
            chain->next = hit < chain->until ? hit : chain->bits;
            return;
        }
        at = chain->until;
        chain->bad = !chain->bad;
        chain_dwell(chain, at);
    }
}

static void chain_start(struct chain *chain, const struct firn_drill_damage *damage, uint64_t bits, uint64_t state)
{
    struct firn_damage_wait begins_bad;

    *chain = (struct chain){ .state = state, .bits = bits, .next = bits };
    if (damage->good_to_bad <= 0 || bits == 0)
        return;
    firn_damage_wait_make(damage->good_to_bad, &chain->leave[0]);
    firn_damage_wait_make(damage->bad_to_good, &chain->leave[1]);
    firn_damage_wait_make(damage->wrong_in_good, &chain->wrong[0]);
    firn_damage_wait_make(damage->wrong_in_bad, &chain->wrong[1]);
    firn_damage_wait_make(damage->good_to_bad / (damage->good_to_bad + damage->bad_to_good), &begins_bad);
    chain->bad = firn_damage_wait_next(&begins_bad, &chain->state) == 0;
    chain_dwell(chain, 0);
    chain_seek(chain, 0);
}

struct spoiling {
    const struct firn_drill_damage *damage;
    struct firn_drill_spoiled *spoiled;
    uint64_t bytes;
    struct strikes flips, losses;
    struct chain chain;
    uint64_t fill;                              /* what overwritten bytes follow from */
    uint64_t run_at[FIRN_DRILL_RUNS_MAX];
};

static void start(struct spoiling *s, uint64_t seed, uint64_t trial)
{
    const struct firn_drill_damage *damage = s->damage;
    uint64_t runs = sequence_of(seed, trial, RUNS);

    strikes_start(&s->flips, damage->flip_rate, sequence_of(seed, trial, FLIPS));
    strikes_start(&s->losses, damage->lose_rate, sequence_of(seed, trial, LOSSES));
    chain_start(&s->chain, damage, s->bytes * 8, sequence_of(seed, trial, BURSTS));
    s->fill = firn_damage_random(&runs);
    for (size_t i = 0; i < damage->run_count; i++)
        s->run_at[i] = firn_damage_random(&runs) % (s->bytes - damage->runs[i] + 1);
}

/* Whether anything happens before byte `end`, in what is left of the file. */
static bool touched(const struct spoiling *s, uint64_t from, uint64_t end)
{
    bool hit = s->flips.next / 8 < end || s->chain.next / 8 < end ||
               s->losses.next < (end + LOST_BYTES - 1) / LOST_BYTES;

    for (size_t i = 0; i < s->damage->run_count; i++)
        hit = hit || (s->run_at[i] < end && s->run_at[i] + s->damage->runs[i] > from);
    return hit;
}

/* Overwrites file[at .. at + count) as far as it lies in portion[from .. end). */
static void overwrite(const struct spoiling *s, uint8_t *portion, uint64_t from, uint64_t end, uint64_t at,
                      uint64_t count)
{
    uint64_t stop = count < end - at ? at + count : end;

    for (uint64_t i = at > from ? at : from; i < stop; i++)
        portion[i - from] = (uint8_t)(scramble(s->fill + i / 8 * UINT64_C(0x9E3779B97F4A7C15)) >> i % 8 * 8);
}

static void spoil_portion(struct spoiling *s, uint8_t *portion, uint64_t from, uint64_t end)
{
    for (; s->flips.next / 8 < end; strikes_advance(&s->flips)) {
        portion[s->flips.next / 8 - from] ^= (uint8_t)(1U << s->flips.next % 8);
        s->spoiled->flipped_bits++;
    }
    for (; s->chain.next / 8 < end; chain_seek(&s->chain, s->chain.next + 1)) {
        portion[s->chain.next / 8 - from] ^= (uint8_t)(1U << s->chain.next % 8);
        s->spoiled->burst_bits++;
    }
    for (; s->losses.next < (end + LOST_BYTES - 1) / LOST_BYTES; strikes_advance(&s->losses)) {
        overwrite(s, portion, from, end, s->losses.next * LOST_BYTES, LOST_BYTES);
        s->spoiled->lost_blocks++;
    }
    for (size_t i = 0; i < s->damage->run_count; i++)
        if (s->run_at[i] < end && s->run_at[i] + s->damage->runs[i] > from)
            overwrite(s, portion, from, end, s->run_at[i], s->damage->runs[i]);
}

static enum firn_status spoil_all(struct spoiling *s, struct firn_store *store, uint8_t *portion,
                                  struct firn_fault *fault)
{
    for (uint64_t at = 0; at < s->bytes; at += PORTION_BYTES) {
        uint64_t end = s->bytes - at < PORTION_BYTES ? s->bytes : at + PORTION_BYTES;
        enum firn_status status;
        size_t got = 0;
        int why = 0;

        if (!touched(s, at, end))
            continue;
        status = store->read_at(store->self, at, portion, (size_t)(end - at), &got, &why);
        if (status == FIRN_OK && got < end - at)
            status = FIRN_IO;
        if (status == FIRN_OK) {
            spoil_portion(s, portion, at, end);
            status = store->write_at(store->self, at, portion, (size_t)(end - at), &why);
        }
        if (status != FIRN_OK)
            return firn_fault_tell(fault, status, why, at, "the copy to be spoiled");
    }
    return FIRN_OK;
}

enum firn_status firn_damage_check(const struct firn_drill_damage *damage, uint64_t file_bytes, const char **wrong)
{
    const struct { double rate; const char *words; } rates[] = {
        { damage->flip_rate, "a flip rate is a chance, 0 to 1" },
        { damage->lose_rate, "a lose rate is a chance, 0 to 1" },
        { damage->good_to_bad, "good to bad is a chance, 0 to 1" },
        { damage->bad_to_good, "bad to good is a chance, 0 to 1" },
        { damage->wrong_in_good, "right in good is a chance, 0 to 1" },
        { damage->wrong_in_bad, "right in bad is a chance, 0 to 1" },
    };

    for (size_t i = 0; i < sizeof rates / sizeof rates[0]; i++) {
        *wrong = rates[i].words;
        if (!(rates[i].rate >= 0 && rates[i].rate <= 1))
            return FIRN_BAD_ARGUMENT;
    }
    *wrong = "bursts that begin must end: give the chance of bad to good too";
    if (damage->good_to_bad > 0 && damage->bad_to_good <= 0)
        return FIRN_BAD_ARGUMENT;
    *wrong = "too many runs";
    if (damage->run_count > FIRN_DRILL_RUNS_MAX)
        return FIRN_BAD_ARGUMENT;
    for (size_t i = 0; i < damage->run_count; i++) {
        *wrong = "a run is longer than the file";
        if (damage->runs[i] > file_bytes)
            return FIRN_BAD_ARGUMENT;
    }
    *wrong = NULL;
    return FIRN_OK;
}

enum firn_status firn_damage_spoil(const struct firn_drill_damage *damage, uint64_t seed, uint64_t trial,
                                   struct firn_store *store, const struct firn_memory *memory,
                                   struct firn_drill_spoiled *spoiled, struct firn_fault *fault)
{
    struct spoiling s = { .damage = damage, .spoiled = spoiled };
    uint8_t *portion;
    int why = 0;
    enum firn_status status = store->size(store->self, &s.bytes, &why);

    *spoiled = (struct firn_drill_spoiled){ .bytes = s.bytes };
    if (status != FIRN_OK)
        return firn_fault_tell(fault, status, why, 0, "the copy to be spoiled");
    portion = memory->get(memory->self, PORTION_BYTES);
    if (portion == NULL)
        return firn_fault_tell(fault, FIRN_NO_MEMORY, 0, 0, "");
    start(&s, seed, trial);
    status = spoil_all(&s, store, portion, fault);
    memory->put(memory->self, portion);
    spoiled->bursts = s.chain.bursts;
    spoiled->bad_bits = s.chain.bad_bits;
    for (size_t i = 0; i < damage->run_count; i++)
        spoiled->run_bytes += damage->runs[i];
    spoiled->cut_bytes = damage->cut_bytes < s.bytes ? damage->cut_bytes : s.bytes;
    if (status == FIRN_OK && spoiled->cut_bytes > 0 &&
        (status = store->resize(store->self, s.bytes - spoiled->cut_bytes, &why)) != FIRN_OK)
        (void)firn_fault_tell(fault, status, why, 0, "the copy to be spoiled");
    return status;
}
