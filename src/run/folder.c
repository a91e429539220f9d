/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/folder.h"

#include "core/memory.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

struct lw_folder {
    char *path;    /* final name */
    char *sibling; /* where it is written */
    char *file;    /* last answer of lw_folder_file */
    bool replace;
};

/* "DIR/name" and the like; NULL when out of memory. */
static char *joined(const char *a, const char *b, const char *c)
{
    size_t length = strlen(a) + strlen(b) + strlen(c) + 1;
    char *text = lw_alloc(length, 1);
    if (text) snprintf(text, length, "%s%s%s", a, b, c);
    return text;
}

/* A run folder's files are plain: one level is removed, and a folder with anything else in it is left alone.
 */
static void remove_folder(const char *path)
{
    DIR *dir = opendir(path);
    if (!dir) return;
    for (struct dirent *entry; (entry = readdir(dir));)
        if (strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0)
            unlinkat(dirfd(dir), entry->d_name, 0);
    closedir(dir);
    rmdir(path);
}

static bool is_empty(const char *path)
{
    DIR *dir = opendir(path);
    if (!dir) return false;
    bool empty = true;
    for (struct dirent *entry; empty && (entry = readdir(dir));)
        empty = strcmp(entry->d_name, ".") == 0 || strcmp(entry->d_name, "..") == 0;
    closedir(dir);
    return empty;
}

/* The path without trailing slashes; "." and "" are refused by their emptiness check. */
static char *trimmed(const char *path)
{
    char *text = lw_copy_text(path);
    if (!text) return NULL;
    size_t length = strlen(text);
    while (length > 1 && text[length - 1] == '/') text[--length] = '\0';
    return text;
}

lw_status lw_folder_check(const char *path, bool overwrite, lw_error *error)
{
    char *clean = trimmed(path), *summary = clean ? joined(clean, "/", "summary.json") : NULL, *parent = NULL;
    lw_status status = LW_OK;
    struct stat info;
    if (!clean || !summary) {
        status = lw_fail_memory(error, "a path", strlen(path));
        goto done;
    }
    if (lstat(clean, &info) == 0) {
        if (!S_ISDIR(info.st_mode))
            status =
                lw_fail(error, LW_BAD_USAGE, "%s: found a file, expected a folder name for the run", clean);
        else if (is_empty(clean))
            status = LW_OK;
        else if (access(summary, F_OK) != 0)
            status = lw_fail(error, LW_BAD_USAGE,
                             "%s: found a folder that is not a run (no summary.json): it is left alone; "
                             "choose another with --out",
                             clean);
        else if (!overwrite)
            status =
                lw_fail(error, LW_BAD_USAGE,
                        "%s: this run exists already: give --overwrite, or another folder with --out", clean);
        if (status != LW_OK) goto done;
    } else if (errno != ENOENT) {
        status = lw_fail(error, LW_SYSTEM, "%s: %s", clean, strerror(errno));
        goto done;
    }
    parent = lw_copy_text(clean);
    if (!parent) {
        status = lw_fail_memory(error, "a path", strlen(path));
        goto done;
    }
    char *slash = strrchr(parent, '/');
    if (slash == parent)
        slash[1] = '\0';
    else if (slash)
        *slash = '\0';
    const char *where = slash ? parent : ".";
    if (access(where, W_OK | X_OK) != 0)
        status = lw_fail(error, LW_SYSTEM, "%s: cannot write here: %s", where, strerror(errno));
done:
    lw_free(clean);
    lw_free(summary);
    lw_free(parent);
    return status;
}

static void folder_free(lw_folder *folder)
{
    if (!folder) return;
    lw_free(folder->path);
    lw_free(folder->sibling);
    lw_free(folder->file);
    lw_free(folder);
}

lw_status lw_folder_begin(const char *path, bool overwrite, lw_folder **out, lw_error *error)
{
    *out = NULL;
    lw_status status = lw_folder_check(path, overwrite, error);
    if (status != LW_OK) return status;
    lw_folder *folder = LW_NEW(lw_folder);
    if (folder) folder->path = trimmed(path);
    char suffix[40];
    snprintf(suffix, sizeof suffix, "%ld", (long)getpid());
    if (folder && folder->path) folder->sibling = joined(folder->path, ".unfinished-", suffix);
    if (!folder || !folder->path || !folder->sibling) {
        folder_free(folder);
        return lw_fail_memory(error, "the run folder", strlen(path));
    }
    struct stat info;
    folder->replace = lstat(folder->path, &info) == 0;
    if (mkdir(folder->sibling, 0777) != 0) {
        status =
            lw_fail(error, LW_SYSTEM, "%s: cannot make the folder: %s", folder->sibling, strerror(errno));
        folder_free(folder);
        return status;
    }
    *out = folder;
    return LW_OK;
}

const char *lw_folder_file(lw_folder *folder, const char *name)
{
    lw_free(folder->file);
    folder->file = joined(folder->sibling, "/", name);
    return folder->file;
}

lw_status lw_folder_commit(lw_folder *folder, lw_error *error)
{
    lw_status status = LW_OK;
    int failed;
    if (folder->replace) {
        failed = renameat2(AT_FDCWD, folder->sibling, AT_FDCWD, folder->path, RENAME_EXCHANGE);
        if (failed && (errno == EINVAL || errno == ENOSYS)) { /* a file system without the exchange */
            remove_folder(folder->path);
            failed = rename(folder->sibling, folder->path);
        }
    } else {
        failed = renameat2(AT_FDCWD, folder->sibling, AT_FDCWD, folder->path, RENAME_NOREPLACE);
        if (failed && (errno == EINVAL || errno == ENOSYS)) failed = rename(folder->sibling, folder->path);
    }
    if (failed)
        status =
            lw_fail(error, LW_SYSTEM, "%s: cannot put the run in place: %s", folder->path, strerror(errno));
    remove_folder(folder->sibling);
    folder_free(folder);
    return status;
}

void lw_folder_abandon(lw_folder *folder)
{
    if (!folder) return;
    remove_folder(folder->sibling);
    folder_free(folder);
}
