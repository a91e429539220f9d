/* SPDX-License-Identifier: GPL-3.0-or-later */
#define _GNU_SOURCE 1 /* memfd_create */
#include "table/source.h"

#include "core/memory.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

#define COPY_ROOM ((size_t)1 << 18)

static ssize_t read_some(int fd, void *buffer, size_t room)
{
    ssize_t got;
    do got = read(fd, buffer, room);
    while (got < 0 && errno == EINTR);
    return got;
}

static int write_all(int fd, const char *bytes, size_t length)
{
    while (length > 0) {
        ssize_t put = write(fd, bytes, length);
        if (put < 0 && errno == EINTR) continue;
        if (put < 0) return -1;
        bytes += put;
        length -= (size_t)put;
    }
    return 0;
}

/* Replaces a pipe by a copy in memory. -1 and errno on failure. */
static int copy_pipe(lw_source *source)
{
    char *buffer = lw_alloc(COPY_ROOM, 1);
    int copy = memfd_create("table", MFD_CLOEXEC), saved = ENOMEM;
    if (buffer == NULL || copy < 0) goto done;
    ssize_t got;
    while ((got = read_some(source->fd, buffer, COPY_ROOM)) > 0)
        if (write_all(copy, buffer, (size_t)got) != 0) {
            got = -1;
            break;
        }
    saved = errno;
    if (got < 0 || lseek(copy, 0, SEEK_SET) != 0) goto done;
    close(source->fd);
    source->fd = copy;
    copy = -1;
    saved = 0;
done:
    if (copy >= 0) close(copy);
    lw_free(buffer);
    errno = saved;
    return saved == 0 ? 0 : -1;
}

lw_status lw_source_open(lw_source *source, const char *path, lw_error *error)
{
    struct stat state;
    *source = (lw_source){.fd = -1};
    lw_status status = lw_digest_new(&source->digest, error);
    if (status != LW_OK) return status;
    source->path = lw_copy_text(path);
    if (source->path == NULL) {
        status = lw_fail_memory(error, "a path", strlen(path) + 1);
        goto failed;
    }
    source->fd = open(path, O_RDONLY | O_CLOEXEC);
    if (source->fd < 0 || fstat(source->fd, &state) != 0) {
        status = lw_fail(error, LW_SYSTEM, "%s: cannot open: %s", path, strerror(errno));
        goto failed;
    }
    if (S_ISDIR(state.st_mode)) {
        status = lw_fail(error, LW_SYSTEM, "%s: cannot read: %s", path, strerror(EISDIR));
        goto failed;
    }
    if (!S_ISREG(state.st_mode) && (copy_pipe(source) != 0 || fstat(source->fd, &state) != 0)) {
        status = lw_fail(error, errno == ENOMEM ? LW_NO_MEMORY : LW_SYSTEM, "%s: cannot read: %s", path,
                         strerror(errno));
        goto failed;
    }
    source->size = state.st_size;
    (void)posix_fadvise(source->fd, 0, 0, POSIX_FADV_SEQUENTIAL);
    return LW_OK;
failed:
    lw_source_clear(source);
    return status;
}

void lw_source_clear(lw_source *source)
{
    if (source->fd >= 0) close(source->fd);
    lw_digest_free(source->digest);
    lw_free(source->path);
    *source = (lw_source){.fd = -1};
}

lw_status lw_source_read(lw_source *source, void *buffer, size_t room, size_t *got, lw_error *error)
{
    ssize_t length = read_some(source->fd, buffer, room);
    *got = length > 0 ? (size_t)length : 0;
    if (length < 0) return lw_fail(error, LW_SYSTEM, "%s: cannot read: %s", source->path, strerror(errno));
    source->bytes += length;
    lw_digest_add(source->digest, buffer, *got);
    return LW_OK;
}

lw_status lw_source_reread(const lw_source *source, int64_t offset, void *buffer, size_t room, size_t *got)
{
    ssize_t length;
    do length = pread(source->fd, buffer, room, offset);
    while (length < 0 && errno == EINTR);
    *got = length > 0 ? (size_t)length : 0;
    return length < 0 ? LW_SYSTEM : LW_OK;
}
