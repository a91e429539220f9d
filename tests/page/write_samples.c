/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Writes the reports that the page tests open: write_samples FOLDER. */
#include "report/report.h"

#include "core/memory.h"
#include "sample.h"

#include <stdio.h>

static int write_report(sample *s, const char *folder, const char *name)
{
    char path[4096];
    lw_error error = {0};
    snprintf(path, sizeof path, "%s/%s.html", folder, name);
    lw_status status = lw_report_write(&s->run, path, &error);
    if (status != LW_OK) fprintf(stderr, "%s\n", error.text);
    sample_free(s);
    return status != LW_OK;
}

/* The cells of a sweep folded into five layers of y. */
static sample *slices(void)
{
    sample *s = sample_sweep(16, 60, 800, 16, 40);
    s->problem.coordinate[1] = LW_NEW_ARRAY(double, s->problem.n);
    s->kept[s->kept_count++] = s->problem.coordinate[1];
    for (int64_t j = 0; j < s->problem.n; j++) {
        s->problem.coordinate[1][j] = 10.0 * (double)(j / 16 % 5);
        s->problem.coordinate[2][j] = 3.0 * (double)(j / 80);
    }
    return s;
}

int main(int count, char **word)
{
    const char *folder = count > 1 ? word[1] : ".";
    return write_report(sample_sweep(24, 25, 400, 24, 40), folder, "cells") |
           write_report(sample_network(), folder, "network") | write_report(slices(), folder, "slices") |
           write_report(sample_sweep(400, 250, 30000, 400, 60), folder, "large");
}
