/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "certainty/probe.h"
#include "check_certainty.h"
#include "core/memory.h"
#include "unit/support.h"

#include <math.h>
#include <string.h>

/* Nine blocks, eight straight rays: three columns, three rows, the main diagonal, one ray through the corner
 * block. Source: textbook example on generalized inverses in inverse theory (geometry from memory); the spike
 * recovered by the generalized inverse and the diagonals of the damped resolution matrix recomputed with 50
 * digits. */
static lw_problem *nine_blocks(void)
{
    const double s = sqrt(2.0);
    const double A[8 * 9] = {1, 0, 0, 1, 0, 0, 1, 0, 0, 0, 1, 0, 0, 1, 0, 0, 1, 0, 0, 0, 1, 0, 0, 1,
                             0, 0, 1, 1, 1, 1, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 1, 1, 0, 0, 0, 0, 0, 0,
                             0, 0, 0, 1, 1, 1, s, 0, 0, 0, s, 0, 0, 0, s, 0, 0, 0, 0, 0, 0, 0, 0, s};
    const double value[8] = {1, 2, 3, 4, 5, 6, 7, 8};
    return problem_from_dense(8, 9, A, value, NULL);
}

static lw_probe *probe_of(lw_problem *problem, const char *engine, double lambda, const lw_probe_plan *plan,
                          uint64_t seed)
{
    lw_error error = {0};
    lw_system *system;
    lw_decomposition *decomposition;
    lw_probe *probe;
    lw_engine_choice choice;
    lw_system_options none = {0};
    lw_solve_options options = {.engine = engine, .tolerance = 1e-12};
    lw_watch watch = {.seed = seed};
    ck_assert_int_eq(lw_system_new(problem, &none, &watch, &system, &error), LW_OK);
    ck_assert_msg(lw_decompose(system, lambda, &options, &watch, &choice, &decomposition, &error) == LW_OK,
                  "%s", error.text);
    ck_assert_msg(lw_probe_make(decomposition, lambda, plan, &watch, &probe, &error) == LW_OK, "%s",
                  error.text);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
    return probe;
}

static const char *const engines[] = {"dense", "cholesky", "qr", "lsqr", "cgls", "lsmr"};

START_TEST(a_spike_comes_back_as_the_generalized_inverse_says)
{
    const double expected[9] = {1.0 / 6, 0, -1.0 / 6, 0, 5.0 / 6, 1.0 / 6, -1.0 / 6, 1.0 / 6, 0};
    const double spike[9] = {0, 0, 0, 0, 1, 0, 0, 0, 0};
    lw_problem *problem = nine_blocks();
    lw_probe_plan plan = {.kind = LW_PROBE_GIVEN, .given = spike, .amplitude = 1.0};
    lw_probe *probe = probe_of(problem, "dense", 1e-6, &plan,
                               1); /* damping so small that the minimum-norm solution is left */
    for (int j = 0; j < 9; j++) ck_assert_double_eq_tol(probe->pattern[0].recovered[j], expected[j], 1e-9);
    lw_probe_free(probe);
    lw_problem_free(problem);
}
END_TEST

START_TEST(every_engine_gives_the_damped_resolution)
{
    const double diagonal[9] = {0.7640953473771, 0.6645738162766, 0.5941847626058,
                                0.6645738162766, 0.7640953473771, 0.5941847626058,
                                0.5941847626058, 0.5941847626058, 0.9146073740501}; /* lambda 0.5 */
    lw_problem *problem = nine_blocks();
    for (int j = 0; j < 9; j++) {
        double spike[9] = {0};
        spike[j] = 1.0;
        lw_probe_plan plan = {.kind = LW_PROBE_GIVEN, .given = spike, .amplitude = 1.0};
        lw_probe *probe = probe_of(problem, engines[_i], 0.5, &plan, 1);
        ck_assert_double_eq_tol(probe->pattern[0].recovered[j], diagonal[j], 1e-10);
        lw_probe_free(probe);
    }
    lw_problem_free(problem);
}
END_TEST

/* n x n cells, each observed directly. */
static lw_problem *direct_grid(int n, double sigma)
{
    int count = n * n;
    double *A = LW_NEW_ZEROS(double, count *count), *value = LW_NEW_ZEROS(double, count),
           *s = LW_NEW_ZEROS(double, count);
    double *x = LW_NEW_ZEROS(double, count), *z = LW_NEW_ZEROS(double, count);
    for (int j = 0; j < count; j++) {
        A[j * count + j] = 1.0;
        s[j] = sigma;
        x[j] = 10.0 + 2.5 * (j % n);
        z[j] = -3.0 * (j / n);
    }
    lw_problem *problem = problem_from_dense(count, count, A, value, sigma > 0.0 ? s : NULL);
    problem_set_coordinate(problem, 0, x);
    problem_set_coordinate(problem, 2, z);
    lw_free(A), lw_free(value), lw_free(s), lw_free(x), lw_free(z);
    return problem;
}

START_TEST(a_checker_has_its_size_and_comes_back)
{
    const double sizes[2] = {1.0, 2.0};
    lw_problem *problem = direct_grid(4, 0.0);
    lw_probe_plan plan = {.size = sizes, .sizes = 2, .amplitude = 0.25};
    lw_probe *probe = probe_of(problem, "dense", 0.0, &plan, 1);
    ck_assert_int_eq(probe->patterns, 2);
    for (int k = 0; k < 2; k++)
        for (int j = 0; j < 16; j++) {
            /* z falls with the row, so the last row has place 0 */
            int across = (j % 4) / (k + 1), down = (3 - j / 4) / (k + 1);
            double expected = (across + down) % 2 ? -0.25 : 0.25;
            ck_assert_double_eq(probe->pattern[k].input[j], expected);
            ck_assert_double_eq_tol(probe->pattern[k].recovered[j], expected, 1e-14);
            ck_assert_double_eq_tol(probe->pattern[k].amplitude[j], 1.0, 1e-12);
            ck_assert_double_eq_tol(probe->pattern[k].correlation[j], 1.0, 1e-12);
        }
    ck_assert_double_eq_tol(probe->pattern[0].overall_correlation, 1.0, 1e-12);
    lw_probe_free(probe);
    lw_problem_free(problem);
}
END_TEST

START_TEST(damping_takes_its_known_share)
{
    /* A = I: the damped estimate is 1 / (1 + lambda^2) of the data (closed form). */
    const double sizes[1] = {2.0};
    lw_problem *problem = direct_grid(4, 0.0);
    lw_probe_plan plan = {.size = sizes, .sizes = 1, .amplitude = 1.0};
    lw_probe *probe = probe_of(problem, "cholesky", 0.5, &plan, 1);
    ck_assert_double_eq_tol(probe->pattern[0].overall_amplitude, 0.8, 1e-12);
    lw_probe_free(probe);
    plan.kind = LW_PROBE_SPIKES;
    probe = probe_of(problem, "dense", 0.5, &plan, 1);
    double sum = 0.0;
    for (int j = 0; j < 16; j++) sum += probe->pattern[0].input[j];
    ck_assert_double_eq(sum, 4.0); /* one spike in each block of two by two */
    lw_probe_free(probe);
    lw_problem_free(problem);
}
END_TEST

START_TEST(trials_show_the_stated_noise_and_repeat_by_seed)
{
    const double sizes[1] = {2.0};
    lw_problem *problem = direct_grid(5, 0.3);
    lw_probe_plan plan = {.size = sizes, .sizes = 1, .amplitude = 1.0, .trials = 400};
    lw_probe *a = probe_of(problem, "dense", 0.0, &plan, 7), *b = probe_of(problem, "dense", 0.0, &plan, 7),
             *c = probe_of(problem, "dense", 0.0, &plan, 8);
    double mean = 0.0;
    for (int j = 0; j < 25; j++) mean += a->spread[j] * a->spread[j] / 25.0;
    ck_assert_double_eq_tol(sqrt(mean), 0.3, 4.0 * 0.3 / sqrt(2.0 * 400 * 25)); /* four standard errors */
    ck_assert_int_eq(memcmp(a->spread, b->spread, 25 * sizeof(double)), 0);
    ck_assert_int_eq(memcmp(a->pattern[0].recovered, b->pattern[0].recovered, 25 * sizeof(double)), 0);
    ck_assert_int_ne(memcmp(a->spread, c->spread, 25 * sizeof(double)), 0);
    lw_probe_free(a), lw_probe_free(b), lw_probe_free(c);
    lw_problem_free(problem);
}
END_TEST

START_TEST(the_bootstrap_draws_within_groups)
{
    /* Two parameters, each the mean of its own group's readings: the bootstrap's spread of a mean of m
     * readings is sqrt(mean square residual / m) (Efron & Tibshirani 1993, 2.3), and a group of equal
     * readings has none. */
    enum { EACH = 10 };
    double A[2 * EACH * 2] = {0}, value[2 * EACH];
    int32_t group[2 * EACH];
    double mean_square = 0.0;
    for (int i = 0; i < 2 * EACH; i++) {
        A[2 * i + i / EACH] = 1.0;
        value[i] = i < EACH ? 5.0 : i % 2 ? 2.0 : 1.0;
        group[i] = i / EACH;
        if (i >= EACH) mean_square += 0.25 / EACH;
    }
    lw_problem *problem = problem_from_dense(2 * EACH, 2, A, value, NULL);
    problem_set_group(problem, group, 2);
    const double pattern[2] = {1.0, 1.0};
    lw_probe_plan plan = {
        .kind = LW_PROBE_GIVEN, .given = pattern, .amplitude = 1.0, .trials = 800, .bootstrap = true};
    lw_probe *probe = probe_of(problem, "dense", 0.0, &plan, 3);
    double expected = sqrt(mean_square / EACH);
    ck_assert_double_lt(probe->spread[0], 1e-12);
    ck_assert_double_eq_tol(probe->spread[1], expected, 4.0 * expected / sqrt(2.0 * 800));
    lw_probe_free(probe);
    lw_problem_free(problem);
}
END_TEST

START_TEST(patterns_without_coordinates_are_refused)
{
    lw_error error = {0};
    lw_probe_grid grid;
    lw_problem *problem = nine_blocks();
    ck_assert_int_eq(lw_probe_grid_make(problem, 0.0, &grid, &error), LW_BAD_USAGE);
    ck_assert_ptr_nonnull(strstr(error.text, "coordinates"));
    lw_problem_free(problem);
}
END_TEST

Suite *suite_probe(void)
{
    Suite *suite = suite_create("certainty/probe");
    TCase *each = tcase_create("probe");
    tcase_add_test(each, a_spike_comes_back_as_the_generalized_inverse_says);
    tcase_add_loop_test(each, every_engine_gives_the_damped_resolution, 0, 6);
    tcase_add_test(each, a_checker_has_its_size_and_comes_back);
    tcase_add_test(each, damping_takes_its_known_share);
    tcase_add_test(each, trials_show_the_stated_noise_and_repeat_by_seed);
    tcase_add_test(each, the_bootstrap_draws_within_groups);
    tcase_add_test(each, patterns_without_coordinates_are_refused);
    suite_add_tcase(suite, each);
    return suite;
}
