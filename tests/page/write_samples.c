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

/* A checkerboard that half came back, and noise trials. */
static int write_recovery(const char *folder)
{
    sample *s = sample_sweep(24, 25, 400, 24, 40);
    int64_t n = s->problem.n;
    double *column[4];
    for (int k = 0; k < 4; k++) s->kept[s->kept_count++] = column[k] = LW_NEW_ZEROS(double, n);
    for (int64_t j = 0; j < n; j++) {
        column[0][j] = (j % 24 / 4 + j / 24 / 4) % 2 ? 0.03 : -0.03;
        column[1][j] = 0.5 * column[0][j];
        column[2][j] = 0.5;
        column[3][j] = 0.01;
    }
    lw_probe_pattern pattern = {.name = "checker of 4 cells",
                                .size = 4.0,
                                .input = column[0],
                                .recovered = column[1],
                                .amplitude = column[2],
                                .overall_amplitude = 0.5,
                                .overall_correlation = 1.0};
    lw_probe probe = {.parameters = n,
                      .pattern = &pattern,
                      .patterns = 1,
                      .amplitude = 0.03,
                      .noisy = true,
                      .trials = 32,
                      .spread = column[3]};
    s->run.curve = NULL;
    s->run.models = NULL;
    s->run.probe = &probe;
    s->run.command = "probe";
    return write_report(s, folder, "recovery");
}

/* A sweep in which no criterion picked a damping. */
static sample *unanswered(void)
{
    sample *s = sample_sweep(24, 25, 400, 24, 40);
    s->run.estimate = NULL;
    s->run.damping = 0.0;
    return s;
}

/* One coordinate only: a profile. */
static sample *profile(void)
{
    sample *s = sample_sweep(40, 1, 80, 10, 20);
    s->problem.coordinate[2] = NULL;
    return s;
}

/* A sweep that kept no models. */
static sample *forgotten(void)
{
    sample *s = sample_sweep(24, 25, 400, 24, 40);
    s->run.models = NULL;
    return s;
}

int main(int count, char **word)
{
    const char *folder = count > 1 ? word[1] : ".";
    int failed = write_report(sample_sweep(24, 25, 400, 24, 40), folder, "cells");
    failed |= write_report(sample_network(), folder, "network");
    failed |= write_report(slices(), folder, "slices");
    failed |= write_recovery(folder);
    failed |= write_report(unanswered(), folder, "unanswered");
    failed |= write_report(profile(), folder, "profile");
    failed |= write_report(forgotten(), folder, "forgotten");
    failed |= write_report(sample_sweep(400, 250, 30000, 400, 60), folder, "large");
    return failed;
}
