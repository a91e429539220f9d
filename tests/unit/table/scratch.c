/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scratch.h"

#include "check_table.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

scratch scratch_file(const char *name, const void *bytes, size_t length)
{
    scratch file;
    const char *base = getenv("TMPDIR");
    int fits = snprintf(file.folder, sizeof file.folder, "%s/lw-XXXXXX",
                        base != NULL && strlen(base) < 40 ? base : "/tmp");
    ck_assert(fits > 0 && (size_t)fits < sizeof file.folder);
    ck_assert_ptr_nonnull(mkdtemp(file.folder));
    (void)snprintf(file.path, sizeof file.path, "%s/%s", file.folder, name);
    FILE *stream = fopen(file.path, "wb");
    ck_assert_ptr_nonnull(stream);
    ck_assert_uint_eq(fwrite(bytes, 1, length, stream), length);
    ck_assert_int_eq(fclose(stream), 0);
    return file;
}

scratch scratch_text(const char *name, const char *text)
{
    return scratch_file(name, text, strlen(text));
}

void scratch_remove(scratch *file)
{
    (void)unlink(file->path);
    (void)rmdir(file->folder);
}

char *scratch_read(const scratch *file, size_t *length)
{
    FILE *stream = fopen(file->path, "rb");
    ck_assert_ptr_nonnull(stream);
    char *text = malloc(1 << 20);
    *length = fread(text, 1, (1 << 20) - 1, stream);
    text[*length] = '\0';
    (void)fclose(stream);
    return text;
}

const char *scratch_strip(const scratch *file, const char *message)
{
    static char text[16384];
    size_t at = 0, prefix = strlen(file->folder) + 1;
    while (*message != '\0' && at < sizeof text - 1) {
        if (strncmp(message, file->folder, prefix - 1) == 0) message += prefix;
        text[at++] = *message++;
    }
    text[at] = '\0';
    return text;
}
