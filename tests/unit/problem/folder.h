/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A problem folder of its own, gone at the end of the test. */
#ifndef FOLDER_H
#define FOLDER_H

#include "problem/problem.h"

typedef struct folder {
    char path[64];
} folder;

folder folder_new(void);
void folder_put(const folder *at, const char *name, const char *text);
void folder_put_bytes(const folder *at, const char *name, const void *bytes, size_t length);
/* Path of a file in it, valid until the next call. */
const char *folder_file(const folder *at, const char *name);
/* All bytes of a file and a NUL; free it. */
char *folder_get(const folder *at, const char *name, size_t *length);
void folder_remove(const folder *at);

/* Reads with low parts; fails the test when it is refused. */
lw_problem *folder_read(const folder *at, const lw_read_options *options);
/* Reads what must be refused: the message without the folder's name, valid until the next call. */
const char *folder_refused(const folder *at, const lw_read_options *options);

/* Observations a..d, parameters x and y, the sigma column given. */
extern const char *const small_design, *const small_observations;
folder folder_small(void);

#endif
