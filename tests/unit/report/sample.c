/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample.h"

#include "core/decimal.h"
#include "core/memory.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static void *keep(sample *s, void *block)
{
    s->kept[s->kept_count++] = block;
    return block;
}

static double *numbers(sample *s, int64_t count)
{
    return keep(s, lw_alloc_zero((size_t)count, sizeof(double)));
}

/* Ids: the texts, or "WORD 0", "WORD 1", ... */
static lw_ids *names(int64_t count, const char *word, const char *const *text)
{
    lw_ids *ids = NULL;
    lw_ids_new(count, &ids, NULL);
    for (int64_t i = 0; i < count; i++) {
        char name[80];
        int added;
        int64_t number;
        if (text)
            snprintf(name, sizeof name, "%s", text[i]);
        else
            snprintf(name, sizeof name, "%s %lld", word, (long long)i);
        lw_ids_add(ids, name, strlen(name), &number, &added, NULL);
    }
    return ids;
}

/* A reproducible, roughly normal number: twelve uniforms of a multiplicative congruence. */
static double noise(uint64_t *state)
{
    double sum = -6.0;
    for (int k = 0; k < 12; k++) {
        *state = *state * UINT64_C(6364136223846793005) + UINT64_C(1442695040888963407);
        sum += (double)(*state >> 11) / 9007199254740992.0;
    }
    return sum;
}

static sample *start(int64_t m, int64_t n)
{
    sample *s = LW_NEW(sample);
    s->problem.m = m;
    s->problem.n = n;
    s->problem.folder = "data/a<b>&\"c\"";
    s->problem.value_unit = "ms";
    s->problem.parameter_unit = "ms/m";
    s->problem.inputs = &s->input;
    s->problem.input_count = 1;
    s->input.path = "design.csv";
    s->input.bytes = 123456;
    memset(s->input.sha256, 'a', 64);
    s->problem.value = numbers(s, m);
    s->problem.sigma = numbers(s, m);
    s->estimate.x = numbers(s, n);
    s->estimate.residual = numbers(s, m);
    s->estimate.weighted = numbers(s, m);
    s->estimate.parameters = n;
    s->estimate.rows = m;
    s->estimate.rank = -1;
    s->estimate.rcond = s->estimate.refined_to = LW_UNKNOWN;
    s->estimate.stop = LW_STOP_DIRECT;
    s->system.problem = &s->problem;
    s->system.observations = s->system.rows = s->system.rows_used = s->system.observations_used = m;
    s->system.columns = n;
    s->system.b = numbers(s, m);
    s->engine.name = "dense";
    s->run = (lw_run){.version = "1.0.0",
                      .command = "solve",
                      .command_line = "leastwise solve data/a",
                      .folder = "a-solve",
                      .problem = &s->problem,
                      .system = &s->system,
                      .estimate = &s->estimate,
                      .damping_chosen_by = "none",
                      .effective_parameters = LW_UNKNOWN,
                      .tolerance = 1e-6,
                      .seed = 1,
                      .warnings = &s->warnings};
    s->run.engine.engine = &s->engine;
    snprintf(s->run.engine.why, sizeof s->run.engine.why, "small enough to be dense");
    return s;
}

static void measure_answer(sample *s)
{
    lw_sparse_apply(s->problem.design, 1, s->estimate.x, s->estimate.residual);
    double chi = 0.0;
    for (int64_t i = 0; i < s->problem.m; i++) {
        double sigma = s->problem.sigma[i], v = s->estimate.residual[i] -= s->problem.value[i];
        s->estimate.weighted[i] = v / (sigma * sigma);
        s->system.b[i] = s->problem.value[i] / sigma;
        chi += v * v / (sigma * sigma);
    }
    s->estimate.point.chi_square = chi;
    s->estimate.point.misfit = sqrt(chi);
    lw_run_measure(&s->run, NULL);
}

/* Paths across the cells: a straight walk from the left to the right side. */
static void fill_rays(sample *s, int across, int up, int touch, uint64_t *state)
{
    int64_t m = s->problem.m, count = m * touch;
    int32_t *row = keep(s, LW_NEW_ARRAY(int32_t, count)), *column = keep(s, LW_NEW_ARRAY(int32_t, count));
    double *value = numbers(s, count);
    for (int64_t i = 0; i < m; i++) {
        double from = 3.0 + noise(state), to = 3.0 + noise(state);
        for (int k = 0; k < touch; k++) {
            double t = (k + 0.5) / touch, z = (from + t * (to - from)) / 6.0 * up;
            int a = (int)(t * across), b = (int)fmin(fmax(z, 0.0), up - 1);
            row[i * touch + k] = (int32_t)i;
            column[i * touch + k] = (int32_t)(a + (int64_t)across * b);
            value[i * touch + k] = 1.0 + 0.1 * fabs(to - from);
        }
    }
    int64_t repeated;
    lw_sparse_from_triplets(m, s->problem.n, count, row, column, value, NULL, 1, &s->problem.design,
                            &repeated, NULL);
}

static void fill_check(sample *s)
{
    const lw_sparse *A = s->problem.design;
    s->check.hits = keep(s, LW_NEW_ZEROS(int64_t, s->problem.n));
    s->check.coverage = numbers(s, s->problem.n);
    for (int64_t j = 0; j < s->problem.n; j++) {
        s->check.hits[j] = A->start[j + 1] - A->start[j];
        for (int64_t k = A->start[j]; k < A->start[j + 1]; k++) s->check.coverage[j] += fabs(A->value[k]);
    }
    s->run.check = &s->check;
}

static double truth(int across, int up, int64_t j)
{
    double u = (double)(j % across) / across - 0.4, w = (double)(j / across) / up - 0.6;
    return 0.5 + 0.2 * exp(-20.0 * (u * u + w * w)) -
           0.12 * exp(-60.0 * ((u - 0.3) * (u - 0.3) + (w + 0.25) * (w + 0.25)));
}

static void fill_curve(sample *s, int across, int up, int dampings, uint64_t *state)
{
    int64_t n = s->problem.n;
    double *models = numbers(s, n * dampings);
    s->curve.count = dampings;
    s->curve.row = keep(s, LW_NEW_ZEROS(lw_curve_row, dampings));
    for (int k = 0; k < dampings; k++) {
        double lambda = 0.01 * pow(10.0, 5.0 * k / (dampings - 1)),
               keep_share = 1.0 / (1.0 + 0.001 * lambda * lambda);
        double rough = 0.4 / (1.0 + 30.0 * lambda), size = 0.0;
        for (int64_t j = 0; j < n; j++) {
            double x = 0.5 + (truth(across, up, j) - 0.5) * keep_share + rough * noise(state) * 0.3;
            models[k * n + j] = x;
            size += x * x;
        }
        lw_curve_row *row = &s->curve.row[k];
        row->point =
            (lw_point){.lambda = lambda,
                       .misfit = sqrt((double)s->problem.m * (0.9 + 0.002 * lambda * lambda * keep_share)),
                       .size = sqrt(size) * (0.5 + rough * 3.0),
                       .effective_parameters = 0.3 * (double)n / (1.0 + lambda),
                       .error_bound = k < 3 ? 1e-2 : 0.0};
        row->point.chi_square = row->point.misfit * row->point.misfit;
        row->gcv = row->point.chi_square / pow((double)s->problem.m - row->point.effective_parameters, 2.0);
        row->risk = row->point.chi_square - (double)s->problem.m + 2.0 * row->point.effective_parameters;
        row->curvature = 2.0 * exp(-pow(log10(lambda) - 0.3, 2.0) * 3.0);
        row->converged = row->usable = k >= 3;
    }
    s->run.models = models;
    s->run.curve = &s->curve;
}

static void fill_choices(sample *s, int dampings)
{
    const lw_criterion criterion[] = {LW_BY_CORNER, LW_BY_GCV, LW_BY_DISCREPANCY, LW_BY_RISK};
    s->curve.choices = LW_CRITERIA;
    for (int c = 0; c < LW_CRITERIA; c++) {
        const lw_curve_row *row = &s->curve.row[dampings / 2 + c * dampings / 15];
        s->curve.choice[c] = (lw_choice){.criterion = criterion[c],
                                         .damping = row->point.lambda,
                                         .from = row->point.lambda / 1.7,
                                         .to = row->point.lambda * 1.7,
                                         .value = row->point.chi_square,
                                         .at = *row};
    }
    s->curve.choice[LW_BY_RISK].damping = s->curve.choice[LW_BY_RISK].from = s->curve.choice[LW_BY_RISK].to =
        LW_UNKNOWN;
    snprintf(s->curve.choice[LW_BY_RISK].warning, LW_CHOICE_TEXT, "its minimum is at the end of the range");
    snprintf(s->curve.comparison, LW_CHOICE_TEXT, "The choices lie within a factor of ten.");
    s->curve.decades = 0.7;
}

sample *sample_sweep(int across, int up, int64_t m, int touch, int dampings)
{
    int64_t n = (int64_t)across * up;
    sample *s = start(m, n);
    uint64_t state = 7;
    s->problem.parameters = names(n, "cell", NULL);
    s->problem.observations = names(m, "ray", NULL);
    for (int a = 0; a < 3; a += 2) s->problem.coordinate[a] = numbers(s, n);
    for (int64_t j = 0; j < n; j++) {
        s->problem.coordinate[0][j] = 2.0 * (double)(j % across) + 1.0;
        s->problem.coordinate[2][j] = 2.0 * (double)(j / across) + 1.0;
    }
    fill_rays(s, across, up, touch, &state);
    fill_check(s);
    for (int64_t j = 0; j < n; j++) s->estimate.x[j] = truth(across, up, j);
    lw_sparse_apply(s->problem.design, 1, s->estimate.x, s->problem.value);
    for (int64_t i = 0; i < m; i++) {
        s->problem.sigma[i] = 0.2;
        s->problem.value[i] += 0.2 * noise(&state);
    }
    fill_curve(s, across, up, dampings, &state);
    fill_choices(s, dampings);
    s->run.command = "sweep";
    s->run.command_line = "leastwise sweep data/a --prefer smallest --dampings 0.01:1000:40 -o out";
    s->run.damping_chosen_by = "corner";
    s->run.damping = s->curve.choice[0].damping;
    memcpy(s->estimate.x, s->run.models + dampings / 2 * n, (size_t)n * sizeof(double));
    measure_answer(s);
    s->estimate.point = s->curve.row[dampings / 2].point;
    s->run.effective_parameters = s->estimate.point.effective_parameters;
    lw_log_add(&s->warnings, "two groups of readings look as if their units differ");
    return s;
}

static void fill_certainty(sample *s)
{
    int64_t m = s->problem.m, n = s->problem.n;
    lw_certainty *c = &s->certainty;
    c->parameters = n;
    c->rows = m;
    double **rows[] = {&c->redundancy, &c->standardized, &c->detectable, &c->bias_ratio};
    for (int k = 0; k < 4; k++) *rows[k] = numbers(s, m);
    c->sigma = numbers(s, n);
    c->interval_low = numbers(s, n);
    c->interval_high = numbers(s, n);
    c->sigma_kind = keep(s, LW_NEW_ZEROS(int8_t, n));
    c->flag = keep(s, LW_NEW_ZEROS(uint8_t, m));
    for (int64_t j = 0; j < n; j++) {
        c->sigma[j] = j ? 0.00123 + 0.0003 * (double)j : LW_UNKNOWN;
        c->sigma_kind[j] = j ? LW_SIGMA_EXACT : LW_SIGMA_FIXED;
        c->interval_low[j] = s->estimate.x[j] - 1.96 * c->sigma[j];
        c->interval_high[j] = s->estimate.x[j] + 1.96 * c->sigma[j];
    }
    for (int64_t i = 0; i < m; i++) {
        c->redundancy[i] = (double)i / (double)m;
        c->standardized[i] =
            i ? s->estimate.residual[i] / (s->problem.sigma[i] * sqrt(c->redundancy[i])) : LW_UNKNOWN;
        c->detectable[i] = i ? 4.13 * s->problem.sigma[i] / sqrt(c->redundancy[i]) : LW_UNKNOWN;
        c->bias_ratio[i] = i ? 4.13 * sqrt((1.0 - c->redundancy[i]) / c->redundancy[i]) : LW_UNKNOWN;
        c->flag[i] = i == 0                            ? LW_FLAG_NO_REDUNDANCY
                     : fabs(c->standardized[i]) > 3.29 ? LW_FLAG_SUSPECT
                     : c->redundancy[i] < 0.1          ? LW_FLAG_WEAK
                                                       : 0;
    }
    c->test = (lw_global_test){.chi_square = s->estimate.point.chi_square,
                               .degrees_of_freedom = 8.0,
                               .probability = 0.0003,
                               .lower = 2.18,
                               .upper = 17.53,
                               .applies = true,
                               .rejected = true,
                               .too_high = true,
                               .alpha = 0.05};
    c->test.variance_factor = c->test.chi_square / 8.0;
    c->critical = 3.29;
    c->family_critical = 4.0;
    c->delta0 = 4.13;
    c->interval_multiplier = 1.96;
    s->run.certainty = c;
}

sample *sample_network(void)
{
    static const char *const points[] = {"</script><script>window.broken=1</script>",
                                         "<img src=x onerror=window.broken=2>",
                                         "P & Q",
                                         "D",
                                         "E",
                                         "F",
                                         "G",
                                         "H",
                                         "K"};
    static const int32_t from[] = {0, 0, 1, 0, 1, 2, 3, 4, 3, 4, 5, 6, 7, 0, 4, 2},
                         to[] = {8, 1, 2, 3, 4, 5, 4, 5, 6, 7, 8, 7, 8, 4, 8, 4};
    enum { M = 16, N = 9 };
    sample *s = start(M, N);
    uint64_t state = 3;
    s->problem.parameters = names(N, NULL, points);
    s->problem.observations = names(M, "line \"<b>\"", NULL);
    s->problem.value_unit = s->problem.parameter_unit = "m";
    s->problem.fixed = keep(s, LW_NEW_ZEROS(bool, N));
    s->problem.fixed[0] = true;
    s->problem.fixed_value = numbers(s, N);
    for (int a = 0; a < 2; a++) s->problem.coordinate[a] = numbers(s, N);
    int32_t row[2 * M], column[2 * M];
    double value[2 * M];
    for (int i = 0; i < M; i++) {
        row[2 * i] = row[2 * i + 1] = i;
        column[2 * i] = from[i];
        column[2 * i + 1] = to[i];
        value[2 * i] = -1.0;
        value[2 * i + 1] = 1.0;
    }
    int64_t repeated;
    lw_sparse_from_triplets(M, N, 2 * M, row, column, value, NULL, 1, &s->problem.design, &repeated, NULL);
    fill_check(s);
    for (int j = 0; j < N; j++) {
        s->problem.coordinate[0][j] = 400.0 * (j % 3) + 30.0 * noise(&state);
        s->problem.coordinate[1][j] = 300.0 * (double)(j / 3) + 30.0 * noise(&state);
        s->estimate.x[j] = 100.0 + 3.0 * j;
    }
    lw_sparse_apply(s->problem.design, 1, s->estimate.x, s->problem.value);
    for (int i = 0; i < M; i++) {
        s->problem.sigma[i] = 0.002;
        s->problem.value[i] += 0.002 * noise(&state) + (i == 9 ? 0.011 : 0.0);
    }
    measure_answer(s);
    fill_certainty(s);
    s->run.outliers = &s->outliers;
    s->problem.group_names = names(2, "group", NULL);
    s->problem.group = keep(s, LW_NEW_ZEROS(int32_t, M));
    for (int i = 8; i < M; i++) s->problem.group[i] = 1;
    lw_group_factor *groups = keep(s, LW_NEW_ZEROS(lw_group_factor, 2));
    groups[0] = (lw_group_factor){.group = 0,
                                  .observations = 8,
                                  .redundancy = 4.0,
                                  .chi_square = 4.4,
                                  .factor = 1.1,
                                  .component = LW_UNKNOWN,
                                  .component_sigma = LW_UNKNOWN};
    groups[1] = (lw_group_factor){.group = 1,
                                  .observations = 8,
                                  .redundancy = 4.0,
                                  .chi_square = 31.0,
                                  .factor = 7.75,
                                  .component = LW_UNKNOWN,
                                  .component_sigma = LW_UNKNOWN};
    s->certainty.groups = groups;
    s->certainty.group_count = 2;
    return s;
}

void sample_free(sample *s)
{
    lw_ids_free(s->problem.parameters);
    lw_ids_free(s->problem.observations);
    lw_ids_free(s->problem.group_names);
    lw_sparse_free(s->problem.design);
    lw_log_clear(&s->warnings);
    for (int k = 0; k < s->kept_count; k++) lw_free(s->kept[k]);
    lw_free(s);
}
