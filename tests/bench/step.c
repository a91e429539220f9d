/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One step of the bidiagonalization: step MATRIX fused|single|same|plain THREADS STEPS
 * Prints the median processor and wall seconds of a step, vector work included, as the engines make it. */
#include "bench.h"

#include "core/memory.h"
#include "matrix/product.h"
#include "solve/golub_kahan.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

int main(int argc, char **argv)
{
    if (argc != 5) return 2;
    bench_start();
    lw_error error = {0};
    lw_problem *problem = bench_problem(argv[1]);
    lw_team *team = NULL;
    lw_operator *op;
    lw_golub_kahan gk;
    lw_product_layout layout;
    int steps = atoi(argv[4]);
    bench_check(lw_team_new(atoi(argv[3]), &team, &error), &error);
    lw_product_options options = {.storage = strcmp(argv[2], "single") ? LW_STORE_DOUBLE : LW_STORE_SINGLE,
                                  .two_pass = !strcmp(argv[2], "same")    ? LW_TWO_PASS_SAME
                                              : !strcmp(argv[2], "plain") ? LW_TWO_PASS_PLAIN
                                                                          : 0,
                                  .team = team};
    bench_check(lw_product_new(problem->design, &options, &op, &error), &error);
    lw_product_describe(op, &layout);
    bench_check(lw_golub_kahan_start(&gk, op, 1, problem->value, &error), &error);
    double *x = bench_random(problem->n), *wall = bench_sure(LW_NEW_ARRAY(double, steps)),
           *processor = bench_sure(LW_NEW_ARRAY(double, steps)),
           *v = bench_sure(LW_NEW_ARRAY(double, problem->n));
    for (int s = 0; s < steps + 2; s++) {
        bench_clock from = bench_now();
        lw_golub_kahan_step(&gk);
        double norm = 0; /* the two vector updates of the recurrence of LSQR */
        for (int64_t j = 0; j < problem->n; j++) {
            x[j] += 1e-9 * v[j];
            v[j] = gk.v[j] * gk.v_scale[0] - 0.5 * v[j];
            norm += v[j] * v[j];
        }
        bench_clock to = bench_now();
        if (s < 2) continue;
        wall[s - 2] = to.wall - from.wall + 0 * norm;
        processor[s - 2] = to.processor - from.processor;
    }
    bench_tell_number("step_wall", bench_median(steps, wall));
    bench_tell_number("step_cpu", bench_median(steps, processor));
    bench_tell_number("fusion", layout.fusion);
    bench_tell_number("block", layout.block);
    bench_tell_number("fill", layout.fill);
    bench_tell_number("parts", layout.parts);
    lw_golub_kahan_clear(&gk);
    lw_operator_free(op);
    lw_free(x), lw_free(v), lw_free(wall), lw_free(processor);
    lw_problem_free(problem);
    lw_team_free(team);
    return 0;
}
