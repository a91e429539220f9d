/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The bytes of a fuzz target as a file in memory, and the main that replays files. Included once, by the
 * target. */
#ifndef FUZZ_INPUT_H
#define FUZZ_INPUT_H

#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/mman.h>
#include <unistd.h>

#define FUZZ_PATH 64

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static int fuzz_open(const uint8_t *data, size_t size, char path[FUZZ_PATH])
{
    int fd = memfd_create("fuzz", MFD_CLOEXEC);
    if (fd < 0 || write(fd, data, size) != (ssize_t)size) abort();
    (void)snprintf(path, FUZZ_PATH, "/proc/self/fd/%d", fd);
    return fd;
}

static void fuzz_close(int fd)
{
    (void)close(fd);
}

#ifndef FUZZ_ENGINE
int main(int count, char **paths)
{
    for (int i = 1; i < count; i++) {
        FILE *stream = fopen(paths[i], "rb");
        uint8_t *data = malloc((size_t)16 << 20);
        if (stream == NULL || data == NULL) {
            (void)fprintf(stderr, "%s: cannot read\n", paths[i]);
            return 1;
        }
        size_t size = fread(data, 1, (size_t)16 << 20, stream);
        (void)fclose(stream);
        (void)LLVMFuzzerTestOneInput(data, size);
        free(data);
    }
    return 0;
}
#endif

#endif
