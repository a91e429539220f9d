/** SHA-256 (FIPS 180-4) of files and buffers (libgcrypt), for the report and packs; xxHash64 for id tables.
 */
#ifndef LW_TABLE_DIGEST_H
#define LW_TABLE_DIGEST_H

#include "core/status.h"

#include <stddef.h>
#include <stdint.h>

typedef struct lw_digest lw_digest;
lw_status lw_digest_new(lw_digest **out, lw_error *error);
void lw_digest_add(lw_digest *digest, const void *bytes, size_t length);
/** 64 hexadecimal digits and a NUL of all that was added; the digest can be added to afterwards. "" when
 * memory is out. */
void lw_digest_hex(lw_digest *digest, char hex[65]);
void lw_digest_free(lw_digest *digest);

/** Fast hash of a short text (xxHash, 64 bit). */
uint64_t lw_hash(const void *bytes, size_t length);

#endif
