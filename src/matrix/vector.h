/* SPDX-License-Identifier: GPL-3.0-or-later */
/** Dense vectors of doubles. Sums are taken over fixed blocks in a fixed order, so the bytes of a result do
 * not depend on the number of threads. team may be NULL. n may be 0. */
#ifndef LW_MATRIX_VECTOR_H
#define LW_MATRIX_VECTOR_H

#include "core/team.h"

#include <stdint.h>

double lw_dot(int64_t n, const double *x, const double *y, lw_team *team); /**< x'y */
double lw_norm(int64_t n, const double *x, lw_team *team);    /**< ||x||_2, no overflow for any finite x */
double lw_norm_max(int64_t n, const double *x);               /**< max |x_i| */
void lw_scale(int64_t n, double a, double *x, lw_team *team); /**< x <- a x */
void lw_add_scaled(int64_t n, double a, const double *x, double *y, lw_team *team); /**< y <- y + a x */
void lw_scale_add(int64_t n, double a, const double *x, double b, double *y,
                  lw_team *team); /**< y <- a x + b y */
void lw_copy(int64_t n, const double *x, double *y);
void lw_fill(int64_t n, double a, double *x);

#endif
