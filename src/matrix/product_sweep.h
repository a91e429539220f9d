/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The loops of matrix/product_kernel.h, included once for each instruction set, which its file selects
 * before. The sums of a line are taken in four lanes over its entries in order, so the bytes depend on the
 * layout and the set only. */
#ifndef LW_MATRIX_PRODUCT_SWEEP_H
#define LW_MATRIX_PRODUCT_SWEEP_H

#include "matrix/product_kernel.h"

typedef double four __attribute__((vector_size(32), aligned(8), may_alias));
typedef float four_single __attribute__((vector_size(16), aligned(4), may_alias));

#if defined(LW_FUSED_MULTIPLY_ADD)
#include <immintrin.h>
#define MULTIPLY_ADD(a, b, c) ((four)_mm256_fmadd_pd((__m256d)(a), (__m256d)(b), (__m256d)(c)))
#else
#define MULTIPLY_ADD(a, b, c) ((a) * (b) + (c))
#endif

/* Bytes that the values are fetched ahead (measured: 10 to 40 % at 1e5 and more lines). */
#define AHEAD 2048
#define AHEAD_TILES 4096

#define ALWAYS static inline __attribute__((always_inline))

ALWAYS void load(const void *value, int64_t at, int single, four *out)
{
    if (single)
        *out = __builtin_convertvector(*(const four_single *)((const float *)value + at), four);
    else
        *out = *(const four *)((const double *)value + at);
}

/* Fetches values and indices a little ahead of eight entries of a line. */
ALWAYS void look_ahead(const void *value, const int32_t *index, int64_t p, int single)
{
    __builtin_prefetch((const char *)value + p * (single ? 4 : 8) + AHEAD);
    __builtin_prefetch((const char *)(index + p) + AHEAD / 2);
}

/* The same ahead of a tile. */
ALWAYS void look_ahead_tile(const void *value, const int32_t *index, int64_t p, int single)
{
    const char *place = (const char *)value + 4 * p * (single ? 4 : 8) + AHEAD_TILES;
    __builtin_prefetch(place);
    if (!single) __builtin_prefetch(place + 64);
    __builtin_prefetch((const char *)(index + p) + AHEAD_TILES / 8);
}

ALWAYS void take(const double *pairs, const int32_t *index, four *out)
{
    *out = (four){pairs[2 * (int64_t)index[0]], pairs[2 * (int64_t)index[1]], pairs[2 * (int64_t)index[2]],
                  pairs[2 * (int64_t)index[3]]};
}

ALWAYS void give(double *pairs, const int32_t *index, const four *r)
{
    pairs[2 * (int64_t)index[0] + 1] += (*r)[0];
    pairs[2 * (int64_t)index[1] + 1] += (*r)[1];
    pairs[2 * (int64_t)index[2] + 1] += (*r)[2];
    pairs[2 * (int64_t)index[3] + 1] += (*r)[3];
}

ALWAYS double sum_lanes(const four *a)
{
    return ((*a)[0] + (*a)[1]) + ((*a)[2] + (*a)[3]);
}

/* g_l = sum_p value(p, l) s(index p), l = 0..3. */
ALWAYS void gather_tiles(const void *value, const int32_t *index, int64_t from, int64_t to, int single,
                         int ahead, const double *pairs, double *g)
{
    four a = {0}, b = {0}, c = {0}, d = {0}, s, v;
    for (int64_t p = from; p < to; p += 4) {
        if (ahead) look_ahead_tile(value, index, p, single);
        take(pairs, index + p, &s);
        load(value, 4 * p, single, &v);
        a = MULTIPLY_ADD(v, s, a);
        load(value, 4 * p + 4, single, &v);
        b = MULTIPLY_ADD(v, s, b);
        load(value, 4 * p + 8, single, &v);
        c = MULTIPLY_ADD(v, s, c);
        load(value, 4 * p + 12, single, &v);
        d = MULTIPLY_ADD(v, s, d);
    }
    g[0] = sum_lanes(&a);
    g[1] = sum_lanes(&b);
    g[2] = sum_lanes(&c);
    g[3] = sum_lanes(&d);
}

/* a(index p) += sum_l value(p, l) g_l. */
ALWAYS void scatter_tiles(const void *value, const int32_t *index, int64_t from, int64_t to, int single,
                          int ahead, double *pairs, const double *g)
{
    four g0 = {g[0], g[0], g[0], g[0]}, g1 = {g[1], g[1], g[1], g[1]};
    four g2 = {g[2], g[2], g[2], g[2]}, g3 = {g[3], g[3], g[3], g[3]}, v, r;
    for (int64_t p = from; p < to; p += 4) {
        if (ahead) look_ahead_tile(value, index, p, single);
        load(value, 4 * p, single, &v);
        r = v * g0;
        load(value, 4 * p + 4, single, &v);
        r = MULTIPLY_ADD(v, g1, r);
        load(value, 4 * p + 8, single, &v);
        r = MULTIPLY_ADD(v, g2, r);
        load(value, 4 * p + 12, single, &v);
        r = MULTIPLY_ADD(v, g3, r);
        give(pairs, index + p, &r);
    }
}

ALWAYS double entry(const void *value, int64_t at, int single)
{
    return single ? (double)((const float *)value)[at] : ((const double *)value)[at];
}

/* sum_p value(p) s(index p). */
ALWAYS double gather_line(const void *value, const int32_t *index, int64_t from, int64_t to, int single,
                          int ahead, const double *pairs)
{
    four a = {0}, b = {0}, s, v;
    int64_t p = from;
    for (; p + 8 <= to; p += 8) {
        if (ahead) look_ahead(value, index, p, single);
        take(pairs, index + p, &s);
        load(value, p, single, &v);
        a = MULTIPLY_ADD(v, s, a);
        take(pairs, index + p + 4, &s);
        load(value, p + 4, single, &v);
        b = MULTIPLY_ADD(v, s, b);
    }
    a += b;
    double sum = sum_lanes(&a);
    for (; p < to; p++) sum += entry(value, p, single) * pairs[2 * (int64_t)index[p]];
    return sum;
}

/* a(index p) += value(p) g. */
ALWAYS void scatter_line(const void *value, const int32_t *index, int64_t from, int64_t to, int single,
                         int ahead, double *pairs, double g)
{
    int64_t p = from;
    for (; p + 8 <= to; p += 8) {
        if (ahead) look_ahead(value, index, p, single);
        for (int64_t q = p; q < p + 8; q++) pairs[2 * (int64_t)index[q] + 1] += entry(value, q, single) * g;
    }
    for (; p < to; p++) pairs[2 * (int64_t)index[p] + 1] += entry(value, p, single) * g;
}

/* The lines of one block and one vector. */
ALWAYS void sweep_block(const lw_sweep *w, int64_t block, int c, int single, int wide)
{
    const lw_lines *m = w->lines;
    const void *value = single ? (const void *)m->single : (const void *)m->value;
    int64_t from = m->start[block], to = m->start[block + 1], line = block * (wide ? 4 : 1) + c * m->lines;
    int64_t live = wide && 4 * block + 4 > m->lines ? m->lines - 4 * block : (wide ? 4 : 1);
    double *pairs = w->pairs + 2 * c * m->shorter, g[4] = {0};
    const double *scale = w->line_scale ? w->line_scale + block * (wide ? 4 : 1) : NULL;
    if (w->gather) {
        double beta = w->beta ? w->beta[c] : 0, square = 0;
        if (wide)
            gather_tiles(value, m->index, from, to, single, c == 0, pairs, g);
        else
            g[0] = gather_line(value, m->index, from, to, single, c == 0, pairs);
        for (int64_t l = 0; l < live; l++) {
            if (scale) g[l] *= scale[l];
            if (beta != 0) g[l] -= beta * w->t_out[line + l];
            w->t_out[line + l] = g[l];
            square += g[l] * g[l];
            if (scale) g[l] *= scale[l];
        }
        w->square[c] += square;
    } else {
        for (int64_t l = 0; l < live; l++) g[l] = w->t_in[line + l];
    }
    if (!w->scatter) return;
    if (wide)
        scatter_tiles(value, m->index, from, to, single, !w->gather && c == 0, pairs, g);
    else
        scatter_line(value, m->index, from, to, single, !w->gather && c == 0, pairs, g[0]);
}

ALWAYS void sweep_blocks(const lw_sweep *w, int single, int wide)
{
    for (int64_t block = w->from; block < w->to; block++)
        for (int c = 0; c < w->k; c++) sweep_block(w, block, c, single, wide);
}

static void sweep_double_lines(const lw_sweep *w)
{
    sweep_blocks(w, 0, 0);
}

static void sweep_double_tiles(const lw_sweep *w)
{
    sweep_blocks(w, 0, 1);
}

static void sweep_single_lines(const lw_sweep *w)
{
    sweep_blocks(w, 1, 0);
}

static void sweep_single_tiles(const lw_sweep *w)
{
    sweep_blocks(w, 1, 1);
}

#define SWEEPS                                                                                               \
    {                                                                                                        \
        {sweep_double_lines, sweep_double_tiles},                                                            \
        {                                                                                                    \
            sweep_single_lines, sweep_single_tiles                                                           \
        }                                                                                                    \
    }

#endif
