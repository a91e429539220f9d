/** A file being read once from front to back, with its size and SHA-256 taken on the way, and parts of it
 * read again. What cannot be read again (a pipe) is first copied to memory. */
#ifndef LW_TABLE_SOURCE_H
#define LW_TABLE_SOURCE_H

#include "core/status.h"
#include "table/digest.h"

#include <stddef.h>
#include <stdint.h>

typedef struct lw_source {
    int fd;        /**< -1: closed */
    int64_t size;  /**< as the system states it, for the progress */
    int64_t bytes; /**< read so far */
    char *path;
    lw_digest *digest;
} lw_source;

/** LW_SYSTEM: cannot open, a folder. On failure the source is cleared. */
lw_status lw_source_open(lw_source *source, const char *path, lw_error *error);
void lw_source_clear(lw_source *source);
/** The next bytes, up to `room`; *got 0 at the end. */
lw_status lw_source_read(lw_source *source, void *buffer, size_t room, size_t *got, lw_error *error);
/** Bytes from `offset` on, whatever was read before; *got 0 at the end. No message. */
lw_status lw_source_reread(const lw_source *source, int64_t offset, void *buffer, size_t room, size_t *got);

#endif
