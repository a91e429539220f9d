/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/digest.h"

#include "core/memory.h"

#define XXH_INLINE_ALL
#include <gcrypt.h>
#include <pthread.h>
#include <xxhash.h>

struct lw_digest {
    gcry_md_hd_t handle;
};

static void start_gcrypt(void)
{
    if (gcry_control(GCRYCTL_INITIALIZATION_FINISHED_P)) return;
    (void)gcry_check_version(NULL);
    (void)gcry_control(GCRYCTL_DISABLE_SECMEM, 0);
    (void)gcry_control(GCRYCTL_INITIALIZATION_FINISHED, 0);
}

lw_status lw_digest_new(lw_digest **out, lw_error *error)
{
    static pthread_once_t once = PTHREAD_ONCE_INIT;
    *out = NULL;
    (void)pthread_once(&once, start_gcrypt);
    lw_digest *digest = LW_NEW(lw_digest);
    if (digest == NULL) return lw_fail_memory(error, "a digest", sizeof *digest);
    gcry_error_t reason = gcry_md_open(&digest->handle, GCRY_MD_SHA256, 0);
    if (reason != 0) {
        lw_free(digest);
        return lw_fail(error, LW_SYSTEM, "cannot compute SHA-256: %s", gcry_strerror(reason));
    }
    *out = digest;
    return LW_OK;
}

void lw_digest_add(lw_digest *digest, const void *bytes, size_t length)
{
    gcry_md_write(digest->handle, bytes, length);
}

void lw_digest_hex(lw_digest *digest, char hex[65])
{
    static const char digit[] = "0123456789abcdef";
    gcry_md_hd_t copy; /* reading closes a digest */
    hex[0] = '\0';
    if (gcry_md_copy(&copy, digest->handle) != 0) return;
    const unsigned char *bytes = gcry_md_read(copy, GCRY_MD_SHA256);
    for (int i = 0; i < 32; i++) {
        hex[2 * i] = digit[bytes[i] >> 4];
        hex[2 * i + 1] = digit[bytes[i] & 15];
    }
    hex[64] = '\0';
    gcry_md_close(copy);
}

void lw_digest_free(lw_digest *digest)
{
    if (digest == NULL) return;
    gcry_md_close(digest->handle);
    lw_free(digest);
}

uint64_t lw_hash(const void *bytes, size_t length)
{
    return XXH3_64bits(bytes, length);
}
