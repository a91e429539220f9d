/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/outlier.h"

#include "certainty/deflation.h"
#include "core/chance.h"
#include "core/memory.h"

#include <math.h>
#include <stdio.h>

typedef struct search {
    const lw_system *system;
    const lw_certainty_options *options;
    lw_deflation *deflation;
    bool *hidden; /* rows: left out of the search, but kept */
    double dof;   /* of the full problem */
    int64_t tested, room;
    lw_outlier_log *log;
} search;

void lw_outlier_log_free(lw_outlier_log *log)
{
    if (!log) return;
    lw_free(log->steps);
    lw_free(log->row_factor);
    lw_free(log);
}

static const char *name_of(const search *s, int64_t row)
{
    const lw_problem *problem = s->system->problem;
    if (row < s->system->observations) return lw_ids_name(problem->observations, row);
    return lw_ids_name(problem->parameters, s->system->prior_parameter[row - s->system->observations]);
}

static lw_status note(search *s, int64_t row, const char *action, double statistic, double critical,
                      const char *reason, lw_error *error)
{
    lw_outlier_log *log = s->log;
    if (log->count == s->room) {
        int64_t room = 2 * s->room + 16;
        lw_outlier_step *steps = lw_resize(log->steps, (size_t)room, sizeof *steps);
        if (!steps) return lw_fail_memory(error, "the outlier log", (size_t)room * sizeof *steps);
        log->steps = steps;
        s->room = room;
    }
    lw_outlier_step *step = log->steps + log->count;
    *step = (lw_outlier_step){.step = (int)++log->count,
                              .row = row,
                              .action = action,
                              .statistic = statistic,
                              .critical = critical};
    snprintf(step->reason, sizeof step->reason, "%s", reason);
    return LW_OK;
}

/* Critical value of the family with `aside` rows out: of w, or of tau with the degrees of freedom that are
 * left. */
static double critical_value(const search *s, int64_t aside)
{
    double tests = (double)(s->tested - aside);
    double alpha = lw_family_alpha(1 - s->options->confidence, tests > 1 ? tests : 1);
    return s->options->variance_estimated ? lw_tau_critical(alpha, s->dof - (double)aside)
                                          : lw_w_critical(alpha);
}

/* s0 that statistics are divided by: 1, or that of chi_square with `aside` rows out. */
static double divisor(const search *s, double chi_square, int64_t aside)
{
    return s->options->variance_estimated ? sqrt(chi_square / (s->dof - (double)aside)) : 1;
}

static int64_t most_significant(const lw_deflation *d, double *w)
{
    int64_t best = -1;
    *w = 0;
    for (int64_t i = 0; i < d->rows; i++) {
        double candidate = d->t[i] > 0 ? d->y[i] / sqrt(d->t[i]) : 0;
        if (!(fabs(candidate) > fabs(*w))) continue;
        *w = candidate;
        best = i;
    }
    return best;
}

/* One step forward; *more: something was left out. */
static lw_status step_forward(search *s, bool *more, lw_error *error)
{
    lw_deflation *d = s->deflation;
    double w, critical = critical_value(s, d->count), s0 = divisor(s, d->chi_square, d->count);
    int64_t row = most_significant(d, &w), rival = -1;
    char reason[200];
    *more = row >= 0 && fabs(w) / s0 > critical;
    if (!*more) return LW_OK;
    lw_status status = lw_deflation_rival(d, row, &rival, error);
    if (status == LW_OK) status = lw_deflation_add(d, row, error);
    if (status != LW_OK) return status;
    if (rival < 0)
        return note(s, row, "set_aside", w / s0, critical,
                    "largest statistic, above the critical value of the family", error);
    s->hidden[row] = true;
    snprintf(reason, sizeof reason, "an error in it cannot be told from one in '%.100s': look at both",
             name_of(s, rival));
    return note(s, row, "kept", w / s0, critical, reason, error);
}

/* Puts back the row with the smallest statistic that is below the critical value; *more: one came back. */
static lw_status step_back(search *s, double *w, bool *more, lw_error *error)
{
    lw_deflation *d = s->deflation;
    int64_t best = -1;
    double smallest = HUGE_VAL, critical = critical_value(s, d->count - 1);
    *more = false;
    lw_status status = lw_deflation_back(d, w, error);
    for (int64_t k = 0; k < d->count && status == LW_OK; k++) {
        double statistic = fabs(w[k]) / divisor(s, d->chi_square + w[k] * w[k], d->count - 1);
        if (s->hidden[d->row[k]] || !(statistic <= critical) || !(statistic < smallest)) continue;
        smallest = statistic;
        best = k;
    }
    if (best < 0) return status;
    double signed_value = copysign(smallest, w[best]);
    status = note(s, d->row[best], "reinstated", signed_value, critical,
                  "with the others set aside it agrees again", error);
    lw_deflation_remove(d, best);
    *more = true;
    return status;
}

static lw_status conclude(search *s, double *w, lw_error *error)
{
    lw_deflation *d = s->deflation;
    lw_status status = lw_deflation_back(d, w, error);
    for (int64_t k = 0; k < d->count && status == LW_OK; k++) {
        int64_t row = d->row[k];
        if (s->hidden[row]) continue;
        double s0 = divisor(s, d->chi_square + w[k] * w[k], d->count - 1);
        s->log->row_factor[row] = 0;
        s->log->set_aside++;
        status = note(s, row, "kept_aside", w[k] / s0, critical_value(s, d->count - 1),
                      "tried again: still above the critical value", error);
    }
    return status;
}

static lw_status run(search *s, int64_t most, const lw_watch *watch, lw_error *error)
{
    bool more = true;
    lw_status status = LW_OK;
    while (more && status == LW_OK && s->deflation->count < most) {
        lw_watch_tick(watch, "searching outliers", (double)s->deflation->count, 0, "");
        if (lw_watch_cancelled(watch))
            return lw_fail(error, LW_INTERRUPTED, "interrupted while searching outliers");
        status = step_forward(s, &more, error);
    }
    double *w = LW_NEW_ARRAY(double, s->deflation->count);
    if (!w) return lw_fail_memory(error, "the outlier search", (size_t)s->deflation->count * sizeof *w);
    for (more = true; more && status == LW_OK && s->deflation->count > 0;)
        status = step_back(s, w, &more, error);
    if (status == LW_OK && s->deflation->count > 0) status = conclude(s, w, error);
    lw_free(w);
    return status;
}

/* The full problem: decomposition, estimate and reliability. */
static lw_status solve_full(lw_system *system, const lw_solve_options *solve_options,
                            const lw_certainty_options *options, const lw_watch *watch,
                            lw_decomposition **decomposition, lw_estimate **estimate,
                            lw_certainty **certainty, lw_error *error)
{
    lw_engine_choice choice = {0};
    lw_certainty_options wanted = *options;
    wanted.sigma = false;
    wanted.reliability = true;
    wanted.covariance_count = wanted.resolution_count = 0;
    lw_status status = lw_decompose(system, 0, solve_options, watch, &choice, decomposition, error);
    if (status >= LW_OK)
        status = (*decomposition)->methods->estimate(*decomposition, 0, watch, estimate, error);
    if (status >= LW_OK)
        status = lw_certainty_make(*decomposition, *estimate, &wanted, false, watch, certainty, error);
    if (status >= LW_OK && !(*certainty)->redundancy)
        status = lw_fail(error, LW_BAD_USAGE,
                         "the outlier search needs redundancy numbers, which engine %s cannot give here; "
                         "use dense or cholesky",
                         (*decomposition)->methods->engine);
    return status;
}

static lw_status search_new(search *s, const lw_system *system, const lw_certainty *certainty,
                            lw_error *error)
{
    s->system = system;
    s->dof = certainty->test.degrees_of_freedom;
    s->log = LW_NEW(lw_outlier_log);
    s->hidden = LW_NEW_ZEROS(bool, system->rows);
    if (s->log) s->log->row_factor = LW_NEW_ARRAY(double, system->rows);
    if (!s->log || !s->hidden || !s->log->row_factor)
        return lw_fail_memory(error, "the outlier search", (size_t)system->rows * 9);
    for (int64_t i = 0; i < system->rows; i++) {
        s->log->row_factor[i] = system->row_factor ? system->row_factor[i] : 1;
        s->tested += !isnan(certainty->detectable[i]);
    }
    return LW_OK;
}

lw_status lw_outlier_search(const lw_problem *problem, const lw_system_options *system_options,
                            const lw_solve_options *solve_options, const lw_certainty_options *options,
                            int64_t most, const lw_watch *watch, lw_outlier_log **out, lw_error *error)
{
    lw_system *system = NULL;
    lw_decomposition *decomposition = NULL;
    lw_estimate *estimate = NULL;
    lw_certainty *certainty = NULL;
    search s = {.options = options};
    *out = NULL;
    lw_status status = lw_system_new(problem, system_options, watch, &system, error);
    if (status == LW_OK)
        status =
            solve_full(system, solve_options, options, watch, &decomposition, &estimate, &certainty, error);
    if (status >= LW_OK) status = search_new(&s, system, certainty, error);
    if (status == LW_OK) status = lw_deflation_new(decomposition, estimate, certainty, &s.deflation, error);
    if (status == LW_OK) {
        int64_t left = (int64_t)s.dof - 2;
        if (most <= 0) most = system->rows / 10 > 1 ? system->rows / 10 : 1;
        status = run(&s, most < left ? most : left, watch, error);
    }
    lw_deflation_free(s.deflation);
    lw_free(s.hidden);
    lw_certainty_free(certainty);
    lw_estimate_free(estimate);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
    if (status == LW_OK)
        *out = s.log;
    else
        lw_outlier_log_free(s.log);
    return status;
}
