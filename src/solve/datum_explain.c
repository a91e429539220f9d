/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A rank defect in words. With a basis that is orthonormal in each component, the diagonal of the projector
 * on the null space tells everything: its sum over a component is the component's defect, its entries who
 * takes part. */
#include "core/memory.h"
#include "solve/direct.h"

#include <math.h>
#include <stdio.h>

#define MOST_NAMED 10
#define MOST_COMPONENTS 8
#define TAKES_PART 1e-12 /* of the square of a vector's entry, against the largest of its component */

typedef struct part {
    double trace, largest;
    int64_t columns, moving, first;
} part;

static const char *name_of(const lw_system *system, int64_t column)
{
    return lw_ids_name(system->problem->parameters, system->parameter_of[column]);
}

/* "'A', 'B', ... and 12 more": the columns of component c that take part. */
static void list_moving(const lw_system *system, const int32_t *of_column, int32_t c, const double *share,
                        const part *p, char *text, size_t room)
{
    size_t used = 0;
    int named = 0;
    text[0] = 0;
    for (int64_t j = 0; j < system->columns && named < MOST_NAMED && used + 1 < room; j++) {
        if (of_column[j] != c || share[j] <= TAKES_PART * p->largest) continue;
        used +=
            (size_t)snprintf(text + used, room - used, "%s'%.60s'", named ? ", " : "", name_of(system, j));
        named++;
    }
    if (p->moving > named && used + 1 < room)
        snprintf(text + used, room - used, " and %lld more", (long long)(p->moving - named));
}

static lw_status tell_component(const lw_system *system, double lambda, const int32_t *of_column, int32_t c,
                                int64_t count, const double *share, const part *p, lw_error *error)
{
    char moving[1024];
    long long defect = llround(p->trace);
    if (p->columns == 1)
        return lw_fail_also(
            error, LW_UNSOLVABLE,
            "no equation, prior or penalty reaches parameter '%s': take it out, fix it, or give it a "
            "prior_sigma",
            name_of(system, p->first));
    list_moving(system, of_column, c, share, p, moving, sizeof moving);
    const char *cure =
        lambda > 0 ? "observe more, give them a prior_sigma or a damp_weight, or --prefer smallest"
                   : "give as many a prior_sigma, observe more, damp (--damping), or take --datum free";
    return lw_fail_also(
        error, LW_UNSOLVABLE,
        "component %lld of %lld (%lld parameters, the first is '%s') has %s%lld defect%s: these parameters "
        "can move together without changing any observation: %s; damp (--damping), or hold %lld of them "
        "(parameters.csv, "
        "column fixed), %s",
        (long long)c + 1, (long long)count, (long long)p->columns, name_of(system, p->first),
        defect >= LW_DATUM_VECTORS ? "at least " : "", defect, defect == 1 ? "" : "s", moving, defect, cure);
}

static lw_status tell(const lw_system *system, double lambda, const int32_t *of_column, int64_t count,
                      const double *share, const part *parts, lw_error *error)
{
    long long defects = 0, bad = 0;
    for (int64_t c = 0; c < count; c++) {
        defects += llround(parts[c].trace);
        bad += parts[c].trace > 0.5;
    }
    lw_status status =
        lw_fail(error, LW_UNSOLVABLE,
                "%s not determined: rank defect %lld in %lld of %lld components of %lld parameters",
                lambda > 0 ? "observations and penalty together leave parameters"
                           : "the observations leave parameters",
                defects, bad, (long long)count, (long long)system->columns);
    int told = 0;
    for (int64_t c = 0; c < count; c++) {
        if (parts[c].trace <= 0.5) continue;
        if (told++ == MOST_COMPONENTS) {
            status = lw_fail_also(error, LW_UNSOLVABLE, "and %lld more components", bad - MOST_COMPONENTS);
            break;
        }
        status = tell_component(system, lambda, of_column, (int32_t)c, count, share, parts + c, error);
    }
    return status;
}

lw_status lw_datum_explain(const lw_direct *direct, double lambda, int64_t vectors, const double *basis,
                           lw_error *error)
{
    const lw_system *system = direct->base.system;
    int64_t n = system->columns, count = 0;
    lw_sparse *M = NULL;
    int32_t *of_column = LW_NEW_ARRAY(int32_t, n);
    double *share = LW_NEW_ZEROS(double, n);
    part *parts = NULL;
    lw_status status = of_column && share ? LW_OK : lw_fail_memory(error, "the explanation", (size_t)n * 12);
    if (status == LW_OK) status = lw_direct_stack((lw_direct *)direct, lambda, &M, error);
    if (status == LW_OK) status = lw_datum_components(M, of_column, &count, error);
    if (status == LW_OK && !(parts = LW_NEW_ZEROS(part, count)))
        status = lw_fail_memory(error, "the explanation", (size_t)count * sizeof *parts);
    if (status == LW_OK) {
        for (int64_t i = 0; i < n * vectors; i++) share[i % n] += basis[i] * basis[i];
        for (int64_t j = 0; j < n; j++) {
            part *p = parts + of_column[j];
            if (p->columns++ == 0) p->first = j;
            p->trace += share[j];
            p->largest = fmax(p->largest, share[j]);
        }
        for (int64_t j = 0; j < n; j++)
            parts[of_column[j]].moving += share[j] > TAKES_PART * parts[of_column[j]].largest;
        status = tell(system, lambda, of_column, count, share, parts, error);
    }
    lw_sparse_free(M);
    lw_free(of_column);
    lw_free(share);
    lw_free(parts);
    return status;
}
