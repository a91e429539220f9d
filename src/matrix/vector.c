/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "matrix/vector.h"

#include <math.h>
#include <string.h>

/* A vector is cut into equal parts, as many as its length is worth. */
#define MOST_PARTS 32
#define PART_LENGTH 16384
#define LANES 8

typedef struct vector_job {
    int64_t n;
    int parts;
    double a, b;
    const double *x;
    double *y;
    const double *z;
    double sum[MOST_PARTS];
} vector_job;

static int count_parts(int64_t n)
{
    int64_t parts = (n + PART_LENGTH - 1) / PART_LENGTH;
    return parts < 1 ? 1 : parts > MOST_PARTS ? MOST_PARTS : (int)parts;
}

static int64_t bound(const vector_job *job, int part)
{
    return job->n / job->parts * part + job->n % job->parts * part / job->parts;
}

static void dot_part(void *state, int part)
{
    vector_job *job = state;
    const double *restrict x = job->x, *restrict z = job->z;
    int64_t i = bound(job, part), to = bound(job, part + 1);
    double lane[LANES] = {0};
    for (; i + LANES <= to; i += LANES)
        for (int l = 0; l < LANES; l++) lane[l] += x[i + l] * z[i + l];
    double sum = ((lane[0] + lane[4]) + (lane[2] + lane[6])) + ((lane[1] + lane[5]) + (lane[3] + lane[7]));
    for (; i < to; i++) sum += x[i] * z[i];
    job->sum[part] = sum;
}

double lw_dot(int64_t n, const double *x, const double *y, lw_team *team)
{
    vector_job job = {.n = n, .parts = count_parts(n), .x = x, .z = y};
    lw_team_run(team, job.parts, dot_part, &job);
    double sum = 0;
    for (int part = 0; part < job.parts; part++) sum += job.sum[part];
    return sum;
}

/* A sum of squares in this range has lost nothing to underflow or overflow. */
static int is_safe(double square)
{
    return square > 1e-270 && square < 1e300;
}

double lw_norm(int64_t n, const double *x, lw_team *team)
{
    double square = lw_dot(n, x, x, team);
    if (is_safe(square) || isnan(square)) return sqrt(square);
    double most = lw_norm_max(n, x);
    if (!(most > 0) || isinf(most)) return most;
    int exponent;
    frexp(most, &exponent);
    double sum = 0;
    for (int64_t i = 0; i < n; i++) {
        double v = ldexp(x[i], -exponent);
        sum += v * v;
    }
    return ldexp(sqrt(sum), exponent);
}

double lw_norm_max(int64_t n, const double *x)
{
    double most = 0;
    for (int64_t i = 0; i < n; i++) {
        double v = fabs(x[i]);
        if (v > most || isnan(v)) most = v;
    }
    return most;
}

static void scale_part(void *state, int part)
{
    vector_job *job = state;
    double *restrict y = job->y, a = job->a;
    for (int64_t i = bound(job, part), to = bound(job, part + 1); i < to; i++) y[i] *= a;
}

void lw_scale(int64_t n, double a, double *x, lw_team *team)
{
    vector_job job = {.n = n, .parts = count_parts(n), .a = a, .y = x};
    lw_team_run(team, job.parts, scale_part, &job);
}

static void add_part(void *state, int part)
{
    vector_job *job = state;
    const double *restrict x = job->x;
    double *restrict y = job->y, a = job->a;
    for (int64_t i = bound(job, part), to = bound(job, part + 1); i < to; i++) y[i] += a * x[i];
}

void lw_add_scaled(int64_t n, double a, const double *x, double *y, lw_team *team)
{
    vector_job job = {.n = n, .parts = count_parts(n), .a = a, .x = x, .y = y};
    lw_team_run(team, job.parts, add_part, &job);
}

static void scale_add_part(void *state, int part)
{
    vector_job *job = state;
    const double *restrict x = job->x;
    double *restrict y = job->y, a = job->a, b = job->b;
    for (int64_t i = bound(job, part), to = bound(job, part + 1); i < to; i++) y[i] = a * x[i] + b * y[i];
}

void lw_scale_add(int64_t n, double a, const double *x, double b, double *y, lw_team *team)
{
    vector_job job = {.n = n, .parts = count_parts(n), .a = a, .b = b, .x = x, .y = y};
    lw_team_run(team, job.parts, scale_add_part, &job);
}

void lw_copy(int64_t n, const double *x, double *y)
{
    if (n > 0) memcpy(y, x, (size_t)n * sizeof *y);
}

void lw_fill(int64_t n, double a, double *x)
{
    for (int64_t i = 0; i < n; i++) x[i] = a;
}
