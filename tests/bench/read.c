/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tables: read FOLDER callbacks|own     read MATRIX write FOLDER shuffled|ordered [prior]
 *   callbacks  libcsv on FOLDER/design.csv with callbacks that only count
 *   own        the whole problem read as the program reads it, digests and checks included
 *   write      the CSV files of a matrix file, with text ids, design rows in a random order when shuffled */
#include "bench.h"

#include "core/memory.h"
#include "matrix/sparse.h"
#include "table/csv_write.h"

#include <csv.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

typedef struct counts {
    int64_t fields, rows;
} counts;

static void count_field(void *text, size_t length, void *state)
{
    (void)text, (void)length;
    ((counts *)state)->fields++;
}

static void count_row(int end, void *state)
{
    (void)end;
    ((counts *)state)->rows++;
}

static void run_callbacks(const char *folder)
{
    char path[4096];
    struct csv_parser parser;
    counts c = {0};
    static char buffer[1 << 16];
    size_t got;
    snprintf(path, sizeof path, "%s/design.csv", folder);
    FILE *file = bench_sure(fopen(path, "rb"));
    bench_clock from = bench_now();
    csv_init(&parser, CSV_STRICT);
    while ((got = fread(buffer, 1, sizeof buffer, file)) > 0)
        csv_parse(&parser, buffer, got, count_field, count_row, &c);
    csv_fini(&parser, count_field, count_row, &c);
    csv_free(&parser);
    bench_tell("read", from);
    bench_tell_number("rows", (double)c.rows - 1);
    fclose(file);
}

static void run_own(const char *folder, int threads)
{
    lw_error error = {0};
    lw_problem *problem;
    lw_team *team = NULL;
    bench_check(lw_team_new(threads, &team, &error), &error);
    lw_watch watch = {.memory = INT64_C(8) << 30, .team = team};
    bench_clock from = bench_now();
    bench_check(lw_problem_read(folder, &(lw_read_options){0}, &watch, &problem, &error), &error);
    bench_tell("read", from);
    bench_tell_number("rows", (double)lw_sparse_nonzeros(problem->design));
    bench_tell_peak();
    lw_problem_free(problem);
    lw_team_free(team);
}

static lw_csv_writer *create(const char *folder, const char *name)
{
    char path[4096];
    lw_error error = {0};
    lw_csv_writer *writer;
    snprintf(path, sizeof path, "%s/%s", folder, name);
    bench_check(lw_csv_create(path, &writer, &error), &error);
    return writer;
}

static void header(lw_csv_writer *writer, const char *const *name)
{
    for (; *name; name++) lw_csv_text(writer, *name);
    lw_csv_end_row(writer);
}

static void id(lw_csv_writer *writer, const char *kind, int64_t number)
{
    char text[40];
    snprintf(text, sizeof text, "%s%07lld", kind, (long long)number);
    lw_csv_text(writer, text);
}

static void write_design(const lw_problem *problem, const char *folder, int shuffled)
{
    lw_error error = {0};
    lw_csv_writer *writer = create(folder, "design.csv");
    lw_sparse *T;
    header(writer, (const char *const[]){"observation", "parameter", "coefficient", NULL});
    bench_check(lw_sparse_transpose(problem->design, &T, &error), &error);
    int64_t count = lw_sparse_nonzeros(T);
    int32_t *row = bench_sure(LW_NEW_ARRAY(int32_t, count)),
            *order = bench_sure(LW_NEW_ARRAY(int32_t, count));
    uint64_t state = 1234567;
    for (int64_t i = 0; i < T->columns; i++)
        for (int64_t p = T->start[i]; p < T->start[i + 1]; p++) row[p] = (int32_t)i, order[p] = (int32_t)p;
    for (int64_t k = count - 1; shuffled && k > 0; k--) {
        state = state * 6364136223846793005u + 1442695040888963407u;
        int64_t with = (int64_t)((state >> 16) % (uint64_t)(k + 1));
        int32_t swap = order[k];
        order[k] = order[with];
        order[with] = swap;
    }
    for (int64_t k = 0; k < count; k++) {
        int32_t p = order[k];
        id(writer, "ray-", row[p]);
        id(writer, "cell-", T->index[p]);
        lw_csv_number(writer, floor(T->value[p] * 1e6 + 0.5) / 1e6);
        lw_csv_end_row(writer);
    }
    bench_check(lw_csv_finish(writer, &error), &error);
    lw_free(row), lw_free(order);
    lw_sparse_free(T);
}

static void write_others(const lw_problem *problem, const char *folder)
{
    static const char *const axes[] = {"x", "y", "z"};
    lw_error error = {0};
    lw_csv_writer *writer = create(folder, "observations.csv");
    header(writer, (const char *const[]){"observation", "value", "sigma", NULL});
    for (int64_t i = 0; i < problem->m; i++) {
        id(writer, "ray-", i);
        lw_csv_number(writer, problem->value[i]);
        lw_csv_number(writer, problem->sigma[i]);
        lw_csv_end_row(writer);
    }
    bench_check(lw_csv_finish(writer, &error), &error);
    writer = create(folder, "parameters.csv");
    lw_csv_text(writer, "parameter");
    for (int a = 0; a < 3; a++)
        if (problem->coordinate[a]) lw_csv_text(writer, axes[a]);
    lw_csv_end_row(writer);
    for (int64_t j = 0; j < problem->n; j++) {
        id(writer, "cell-", j);
        for (int a = 0; a < 3; a++)
            if (problem->coordinate[a]) lw_csv_number(writer, problem->coordinate[a][j]);
        lw_csv_end_row(writer);
    }
    bench_check(lw_csv_finish(writer, &error), &error);
}

int main(int argc, char **argv)
{
    if (argc < 3) return 2;
    bench_start();
    if (!strcmp(argv[2], "callbacks")) {
        run_callbacks(argv[1]);
    } else if (!strcmp(argv[2], "own") && argc == 4) {
        run_own(argv[1], atoi(argv[3]));
    } else if (!strcmp(argv[2], "write") && argc == 5) {
        lw_problem *problem = bench_problem(argv[1]);
        mkdir(argv[3], 0777);
        write_others(problem, argv[3]);
        write_design(problem, argv[3], !strcmp(argv[4], "shuffled"));
        lw_problem_free(problem);
    } else {
        return 2;
    }
    return 0;
}
