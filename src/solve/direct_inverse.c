/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Corrections that turn the inverse of the factored matrix into the inverse with conditions and free datum:
 *
 *      Q_c = Q0 - Y Y' + X X'                            (conditions.h)
 *      S Q_c S' = Q_c - G (Q_c T')' - (Q_c T') G' + (G M) G',   M = T Q_c T' */
#include "core/memory.h"
#include "matrix/dense.h"
#include "matrix/vector.h"
#include "solve/direct.h"

/* left, right (columns x 3 d) of the datum. */
static lw_status datum_terms(lw_direct *self, double *left, double *right, lw_error *error)
{
    const lw_datum *datum = &self->datum;
    int64_t n = self->base.system->columns, d = datum->space.defect;
    double *g = LW_NEW_ARRAY(double, n *d), *M = LW_NEW_ARRAY(double, d *d), *qt = right;
    lw_status status =
        g && M ? LW_OK : lw_fail_memory(error, "the datum's part of the inverse", (size_t)(n * d) * 8);
    for (int64_t i = 0; status == LW_OK && i < n * d; i++) g[i] = -datum->weight[i];
    if (status == LW_OK) status = self->factor->solve(self, d, NULL, g, NULL, qt, error);
    if (status == LW_OK && self->conditions.count > 0)
        status = lw_conditions_apply(self, d, g, NULL, NULL, qt, NULL, error);
    if (status == LW_OK) {
        const double *G = datum->space.basis;
        lw_dense_multiply(1, 0, d, d, n, 1, datum->weight, n, qt, n, 0, M, d);
        for (int64_t i = 0; i < n * d; i++) {
            left[i] = -G[i];
            left[n * d + i] = -qt[i];
            right[n * d + i] = right[2 * n * d + i] = G[i];
        }
        lw_dense_multiply(0, 0, n, d, d, 1, G, n, M, d, 0, left + 2 * n * d, n);
    }
    lw_free(g);
    lw_free(M);
    return status;
}

lw_status lw_direct_inverse(lw_decomposition *base, double lambda, int hand_over, lw_inverse_source *out,
                            lw_error *error)
{
    lw_direct *self = (lw_direct *)base;
    int64_t n = base->system->columns, c = base->system->conditions;
    *out = (lw_inverse_source){0};
    lw_status status = lw_direct_prepare(self, lambda, NULL, error);
    if (status != LW_OK) return status;
    int64_t defect = lw_direct_defect(self), border = self->conditions.border,
            terms = c + border + 3 * defect;
    lw_free(self->left);
    lw_free(self->right);
    self->left = self->right = NULL;
    if (terms > 0) {
        status = lw_watch_budget(&self->watch, lw_bytes(2 * n * terms, 8),
                                 "the inverse with conditions or free datum",
                                 "allow more memory or ask for no standard deviations", error);
        if (status < 0) return status;
        self->left = LW_NEW_ARRAY(double, n *terms);
        self->right = LW_NEW_ARRAY(double, n *terms);
        if (!self->left || !self->right)
            return lw_fail_memory(error, "the inverse", (size_t)(n * terms) * 16);
    }
    if (c > 0) status = lw_conditions_correction(self, self->right, error);
    for (int64_t i = 0; status == LW_OK && i < n * (c + border); i++)
        self->left[i] = i < n * c ? -self->right[i] : self->right[i];
    if (status == LW_OK && defect > 0)
        status = datum_terms(self, self->left + n * (c + border), self->right + n * (c + border), error);
    if (status == LW_OK) status = self->factor->inverse(self, hand_over, out, error);
    if (status < 0) return status;
    out->columns = n;
    out->correction = terms;
    out->left = self->left;
    out->right = self->right;
    if (hand_over) self->lambda = (double)NAN;
    return LW_OK;
}
