/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bench.h"

#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static double seconds(clockid_t clock)
{
    struct timespec t;
    clock_gettime(clock, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

bench_clock bench_now(void)
{
    return (bench_clock){seconds(CLOCK_MONOTONIC), seconds(CLOCK_PROCESS_CPUTIME_ID)};
}

void bench_tell(const char *name, bench_clock from)
{
    bench_clock now = bench_now();
    printf("%s_wall %.9g\n%s_cpu %.9g\n", name, now.wall - from.wall, name, now.processor - from.processor);
    fflush(stdout);
}

void bench_tell_number(const char *name, double value)
{
    printf("%s %.17g\n", name, value);
    fflush(stdout);
}

/* Of this program alone: getrusage also counts what the process held before it became this program. */
static double peak(void)
{
    char line[256];
    double kibibytes = 0;
    FILE *file = fopen("/proc/self/status", "r");
    while (file && fgets(line, sizeof line, file))
        if (!strncmp(line, "VmHWM:", 6)) kibibytes = strtod(line + 6, NULL);
    if (file) fclose(file);
    return 1024 * kibibytes;
}

void bench_tell_peak(void)
{
    bench_tell_number("peak", peak());
}

void bench_check(lw_status status, const lw_error *error)
{
    if (status >= 0) return;
    fprintf(stderr, "bench: %s\n", error->text[0] ? error->text : lw_status_name(status));
    exit(1);
}

void *bench_sure(void *block)
{
    if (block) return block;
    fprintf(stderr, "bench: out of memory\n");
    exit(1);
}

void bench_start(void)
{
    lw_memory_tune();
    lw_dense_single_thread();
}

static void take(FILE *file, void *to, size_t bytes)
{
    if (fread(to, 1, bytes, file) == bytes) return;
    fprintf(stderr, "bench: the matrix file is cut\n");
    exit(1);
}

static double *take_doubles(FILE *file, int64_t count)
{
    double *value = bench_sure(LW_NEW_ARRAY(double, count));
    take(file, value, (size_t)count * sizeof(double));
    return value;
}

static lw_ids *number_ids(const char *kind, int64_t count)
{
    lw_error error = {0};
    lw_ids *ids;
    char text[40];
    bench_check(lw_ids_new(count, &ids, &error), &error);
    for (int64_t i = 0; i < count; i++) {
        int64_t number;
        int added, length = snprintf(text, sizeof text, "%s%lld", kind, (long long)i);
        bench_check(lw_ids_add(ids, text, (size_t)length, &number, &added, &error), &error);
    }
    return ids;
}

lw_problem *bench_problem(const char *path)
{
    FILE *file = fopen(path, "rb");
    lw_problem *problem = bench_sure(LW_NEW(lw_problem));
    int64_t head[4], pad;
    lw_error error = {0};
    if (!file) {
        fprintf(stderr, "bench: cannot open %s\n", path);
        exit(1);
    }
    take(file, head, sizeof head);
    bench_check(lw_sparse_new(head[0], head[1], head[2], 0, &problem->design, &error), &error);
    problem->m = head[0];
    problem->n = head[1];
    take(file, problem->design->start, (size_t)(head[1] + 1) * 8);
    take(file, problem->design->index, (size_t)head[2] * 4);
    if (head[2] % 2) take(file, &pad, 4);
    take(file, problem->design->value, (size_t)head[2] * 8);
    problem->value = take_doubles(file, head[0]);
    problem->sigma = take_doubles(file, head[0]);
    for (int a = 0; a < 3; a++) {
        problem->coordinate[a] = take_doubles(file, head[1]);
        if (!isnan(problem->coordinate[a][0])) continue;
        lw_free(problem->coordinate[a]);
        problem->coordinate[a] = NULL;
    }
    fclose(file);
    problem->observations = number_ids("o", problem->m);
    problem->parameters = number_ids("p", problem->n);
    problem->value_unit = lw_copy_text("");
    problem->parameter_unit = lw_copy_text("");
    problem->folder = lw_copy_text("bench");
    return problem;
}

double *bench_random(int64_t count)
{
    double *value = bench_sure(LW_NEW_ARRAY(double, count));
    uint64_t state = 88172645463325252u;
    for (int64_t i = 0; i < count; i++) {
        state = state * 6364136223846793005u + 1442695040888963407u;
        value[i] = (double)(state >> 11) * 0x1p-52 - 1.0;
    }
    return value;
}

static int compare(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

double bench_median(int count, double *value)
{
    qsort(value, (size_t)count, sizeof *value, compare);
    return count % 2 ? value[count / 2] : (value[count / 2 - 1] + value[count / 2]) / 2;
}
