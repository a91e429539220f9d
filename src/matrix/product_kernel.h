/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The inner loops of the one-pass products, compiled for several instruction sets; the machine chooses once.
 */
#ifndef LW_MATRIX_PRODUCT_KERNEL_H
#define LW_MATRIX_PRODUCT_KERNEL_H

#include "matrix/product_layout.h"

/** One sweep over the blocks from .. to-1 for k vectors, with M the lines x shorter matrix of the layout:
 *
 *      gather:   t <- M s - beta t       (t on the lines, s on the shorter side; beta NULL: zero)
 *      scatter:  a <- a + M' t           (t the new one when gathered, else t_in)
 *
 *  With a line_scale, D = diag of it: t <- D M s - beta t and a <- a + M' D t.
 *  s and a stand in pairs, {s_i, a_i} at pairs[2 i]: one cache line serves the gather and the scatter. */
typedef struct lw_sweep {
    const lw_lines *lines;
    int64_t from, to;
    int k, gather, scatter;
    const double *beta;       /**< k, or NULL */
    const double *line_scale; /**< lines, or NULL */
    const double *t_in;       /**< lines x k; read when only scattering */
    double *t_out;            /**< lines x k; written when gathering */
    double *pairs;            /**< 2 shorter x k */
    double *square;           /**< k: sum of t^2 over the swept lines; set when gathering */
} lw_sweep;

typedef void lw_sweep_kernel(const lw_sweep *sweep);

typedef struct lw_product_kernels {
    const char *name;
    lw_sweep_kernel *sweep[2][2]; /**< [storage][block of four] */
} lw_product_kernels;

extern const lw_product_kernels lw_product_plain;
#if defined(__x86_64__)
extern const lw_product_kernels lw_product_avx2;
#endif

#endif
