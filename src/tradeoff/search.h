/** Minimum and root of a function of one variable, without derivatives.
 *  Source: Brent, Algorithms for Minimization without Derivatives, Prentice-Hall 1973, chapters 4 and 5. */
#ifndef LW_TRADEOFF_SEARCH_H
#define LW_TRADEOFF_SEARCH_H

/** NaN is taken as +infinity by the minimum and ends the root. */
typedef double lw_search_function(void *state, double x);

/** Minimum in [left, right] from middle, whose value is given; golden sections and parabolas, to `tolerance`
 * (absolute, in x), at most `most` evaluations. Returns the best x. */
double lw_search_minimum(lw_search_function *f, void *state, double left, double middle, double right,
                         double value, double tolerance, int most);
/** Root in [left, right] with values of different sign at the ends. */
double lw_search_root(lw_search_function *f, void *state, double left, double f_left, double right,
                      double f_right, double tolerance, int most);

#endif
