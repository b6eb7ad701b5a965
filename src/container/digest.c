/* container/digest.c - digests by OpenSSL's libcrypto */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "container/digest.h"

#include <openssl/evp.h>

/* The opaque struct firn_digest is libcrypto's EVP_MD_CTX under our name. */
static EVP_MD_CTX *context(struct firn_digest *digest)
{
    return (EVP_MD_CTX *)(void *)digest;
}

static const EVP_MD *method(enum firn_digest_kind kind)
{
    switch (kind) {
    case FIRN_DIGEST_SHA512: return EVP_sha512();
    case FIRN_DIGEST_SHA1:   return EVP_sha1();
    case FIRN_DIGEST_MD5:    return EVP_md5();
    case FIRN_DIGEST_SHA256: break;
    }
    return EVP_sha256();
}

size_t firn_digest_size(enum firn_digest_kind kind)
{
    return (size_t)EVP_MD_get_size(method(kind));
}

enum firn_status firn_digest_make(struct firn_digest **out)
{
    return firn_digest_make_kind(FIRN_DIGEST_SHA256, out) == FIRN_OK ? FIRN_OK : FIRN_NO_MEMORY;
}

enum firn_status firn_digest_make_kind(enum firn_digest_kind kind, struct firn_digest **out)
{
    EVP_MD_CTX *made = EVP_MD_CTX_new();

    *out = (struct firn_digest *)(void *)made;
    if (made == NULL)
        return FIRN_NO_MEMORY;
    if (EVP_DigestInit_ex(made, method(kind), NULL) != 1) {
        firn_digest_free(*out);
        *out = NULL;
        return FIRN_FOREIGN_FORMAT;
    }
    return FIRN_OK;
}

void firn_digest_free(struct firn_digest *digest)
{
    EVP_MD_CTX_free(context(digest));
}

/* Once made, a context cannot fail: there is no memory to get and no provider to load. */
void firn_digest_start(struct firn_digest *digest)
{
    (void)EVP_DigestInit_ex(context(digest), NULL, NULL);
}

void firn_digest_add(struct firn_digest *digest, const uint8_t *bytes, size_t count)
{
    (void)EVP_DigestUpdate(context(digest), bytes, count);
}

void firn_digest_add_zeros(struct firn_digest *digest, uint64_t count)
{
    static const uint8_t zeros[1 << 16];

    while (count > 0) {
        size_t step = count < sizeof zeros ? (size_t)count : sizeof zeros;

        firn_digest_add(digest, zeros, step);
        count -= step;
    }
}

void firn_digest_finish(struct firn_digest *digest, uint8_t *bytes)
{
    (void)EVP_DigestFinal_ex(context(digest), bytes, NULL);
}
