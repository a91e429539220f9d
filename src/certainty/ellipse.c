/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Error ellipses: axes are square roots of the eigenvalues of the covariance of a point (or of a difference
 * of points); in the plane
 *
 *     a^2, b^2 = (xx + yy +- sqrt((yy - xx)^2 + 4 xy^2)) / 2,   tan 2t = 2 xy / (yy - xx)
 *
 * with t clockwise from the second axis (north). Source: JCGM 102:2011; Mikhail & Gracie, Analysis and
 * Adjustment of Survey Measurements, 1981. */
#include "certainty/part.h"
#include "certainty/point_list.h"
#include "core/chance.h"
#include "core/memory.h"
#include "matrix/dense.h"

#include <math.h>

/* Two axes are one circle when they agree to rounding. */
#define CIRCLE 1e-10

void lw_ellipse_axes(double xx, double xy, double yy, double *semi_major, double *semi_minor, double *azimuth)
{
    double split = hypot(yy - xx, 2 * xy), sum = xx + yy, large = (sum + split) / 2;
    double small = large > 0 ? (xx * yy - xy * xy) / large : 0;
    *semi_major = sqrt(fmax(0, large));
    *semi_minor = sqrt(fmax(0, small));
    *azimuth = (double)NAN;
    if (!(split > CIRCLE * sum)) return;
    *azimuth = atan2(2 * xy, yy - xx) * 90 / M_PI;
    if (*azimuth < 0) *azimuth += 180;
    if (*azimuth >= 180) *azimuth -= 180;
}

static double covariance(const lw_certainty_work *w, int64_t i, int64_t j)
{
    if (i < 0 || j < 0) return 0;
    return w->factor * lw_cofactor_entry(w->cofactor, i, j) * w->system->scale[i] * w->system->scale[j];
}

/* Covariance of a point (to < 0) or of the difference of two, 3 x 3. */
static void point_covariance(const lw_certainty_work *w, const lw_point_list *p, int64_t from, int64_t to,
                             double C[9])
{
    const int64_t *f = p->column + 3 * from, *t = to < 0 ? NULL : p->column + 3 * to;
    for (int i = 0; i < 3; i++) {
        for (int j = 0; j < 3; j++) {
            C[i + 3 * j] = covariance(w, f[i], f[j]);
            if (t)
                C[i + 3 * j] +=
                    covariance(w, t[i], t[j]) - covariance(w, f[i], t[j]) - covariance(w, t[i], f[j]);
        }
    }
}

static lw_status fill_ellipse(const lw_certainty_work *w, const lw_point_list *p, int64_t from, int64_t to,
                              lw_ellipse *out, lw_error *error)
{
    int dimension = lw_point_dimension(p, from), other = to < 0 ? dimension : lw_point_dimension(p, to);
    double C[9], values[3] = {(double)NAN, (double)NAN, (double)NAN};
    lw_status status = LW_OK;
    if (other < dimension) dimension = other;
    point_covariance(w, p, from, to, C);
    lw_ellipse e = {.point = (int32_t)from,
                    .to_point = (int32_t)to,
                    .dimension = dimension,
                    .confidence = (double)NAN,
                    .multiplier = 1};
    lw_ellipse_axes(C[0], C[3], C[4], &e.semi_major, &e.semi_minor, &e.azimuth);
    e.vertical = dimension == 3 ? sqrt(fmax(0, C[8])) : (double)NAN;
    bool known = !isnan(C[0] + C[3] + C[4] + (dimension == 3 ? C[6] + C[7] + C[8] : 0));
    if (dimension == 3 && known) status = lw_dense_eigen(3, C, values, error);
    for (int k = 0; k < 3; k++) e.principal[k] = dimension == 3 ? sqrt(fmax(0, values[2 - k])) : (double)NAN;
    out[0] = out[1] = e;
    double dof = w->options->variance_estimated ? w->out->test.degrees_of_freedom : 0;
    double k = lw_region_multiplier(w->options->confidence, dimension, dof);
    out[1].confidence = w->options->confidence;
    out[1].multiplier = k;
    out[1].semi_major *= k;
    out[1].semi_minor *= k;
    out[1].vertical *= k;
    for (int a = 0; a < 3; a++) out[1].principal[a] *= k;
    return status;
}

/* Calls for every entry that an ellipse needs. */
typedef void need(void *state, int64_t i, int64_t j);

static void needs_of(const lw_point_list *p, int64_t from, int64_t to, need *call, void *state)
{
    for (int a = 0; a < 3; a++) {
        for (int b = from == to ? a : 0; b < 3; b++) {
            int64_t i = p->column[3 * from + a], j = p->column[3 * to + b];
            if (i >= 0 && j >= 0) call(state, i, j);
        }
    }
}

static void all_needs(const lw_point_list *p, need *call, void *state)
{
    for (int64_t k = 0; k < p->points; k++)
        if (lw_point_is_free(p, k)) needs_of(p, k, k, call, state);
    for (int64_t k = 0; k < p->pairs; k++)
        needs_of(p, p->pair[k] / p->points, p->pair[k] % p->points, call, state);
}

typedef struct lacking {
    const lw_cofactor *cofactor;
    lw_learned *list; /* NULL: only counted */
    int64_t count;
} lacking;

static void take_lacking(void *state, int64_t i, int64_t j)
{
    lacking *l = state;
    if (lw_cofactor_holds(l->cofactor, i, j)) return;
    if (l->list) l->list[l->count] = (lw_learned){.i = i, .j = j};
    l->count++;
}

lw_status lw_ellipse_columns(lw_certainty_work *w, lw_error *error)
{
    lacking l = {.cofactor = w->cofactor};
    if (w->noise) return LW_OK;
    lw_status status = lw_point_list_new(w->system, &w->points, error);
    if (status != LW_OK || !w->points) return status;
    all_needs(w->points, take_lacking, &l);
    if (l.count == 0 || (double)l.count * 4 * w->cofactor->factor_nonzeros > LW_SHIFT_WORK) return LW_OK;
    l.list = LW_NEW_ARRAY(lw_learned, l.count);
    if (!l.list) return lw_fail_memory(error, "ellipses", (size_t)l.count * sizeof *l.list);
    l.count = 0;
    all_needs(w->points, take_lacking, &l);
    status = lw_cofactor_learn(w->cofactor, l.count, l.list, error);
    lw_free(l.list);
    return status;
}

lw_status lw_ellipses_make(lw_certainty_work *w, lw_error *error)
{
    lw_certainty *out = w->out;
    const lw_point_list *p = w->points;
    lw_status status = LW_OK;
    int64_t absolute = 0;
    if (!p || isnan(w->factor)) return LW_OK;
    for (int64_t k = 0; k < p->points; k++) absolute += lw_point_is_free(p, k);
    out->ellipses = LW_NEW_ARRAY(lw_ellipse, 2 * (absolute + p->pairs));
    if (!out->ellipses)
        return lw_fail_memory(error, "ellipses", (size_t)(absolute + p->pairs) * 2 * sizeof(lw_ellipse));
    lw_ellipse *e = out->ellipses;
    for (int64_t k = 0; k < p->points && status == LW_OK; k++) {
        if (!lw_point_is_free(p, k)) continue;
        status = fill_ellipse(w, p, k, -1, e, error);
        e += 2;
    }
    for (int64_t k = 0; k < p->pairs && status == LW_OK; k++, e += 2)
        status = fill_ellipse(w, p, p->pair[k] / p->points, p->pair[k] % p->points, e, error);
    out->ellipse_count = 2 * (absolute + p->pairs);
    return status;
}
