/* SPDX-License-Identifier: GPL-3.0-or-later */
#define _GNU_SOURCE 1 /* P_tmpdir, mkdtemp */
#include "folder.h"

#include <check.h>
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

const char *const small_design = "observation,parameter,coefficient\na,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2\n";
const char *const small_observations = "observation,value,sigma\na,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n";

folder folder_new(void)
{
    folder at;
    const char *temporary = getenv("TMPDIR");
    (void)snprintf(at.path, sizeof at.path, "%.40s/lw-problem-XXXXXX",
                   temporary != NULL ? temporary : P_tmpdir);
    ck_assert_ptr_nonnull(mkdtemp(at.path));
    return at;
}

const char *folder_file(const folder *at, const char *name)
{
    static char path[400];
    (void)snprintf(path, sizeof path, "%s/%s", at->path, name);
    return path;
}

void folder_put_bytes(const folder *at, const char *name, const void *bytes, size_t length)
{
    (void)unlink(
        folder_file(at, name)); /* a new file: some file systems flush one that is cut and written again */
    FILE *file = fopen(folder_file(at, name), "wb");
    ck_assert_ptr_nonnull(file);
    ck_assert_uint_eq(fwrite(bytes, 1, length, file), length);
    ck_assert_int_eq(fclose(file), 0);
}

void folder_put(const folder *at, const char *name, const char *text)
{
    folder_put_bytes(at, name, text, strlen(text));
}

char *folder_get(const folder *at, const char *name, size_t *length)
{
    FILE *file = fopen(folder_file(at, name), "rb");
    ck_assert_ptr_nonnull(file);
    ck_assert_int_eq(fseek(file, 0, SEEK_END), 0);
    *length = (size_t)ftell(file);
    rewind(file);
    char *bytes = calloc(*length + 1, 1);
    ck_assert_ptr_nonnull(bytes);
    ck_assert_uint_eq(fread(bytes, 1, *length, file), *length);
    (void)fclose(file);
    return bytes;
}

void folder_remove(const folder *at)
{
    DIR *list = opendir(at->path);
    for (struct dirent *entry; list != NULL && (entry = readdir(list)) != NULL;)
        if (strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0) {
            const char *path = folder_file(at, entry->d_name);
            if (unlink(path) != 0) (void)rmdir(path);
        }
    if (list != NULL) (void)closedir(list);
    (void)rmdir(at->path);
}

lw_problem *folder_read(const folder *at, const lw_read_options *options)
{
    static const lw_read_options plain = {.keep_low = true};
    static lw_error error;
    lw_problem *problem = NULL;
    error = (lw_error){0};
    lw_status status = lw_problem_read(at->path, options != NULL ? options : &plain, NULL, &problem, &error);
    ck_assert_msg(status == LW_OK, "refused (%s): %s", lw_status_name(status), error.text);
    ck_assert_ptr_nonnull(problem);
    return problem;
}

const char *folder_refused(const folder *at, const lw_read_options *options)
{
    static const lw_read_options plain = {.keep_low = true};
    static lw_error error;
    static char text[LW_ERROR_TEXT];
    lw_problem *problem = NULL;
    error = (lw_error){0};
    lw_status status = lw_problem_read(at->path, options != NULL ? options : &plain, NULL, &problem, &error);
    ck_assert_msg(status == LW_BAD_INPUT, "%s: %s", lw_status_name(status), error.text);
    ck_assert_int_eq(error.status, LW_BAD_INPUT);
    ck_assert_ptr_null(problem);
    size_t out = 0, skip = strlen(at->path);
    for (const char *from = error.text; *from != '\0';) {
        if (strncmp(from, at->path, skip) == 0 && from[skip] == '/')
            from += skip + 1;
        else
            text[out++] = *from++;
    }
    text[out] = '\0';
    return text;
}

folder folder_small(void)
{
    folder at = folder_new();
    folder_put(&at, "design.csv", small_design);
    folder_put(&at, "observations.csv", small_observations);
    return at;
}
