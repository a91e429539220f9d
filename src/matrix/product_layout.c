/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "matrix/product_layout.h"

#include "core/memory.h"

#include <string.h>

/* Blocks of four pay below a fill of 2 (measured on ray matrices: 1.75 in natural order gains, 4 in shuffled
 * order loses); where the lines are short, or the values half as long, below 3. */
#define FILL_LIMIT 2.0
#define FILL_LIMIT_EASY 3.0
#define SHORT_LINE 64
/* The fill is first measured on at most this many blocks. */
#define FILL_SAMPLE 2048
#define BUILD_PARTS 64

typedef struct build_state {
    const lw_sparse *A;
    const double *line_scale, *short_scale;
    lw_lines *out;
} build_state;

/* Number of different indices in lines 4b .. 4b+3, padded to a multiple of four. stamp[i] = b marks a seen
 * index. */
static int64_t block_places(const lw_sparse *A, int64_t b, int32_t *stamp)
{
    int64_t last = 4 * b + 4 < A->columns ? 4 * b + 4 : A->columns, count = 0;
    for (int64_t p = A->start[4 * b]; p < A->start[last]; p++) {
        int32_t i = A->index[p];
        count += stamp[i] != (int32_t)b;
        stamp[i] = (int32_t)b;
    }
    return (count + 3) / 4 * 4;
}

/* places / nonzeros over a sample of the blocks. */
static double sample_fill(const lw_sparse *A, int32_t *stamp)
{
    int64_t blocks = (A->columns + 3) / 4, stride = blocks / FILL_SAMPLE + 1;
    int64_t places = 0, nonzeros = 0;
    for (int64_t b = 0; b < blocks; b += stride) {
        int64_t last = 4 * b + 4 < A->columns ? 4 * b + 4 : A->columns;
        places += 4 * block_places(A, b, stamp);
        nonzeros += A->start[last] - A->start[4 * b];
    }
    memset(stamp, 0xff, (size_t)A->rows * sizeof *stamp);
    return nonzeros ? (double)places / (double)nonzeros : 4.0;
}

static double scaled(const build_state *s, int64_t line, int64_t p)
{
    double v = s->A->value[p];
    if (s->line_scale) v *= s->line_scale[line];
    if (s->short_scale) v *= s->short_scale[s->A->index[p]];
    return v;
}

static void store(lw_lines *out, int64_t place, double v)
{
    if (out->storage == LW_STORE_SINGLE)
        ((float *)out->own_value)[place] = (float)v;
    else
        ((double *)out->own_value)[place] = v;
}

/* Merges lines 4b .. 4b+3 into their shared index list and tiles. */
static void fill_block(const build_state *s, int64_t b)
{
    const lw_sparse *A = s->A;
    int64_t at[4], end[4], p = s->out->own_start[b], stop = s->out->own_start[b + 1];
    for (int64_t l = 0; l < 4; l++) {
        int64_t line = 4 * b + l;
        at[l] = line < A->columns ? A->start[line] : 0;
        end[l] = line < A->columns ? A->start[line + 1] : 0;
    }
    int32_t last = 0;
    for (; p < stop; p++) {
        int32_t next = INT32_MAX;
        for (int l = 0; l < 4; l++)
            if (at[l] < end[l] && A->index[at[l]] < next) next = A->index[at[l]];
        if (next != INT32_MAX) last = next;
        s->out->own_index[p] = last;
        for (int64_t l = 0; l < 4; l++) {
            int here = at[l] < end[l] && A->index[at[l]] == next;
            store(s->out, p / 4 * 16 + 4 * l + p % 4, here ? scaled(s, 4 * b + l, at[l]) : 0.0);
            at[l] += here;
        }
    }
}

static void fill_part(void *state, int part)
{
    const build_state *s = state;
    int64_t blocks = s->out->blocks;
    int64_t from = blocks * part / BUILD_PARTS, to = blocks * (part + 1) / BUILD_PARTS;
    for (int64_t b = from; b < to; b++) {
        if (s->out->block == 4)
            fill_block(s, b);
        else
            for (int64_t p = s->A->start[b]; p < s->A->start[b + 1]; p++) store(s->out, p, scaled(s, b, p));
    }
    if (s->out->block == 4) { /* the layout stands for these columns from now on */
        int64_t most = s->A->columns;
        lw_sparse_release(s->A, 4 * from < most ? 4 * from : most, 4 * to < most ? 4 * to : most);
    }
}

static lw_status take_values(const build_state *s, int64_t places, lw_team *team, lw_error *error)
{
    lw_lines *out = s->out;
    size_t size = out->storage == LW_STORE_SINGLE ? sizeof(float) : sizeof(double);
    out->own_value = lw_alloc((size_t)places, size);
    if (!out->own_value) return lw_fail_memory(error, "matrix layout", (size_t)places * size);
    out->bytes += places * (int64_t)size;
    lw_team_run(team, BUILD_PARTS, fill_part, (void *)(uintptr_t)s);
    if (out->storage == LW_STORE_SINGLE)
        out->single = out->own_value;
    else
        out->value = out->own_value;
    return LW_OK;
}

static lw_status make_blocks(const build_state *s, int32_t *stamp, lw_team *team, lw_error *error)
{
    lw_lines *out = s->out;
    out->block = 4;
    out->blocks = (out->lines + 3) / 4;
    out->own_start = LW_NEW_ARRAY(int64_t, out->blocks + 1);
    if (!out->own_start) return lw_fail_memory(error, "matrix layout", (size_t)out->blocks * 8);
    out->own_start[0] = 0;
    for (int64_t b = 0; b < out->blocks; b++)
        out->own_start[b + 1] = out->own_start[b] + block_places(s->A, b, stamp);
    int64_t places = out->own_start[out->blocks];
    out->own_index = LW_NEW_ARRAY(int32_t, places);
    if (!out->own_index) return lw_fail_memory(error, "matrix layout", (size_t)places * 4);
    out->bytes += 8 * (out->blocks + 1) + 4 * places;
    out->start = out->own_start;
    out->index = out->own_index;
    out->fill = (double)(4 * places) / (double)lw_sparse_nonzeros(s->A);
    return take_values(s, 4 * places, team, error);
}

lw_status lw_lines_make(const lw_sparse *A, lw_storage storage, int plain, const double *line_scale,
                        const double *short_scale, lw_team *team, lw_lines *out, lw_error *error)
{
    *out = (lw_lines){
        .lines = A->columns, .shorter = A->rows, .blocks = A->columns, .block = 1, .storage = storage};
    build_state s = {A, line_scale, short_scale, out};
    int32_t *stamp = LW_NEW_ARRAY(int32_t, A->rows);
    if (!stamp) return lw_fail_memory(error, "matrix layout", (size_t)A->rows * 4);
    memset(stamp, 0xff, (size_t)A->rows * sizeof *stamp);
    lw_status status = LW_OK;
    lw_sparse_release(A, 0, A->columns);
    out->fill = sample_fill(A, stamp);
    int easy = storage == LW_STORE_SINGLE || lw_sparse_nonzeros(A) < SHORT_LINE * A->columns;
    if (!plain && out->fill < (easy ? FILL_LIMIT_EASY : FILL_LIMIT) && A->columns / 4 < INT32_MAX) {
        status = make_blocks(&s, stamp, team, error);
    } else {
        out->start = A->start;
        out->index = A->index;
        out->value = A->value;
        if (storage == LW_STORE_SINGLE || line_scale || short_scale)
            status = take_values(&s, lw_sparse_nonzeros(A), team, error);
    }
    lw_free(stamp);
    if (status) lw_lines_clear(out);
    return status;
}

void lw_lines_keep(lw_lines *lines, lw_sparse *transposed)
{
    int64_t nonzeros = lw_sparse_nonzeros(transposed);
    lines->transposed = transposed;
    lines->bytes += 4 * nonzeros + 8 * (transposed->columns + 1);
    if (!lines->own_value) {
        lines->bytes += 8 * nonzeros;
    } else {
        lw_free(transposed->value);
        transposed->value = NULL;
    }
}

void lw_lines_clear(lw_lines *lines)
{
    lw_free(lines->own_start);
    lw_free(lines->own_index);
    lw_free(lines->own_value);
    lw_sparse_free(lines->transposed);
    *lines = (lw_lines){0};
}
