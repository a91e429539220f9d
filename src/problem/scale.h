/** --scale-sigma GROUP=FACTOR: what the user says of the stated sigmas after reading and before anything is
 * made of them. */
#ifndef LW_PROBLEM_SCALE_H
#define LW_PROBLEM_SCALE_H

#include "problem/problem.h"

/** Multiplies the sigmas (and covariances: rows and columns) of the observations of `group` (length bytes of
 * text; length 0: every observation) by factor > 0, in double-double. LW_BAD_USAGE when there is no such
 * group or no sigma was stated. */
lw_status lw_problem_scale_sigma(lw_problem *problem, const char *group, size_t length, double factor,
                                 lw_error *error);

#endif
