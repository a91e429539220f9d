/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "solve/nonlinear_cg.h"

#include "core/memory.h"
#include "matrix/vector.h"

#include <float.h>
#include <math.h>

#define MOST_TRIALS 60
/* Fletcher-Reeves takes ever shorter steps after a bad direction: restarted every n (or so many) steps. */
#define REEVES_RESTART 50
/* Rounding of f, relative; and how many steps in a row may gain no more than that. */
#define SLACK (64 * DBL_EPSILON)
#define IDLE_STEPS 30

typedef struct work {
    const lw_objective *objective;
    lw_cg_options options;
    const lw_watch *watch;
    lw_team *team;
    double *x, *g, *before, *d, *trial; /* before: the last gradient */
    lw_cg_result *out;
} work;

/* A point of the line: step, value, slope. */
typedef struct place {
    double alpha, f, slope;
} place;

static place look(work *w, double alpha)
{
    const lw_objective *o = w->objective;
    place p = {.alpha = alpha};
    w->out->evaluations++;
    if (o->along) {
        p.f = o->along(o->state, alpha, &p.slope);
        return p;
    }
    lw_copy(o->n, w->x, w->trial);
    lw_add_scaled(o->n, alpha, w->d, w->trial, w->team);
    double *gradient = w->trial + o->n;
    p.f = o->value(o->state, w->trial, gradient);
    p.slope = lw_dot(o->n, gradient, w->d, w->team);
    return p;
}

/* Minimiser of the cubic through two places, kept off the ends (Nocedal & Wright 3.59). */
static double between(place a, place b)
{
    double width = b.alpha - a.alpha, d1 = a.slope + b.slope - 3 * (a.f - b.f) / (a.alpha - b.alpha);
    double root = d1 * d1 - a.slope * b.slope, t = 0.5;
    if (root >= 0) {
        double d2 = sqrt(root), divisor = b.slope - a.slope + 2 * d2;
        if (divisor != 0) t = 1 - (b.slope + d2 - d1) / divisor;
    }
    if (!(t > 0.05)) t = 0.05;
    if (t > 0.95) t = 0.95;
    return a.alpha + t * width;
}

/* Beyond the last place, where no bracket is known yet: secant of the slopes within 1.5 and 10 times. */
static double beyond(place a, place b)
{
    double alpha =
        b.slope > a.slope ? b.alpha - b.slope * (b.alpha - a.alpha) / (b.slope - a.slope) : 4 * b.alpha;
    return fmin(fmax(alpha, 1.5 * b.alpha), 10 * b.alpha);
}

/* Strong Wolfe. low always satisfies the decrease and slopes down; high breaks the decrease or slopes up.
 * The decrease is asked for within the rounding of f. Returns 0 where none was found. */
static double wolfe(work *w, double f, double slope, double first)
{
    place start = {0, f, slope}, low = start, high = start;
    double alpha = first, slack = SLACK * fabs(f);
    bool bracket = false;
    for (int trial = 0; trial < MOST_TRIALS; trial++) {
        place p = look(w, alpha);
        bool falls = p.f <= f + w->options.decrease * alpha * slope + slack;
        if (falls && fabs(p.slope) <= w->options.curvature * fabs(slope)) return alpha;
        if (!falls || p.slope > 0) {
            high = p;
            bracket = true;
        } else {
            place last = low;
            low = p;
            if (!bracket) {
                alpha = beyond(last, low);
                if (!isfinite(alpha)) return 0;
                continue;
            }
        }
        if (high.alpha - low.alpha <= 2 * DBL_EPSILON * high.alpha) break;
        alpha = isfinite(high.f) ? between(low, high) : low.alpha + (high.alpha - low.alpha) / 10;
    }
    return low.alpha;
}

static double beta_of(const work *w, double square_before)
{
    int64_t n = w->objective->n;
    double square = lw_dot(n, w->g, w->g, w->team);
    if (w->options.rule == LW_FLETCHER_REEVES) return square / square_before;
    return fmax(0, (square - lw_dot(n, w->g, w->before, w->team)) / square_before);
}

/* d <- -g + beta d; along -g again where that would not descend. Returns g'd. */
static double turn(work *w, double square_before)
{
    int64_t n = w->objective->n;
    bool due = w->options.rule == LW_FLETCHER_REEVES &&
               w->out->steps % (n > REEVES_RESTART ? n : REEVES_RESTART) == 0;
    lw_scale_add(n, -1, w->g, due ? 0 : beta_of(w, square_before), w->d, w->team);
    double slope = lw_dot(n, w->g, w->d, w->team);
    if (slope < 0) return slope;
    lw_scale_add(n, -1, w->g, 0, w->d, w->team);
    return -lw_dot(n, w->g, w->g, w->team);
}

static double step_length(work *w, double slope, double last_alpha, double last_slope)
{
    const lw_objective *o = w->objective;
    if (w->options.search) return w->options.search(o->state, w->x, w->d, slope);
    double first =
        last_alpha > 0 ? last_alpha * last_slope / slope : fmin(1, 1 / lw_norm(o->n, w->g, w->team));
    if (o->aim) o->aim(o->state, w->x, w->d);
    return wolfe(w, w->out->value, slope, first);
}

static void iterate(work *w)
{
    const lw_objective *o = w->objective;
    lw_cg_result *out = w->out;
    out->value = o->value(o->state, w->x, w->g);
    out->gradient = lw_norm(o->n, w->g, w->team);
    double enough = w->options.tolerance * out->gradient, alpha = 0, last_slope = 0;
    double slope = -out->gradient * out->gradient;
    lw_scale_add(o->n, -1, w->g, 0, w->d, w->team);
    out->stop = LW_STOP_STEPS;
    int idle = 0;
    for (bool fresh = true; out->steps < w->options.steps;) {
        if (out->gradient <= enough || idle >= IDLE_STEPS) {
            out->stop = out->gradient <= enough ? LW_STOP_TOLERANCE : LW_STOP_STAGNATED;
            return;
        }
        double value = out->value, next = step_length(w, slope, alpha, last_slope);
        if (!(next > 0) && fresh) {
            out->stop = LW_STOP_STAGNATED;
            return;
        }
        lw_copy(o->n, w->g, w->before);
        double square = out->gradient * out->gradient;
        lw_add_scaled(o->n, next, w->d, w->x, w->team);
        out->value = o->value(o->state, w->x, w->g);
        out->gradient = lw_norm(o->n, w->g, w->team);
        out->evaluations++;
        out->steps++;
        idle = value - out->value > SLACK * fabs(value) ? 0 : idle + 1;
        fresh = !(next > 0);
        last_slope = fresh ? 0 : slope;
        alpha = next;
        if (fresh) lw_fill(o->n, 0, w->d);
        slope = turn(w, square);
        lw_watch_tick(w->watch, "descending", (double)out->steps, 0, "");
        if (lw_watch_cancelled(w->watch)) {
            out->stop = LW_STOP_INTERRUPTED;
            return;
        }
    }
}

lw_status lw_nonlinear_cg(const lw_objective *objective, const lw_cg_options *options, double *x,
                          lw_cg_result *out, const lw_watch *watch, lw_error *error)
{
    work w = {.objective = objective, .watch = watch, .team = lw_watch_team(watch), .x = x, .out = out};
    int64_t n = objective->n;
    *out = (lw_cg_result){0};
    if (options) w.options = *options;
    if (!(w.options.decrease > 0)) w.options.decrease = 1e-4;
    if (!(w.options.curvature > 0)) w.options.curvature = 0.1;
    if (!(w.options.tolerance > 0)) w.options.tolerance = 1e-10;
    if (w.options.steps <= 0) w.options.steps = 10 * n + 1000;
    w.g = LW_NEW_ARRAY(double, n);
    w.before = LW_NEW_ARRAY(double, n);
    w.d = LW_NEW_ZEROS(double, n);
    w.trial = LW_NEW_ARRAY(double, objective->along ? 0 : 2 * n);
    lw_status status = LW_OK;
    if (w.g && w.before && w.d && w.trial)
        iterate(&w);
    else
        status = lw_fail_memory(error, "conjugate gradients", (size_t)n * 5 * sizeof(double));
    lw_free(w.g);
    lw_free(w.before);
    lw_free(w.d);
    lw_free(w.trial);
    if (status != LW_OK) return status;
    if (out->stop == LW_STOP_INTERRUPTED) return LW_INTERRUPTED;
    return out->stop == LW_STOP_STEPS ? LW_NOT_CONVERGED : LW_OK;
}
