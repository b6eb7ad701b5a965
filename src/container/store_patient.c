/* container/store_patient.c - a store in front of another one that reads again what does not read right */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "firn/store.h"

#include "container/ballot.h"
#include "guard/hash.h"

#include <string.h>

enum { SEEN = 1024 };      /* places remembered, so that a block counts once; a figure that may be a little high */

struct patient {
    const struct firn_memory *memory;
    struct firn_store inner;
    unsigned readings;
    uint64_t gained;
    uint64_t seen[SEEN];       /* places of blocks that were gained */
};

static void count_gain(struct patient *patient, uint64_t at)
{
    uint64_t *seen = &patient->seen[at / FIRN_BLOCK_BYTES % SEEN];

    patient->gained += *seen != at;
    *seen = at;
}

/* Whether another reading could help: what the lanes can mend is left for them to tell of. */
static bool beyond_its_lanes(const uint8_t *block)
{
    uint8_t trial[FIRN_BLOCK_BYTES];
    struct firn_block_tag tag;

    if (firn_hash_matches(block, FIRN_BLOCK_HASH_AT, block + FIRN_BLOCK_HASH_AT))
        return false;
    memcpy(trial, block, sizeof trial);
    return firn_block_open(trial, false, &tag) == FIRN_BLOCK_GONE;
}

static void read_again(struct patient *patient, uint64_t at, uint8_t *block)
{
    uint8_t again[FIRN_BLOCK_BYTES];

    memcpy(again, block, sizeof again);
    if (firn_ballot_reread(&patient->inner, at, patient->readings, true, patient->memory, again) != FIRN_OK)
        return;
    memcpy(block, again, sizeof again);
    count_gain(patient, at);
}

/* One block that could not be read: other readings, any of which may come through, right or wrong. */
static enum firn_status read_stubborn(struct patient *patient, uint64_t at, uint8_t *block, int *os_error)
{
    bool held = false;
    size_t got;
    int why;

    for (unsigned i = 0; i < patient->readings && !held; i++) {
        patient->inner.forget(patient->inner.self, at, FIRN_BLOCK_BYTES);
        held = patient->inner.read_at(patient->inner.self, at, block, FIRN_BLOCK_BYTES, &got, &why) == FIRN_OK &&
               got == FIRN_BLOCK_BYTES;
    }
    if (!held)
        return FIRN_IO;
    *os_error = 0;
    if (at == 0)
        return FIRN_OK;
    if (beyond_its_lanes(block))
        read_again(patient, at, block);
    else
        count_gain(patient, at);
    return FIRN_OK;
}

static enum firn_status patient_read_at(void *self, uint64_t at, void *bytes, size_t count, size_t *got, int *os_error)
{
    struct patient *patient = self;
    enum firn_status status = patient->inner.read_at(patient->inner.self, at, bytes, count, got, os_error);

    if (status != FIRN_OK && count == FIRN_BLOCK_BYTES && at % FIRN_BLOCK_BYTES == 0) {
        status = read_stubborn(patient, at, bytes, os_error);
        *got = status == FIRN_OK ? count : *got;
        return status;
    }
    if (at % FIRN_BLOCK_BYTES != 0 || patient->readings == 0)
        return status;
    for (size_t i = at == 0 ? FIRN_BLOCK_BYTES : 0; i + FIRN_BLOCK_BYTES <= *got; i += FIRN_BLOCK_BYTES)
        if (beyond_its_lanes((uint8_t *)bytes + i))
            read_again(patient, at + i, (uint8_t *)bytes + i);
    return status;
}

static enum firn_status patient_write_at(void *self, uint64_t at, const void *bytes, size_t count, int *os_error)
{
    struct patient *patient = self;

    return patient->inner.write_at(patient->inner.self, at, bytes, count, os_error);
}

static enum firn_status patient_size(void *self, uint64_t *bytes, int *os_error)
{
    struct patient *patient = self;

    return patient->inner.size(patient->inner.self, bytes, os_error);
}

static enum firn_status patient_resize(void *self, uint64_t bytes, int *os_error)
{
    struct patient *patient = self;

    return patient->inner.resize(patient->inner.self, bytes, os_error);
}

static enum firn_status patient_sync(void *self, int *os_error)
{
    struct patient *patient = self;

    return patient->inner.sync(patient->inner.self, os_error);
}

static void patient_forget(void *self, uint64_t at, uint64_t bytes)
{
    struct patient *patient = self;

    patient->inner.forget(patient->inner.self, at, bytes);
}

static void patient_close(void *self)
{
    struct patient *patient = self;

    patient->memory->put(patient->memory->self, patient);
}

/* As it is: who finds fault with what was lent reads it with read_at. */
static enum firn_status patient_lend(void *self, uint64_t at, size_t count, uint8_t **bytes)
{
    struct patient *patient = self;

    return patient->inner.lend == NULL ? FIRN_END
                                       : patient->inner.lend(patient->inner.self, at, count, bytes);
}

enum firn_status firn_store_patient(struct firn_store *inner, unsigned readings, const struct firn_memory *memory,
                                    struct firn_store *store)
{
    struct patient *patient = memory->get(memory->self, sizeof *patient);

    if (patient == NULL)
        return FIRN_NO_MEMORY;
    *patient = (struct patient){ .memory = memory, .inner = *inner, .readings = readings };
    *store = (struct firn_store){ patient, patient_read_at, patient_write_at, patient_size, patient_resize,
                                  patient_sync, patient_forget, patient_close, patient_lend };
    return FIRN_OK;
}

uint64_t firn_store_patient_gained(const struct firn_store *store)
{
    return store->close == patient_close ? ((const struct patient *)store->self)->gained : 0;
}
