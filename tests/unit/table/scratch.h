/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A file in a folder of its own, gone at the end of the test. */
#ifndef SCRATCH_H
#define SCRATCH_H

#include <stddef.h>

typedef struct scratch {
    char folder[64], path[96];
} scratch;

scratch scratch_file(const char *name, const void *bytes, size_t length);
scratch scratch_text(const char *name, const char *text);
void scratch_remove(scratch *file);
/* The whole file, NUL-terminated; free it. */
char *scratch_read(const scratch *file, size_t *length);
/* The message without the folder's name in it, valid until the next call. */
const char *scratch_strip(const scratch *file, const char *message);

#endif
