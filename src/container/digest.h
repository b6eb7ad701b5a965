/*
 * container/digest.h - SHA-256 by OpenSSL's libcrypto
 *
 * Room: container. FIPS 180-4.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_DIGEST_H
#define FIRN_CONTAINER_DIGEST_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum { FIRN_DIGEST_BYTES = 32 };

struct firn_digest;      /* libcrypto's context */

enum firn_status firn_digest_make(struct firn_digest **out);
void firn_digest_free(struct firn_digest *digest);      /* takes NULL */

/* Begins anew, whatever was there before. */
void firn_digest_start(struct firn_digest *digest);
void firn_digest_add(struct firn_digest *digest, const uint8_t *bytes, size_t count);
void firn_digest_add_zeros(struct firn_digest *digest, uint64_t count);
void firn_digest_finish(struct firn_digest *digest, uint8_t sha256[FIRN_DIGEST_BYTES]);

#endif
