/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The basis V, in blocks, and models V y. */
#include "solve/krylov.h"

#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"

#include <string.h>

double *lw_basis_next(lw_basis *basis)
{
    if (basis->count >= basis->most) return NULL;
    if (basis->each == 0) {
        int64_t fit = LW_BASIS_ROOM / (int64_t)(sizeof(double) * (size_t)(basis->length + 1));
        basis->each = fit < LW_BASIS_LEAST ? LW_BASIS_LEAST : fit > LW_BASIS_MOST ? LW_BASIS_MOST : fit;
    }
    if (basis->count == basis->blocks * basis->each) {
        if (basis->blocks == basis->room) {
            int64_t room = 2 * basis->room + 16;
            double **block = lw_resize(basis->block, (size_t)room, sizeof *block);
            if (block == NULL) return NULL;
            basis->block = block;
            basis->room = room;
        }
        double *fresh = lw_alloc((size_t)basis->length, (size_t)basis->each * sizeof(double));
        if (fresh == NULL) return NULL;
        basis->block[basis->blocks++] = fresh;
    }
    int64_t at = basis->count++;
    return basis->block[at / basis->each] + at % basis->each * basis->length;
}

void lw_basis_clear(lw_basis *basis)
{
    for (int64_t i = 0; i < basis->blocks; i++) lw_free(basis->block[i]);
    lw_free(basis->block);
    basis->block = NULL;
    basis->count = basis->blocks = basis->room = 0;
}

/* The rows of a model are cut by the problem: parts of at least 1024 entries. */
#define PART_ROWS 1024
#define MOST_PARTS 64

typedef struct product_job {
    const lw_basis *basis;
    int64_t k;
    int count, parts;
    const double *y;
    double *w;
} product_job;

static void multiply_part(void *state, int part)
{
    const product_job *job = state;
    int64_t n = job->basis->length, from = n * part / job->parts, rows = n * (part + 1) / job->parts - from;
    for (int64_t at = 0, i = 0; at < job->k; at += job->basis->each, i++) {
        int64_t some = job->k - at < job->basis->each ? job->k - at : job->basis->each;
        lw_dense_multiply(0, 0, rows, job->count, some, 1.0, job->basis->block[i] + from, n, job->y + at,
                          job->k, at > 0 ? 1.0 : 0.0, job->w + from, n);
    }
}

void lw_basis_multiply(const lw_basis *basis, int64_t k, int count, const double *y, double *w, lw_team *team)
{
    int64_t parts = basis->length / PART_ROWS;
    product_job job = {.basis = basis, .k = k, .count = count, .y = y, .w = w};
    job.parts = parts < 1 ? 1 : parts > MOST_PARTS ? MOST_PARTS : (int)parts;
    if (k == 0) lw_fill(basis->length * count, 0.0, w);
    lw_team_run(team, job.parts, multiply_part, &job);
}
