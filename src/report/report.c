/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The page: a frame with marks (@TITLE@ ...), each replaced by its part. */
#include "report/report.h"

#include "core/memory.h"
#include "report/data.h"
#include "report/embedded.h"
#include "run/verdict.h"

#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#define PARTS 8

typedef struct part {
    const char *mark;
    const void *bytes;
    size_t length;
    char *owned;
} part;

static lw_status take_text(part *p, const char *mark, char *owned, lw_error *error)
{
    *p = (part){mark, owned, owned ? strlen(owned) : 0, owned};
    return owned ? LW_OK : lw_fail_memory(error, "report", 1);
}

/* Adds <TAG>escaped text</TAG> to *html. */
static lw_status append(char **html, const char *open, const char *text, const char *close, lw_error *error)
{
    char *escaped = lw_html_escape(text);
    size_t old = *html ? strlen(*html) : 0;
    size_t more = strlen(open) + strlen(close) + (escaped ? strlen(escaped) : 0) + 2;
    char *grown = escaped ? lw_resize(*html, old + more, 1) : NULL;
    if (grown) {
        snprintf(grown + old, more, "%s%s%s\n", open, escaped, close);
        *html = grown;
    }
    lw_free(escaped);
    return grown ? LW_OK : lw_fail_memory(error, "report", more);
}

/* The verdict stands in the page itself, so that it is read even where no script runs. */
static lw_status write_verdict(const lw_run *run, char **html, lw_error *error)
{
    lw_verdict *verdict = LW_NEW(lw_verdict);
    if (verdict == NULL) return lw_fail_memory(error, "report", sizeof *verdict);
    lw_verdict_make(run, verdict);
    lw_status status = append(html, "<p>", verdict->headline, "</p>", error);
    if (status == LW_OK) status = append(html, "<dl class=\"facts\">", "", "", error);
    for (int k = 0; k < LW_VERDICT_NUMBERS && status == LW_OK; k++) {
        if (!verdict->number[k].label[0]) continue;
        status = append(html, "<div><dt>", verdict->number[k].label, "</dt>", error);
        if (status == LW_OK) status = append(html, "<dd>", verdict->number[k].value, "</dd></div>", error);
    }
    if (status == LW_OK) status = append(html, "</dl>", "", "", error);
    for (int k = 0; k < verdict->cautions && status == LW_OK; k++)
        status = append(html, "<p class=\"caution\"><strong>Caution.</strong> ", verdict->caution[k], "</p>",
                        error);
    lw_free(verdict);
    return status;
}

static lw_status write_title(const lw_run *run, char **html, lw_error *error)
{
    char title[600];
    const char *folder = run->problem->folder ? run->problem->folder : "";
    size_t length = strlen(folder);
    while (length > 1 && folder[length - 1] == '/') length--;
    size_t start = length;
    while (start > 0 && folder[start - 1] != '/') start--;
    snprintf(title, sizeof title, "%s of %.*s",
             run->curve   ? "Trade-off"
             : run->probe ? "Recovery test"
                          : "Solution",
             (int)(length - start > 500 ? 500 : length - start), folder + start);
    *html = lw_html_escape(title);
    return *html ? LW_OK : lw_fail_memory(error, "report", sizeof title);
}

static lw_status gather(const lw_run *run, part parts[PARTS], lw_error *error)
{
    char *text = NULL;
    size_t length = 0;
    parts[0] = (part){"STYLE", lw_embedded_style, lw_embedded_style_length, NULL};
    parts[1] = (part){"D3", lw_embedded_d3, lw_embedded_d3_length, NULL};
    parts[2] = (part){"SCRIPT", lw_embedded_script, lw_embedded_script_length, NULL};
    lw_status status = write_title(run, &text, error);
    if (status == LW_OK) status = take_text(&parts[3], "TITLE", text, error);
    if (status == LW_OK) status = take_text(&parts[4], "KIND", lw_html_escape(run->command), error);
    if (status == LW_OK) status = take_text(&parts[5], "VERSION", lw_html_escape(run->version), error);
    if (status != LW_OK) return status;
    text = NULL;
    status = write_verdict(run, &text, error);
    parts[6] = (part){"VERDICT", text, text ? strlen(text) : 0, text};
    if (status != LW_OK) return status;
    text = NULL;
    status = lw_report_data(run, &text, &length, error);
    parts[7] = (part){"DATA", text, length, text};
    return status;
}

/* Writes the frame; a mark is @NAME@. false: the disk failed, errno says how. */
static bool write_page(FILE *file, const part parts[PARTS])
{
    const char *in = (const char *)lw_embedded_page, *end = in + lw_embedded_page_length;
    while (in < end) {
        const part *found = NULL;
        for (int k = 0; k < PARTS && *in == '@'; k++) {
            size_t size = strlen(parts[k].mark);
            if ((size_t)(end - in) > size + 1 && memcmp(in + 1, parts[k].mark, size) == 0 &&
                in[size + 1] == '@')
                found = &parts[k];
        }
        if (found) {
            if (fwrite(found->bytes, 1, found->length, file) != found->length) return false;
            in += strlen(found->mark) + 2;
            continue;
        }
        const char *next = memchr(in + 1, '@', (size_t)(end - in - 1));
        size_t size = (size_t)((next ? next : end) - in);
        if (fwrite(in, 1, size, file) != size) return false;
        in += size;
    }
    if (fflush(file) != 0) return false;
    return fsync(fileno(file)) == 0 || errno == EINVAL ||
           errno == ENOTSUP; /* a pipe or device has no disk to sync */
}

lw_status lw_report_write(const lw_run *run, const char *path, lw_error *error)
{
    part parts[PARTS] = {{0}};
    lw_status status = gather(run, parts, error);
    FILE *file = NULL;
    if (status == LW_OK && !(file = fopen(path, "wb")))
        status = lw_fail(error, LW_SYSTEM, "%s: cannot be written: %s", path, strerror(errno));
    if (status == LW_OK && !write_page(file, parts))
        status = lw_fail(error, LW_SYSTEM, "%s: cannot be written: %s", path, strerror(errno));
    if (file && fclose(file) != 0 && status == LW_OK)
        status = lw_fail(error, LW_SYSTEM, "%s: cannot be written: %s", path, strerror(errno));
    for (int k = 0; k < PARTS; k++) lw_free(parts[k].owned);
    return status;
}
