/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A bounded solve: bounded MATRIX DAMPING THREADS. Bounds 0.47 .. 0.53 on every cell; prints time, products,
 * optimality. */
#include "bench.h"

#include "core/memory.h"
#include "solve/bounds.h"

#include <stdio.h>
#include <stdlib.h>

int main(int argc, char **argv)
{
    if (argc != 4) return 2;
    bench_start();
    lw_error error = {0};
    lw_system *system;
    lw_bounded *bounded;
    lw_team *team;
    lw_problem *problem = bench_problem(argv[1]);
    bench_check(lw_team_new(atoi(argv[3]), &team, &error), &error);
    lw_watch watch = {.memory = INT64_C(12) << 30, .team = team};
    problem->lower = bench_sure(LW_NEW_ARRAY(double, problem->n));
    problem->upper = bench_sure(LW_NEW_ARRAY(double, problem->n));
    problem->prior = bench_sure(LW_NEW_ARRAY(double, problem->n));
    for (int64_t j = 0; j < problem->n; j++) {
        problem->lower[j] = 0.47;
        problem->upper[j] = 0.53;
        problem->prior[j] = 0.5;
    }
    bench_clock from = bench_now();
    bench_check(lw_system_new(problem, &(lw_system_options){0}, &watch, &system, &error), &error);
    lw_bounds_options options = {.tolerance = 1e-8};
    bench_check(lw_bounds_solve(system, atof(argv[2]), &options, &watch, &bounded, &error), &error);
    bench_tell("bounded", from);
    bench_tell_number("products", (double)bounded->steps);
    bench_tell_number("optimality", bounded->optimality);
    bench_tell_number("at_bound", (double)(bounded->columns - bounded->free));
    bench_tell_peak();
    lw_bounded_free(bounded);
    lw_system_free(system);
    lw_problem_free(problem);
    lw_team_free(team);
    return 0;
}
