/*
 * container/digest.h - SHA-256, and what else a manifest may ask for, by OpenSSL's libcrypto
 *
 * Room: container. SHA-256, SHA-512, SHA-1: FIPS 180-4; MD5: RFC 1321. The format itself knows SHA-256 only.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CONTAINER_DIGEST_H
#define FIRN_CONTAINER_DIGEST_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum { FIRN_DIGEST_BYTES = 32, FIRN_DIGEST_BYTES_MAX = 64 };

enum firn_digest_kind { FIRN_DIGEST_SHA256, FIRN_DIGEST_SHA512, FIRN_DIGEST_SHA1, FIRN_DIGEST_MD5 };

struct firn_digest;      /* libcrypto's context */

/* SHA-256. FIRN_OK or FIRN_NO_MEMORY. */
enum firn_status firn_digest_make(struct firn_digest **out);
/* FIRN_OK; FIRN_NO_MEMORY; FIRN_FOREIGN_FORMAT: this system's libcrypto is kept from doing it (MD5, by policy). */
enum firn_status firn_digest_make_kind(enum firn_digest_kind kind, struct firn_digest **out);
void firn_digest_free(struct firn_digest *digest);      /* takes NULL */

/* Begins anew, whatever was there before. */
void firn_digest_start(struct firn_digest *digest);
void firn_digest_add(struct firn_digest *digest, const uint8_t *bytes, size_t count);
void firn_digest_add_zeros(struct firn_digest *digest, uint64_t count);
void firn_digest_finish(struct firn_digest *digest, uint8_t *bytes);      /* as many as the kind has */

size_t firn_digest_size(enum firn_digest_kind kind);

#endif
