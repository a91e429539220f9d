/** Engines: ways to decompose a system once, so that estimate, sweep, criteria, variances and resolution can
 * all be read from the one lw_decomposition. A new engine is one file and one line in the table of engine.c.
 */
#ifndef LW_SOLVE_ENGINE_H
#define LW_SOLVE_ENGINE_H

#include "matrix/product.h"
#include "problem/system.h"
#include "solve/decomposition.h"

typedef enum lw_ability {
    LW_DIRECT = 1,      /**< a factorization; otherwise iterative */
    LW_RANK = 2,        /**< tells the rank */
    LW_REFINED = 4,     /**< refines on the exact augmented system */
    LW_SWEEPS = 8,      /**< cheap at many dampings */
    LW_CONDITIONS = 16, /**< takes exact conditions */
    LW_INVERSE = 32,    /**< gives entries of the inverse */
    LW_FREE_DATUM = 64  /**< solves with a datum defect */
} lw_ability;

typedef struct lw_solve_options {
    const char *engine; /**< a name of the table, or "auto" / NULL */
    double tolerance;   /**< of iterative engines: relative error of the model; 0 = 1e-6 */
    int64_t steps;      /**< most steps of an iterative engine; 0 = a default from the sizes */
    lw_storage storage;
    int datum_free; /**< 1: --datum free */
    int refine;     /**< most refinement steps on the augmented system; < 0 none; 0 = default 10 */
    int sweep;      /**< 1: many dampings will be asked for (dense takes the singular value decomposition) */
    double sweep_from,
        sweep_to;     /**< largest and smallest damping that will be asked for (0 unknown): sizes the basis */
    int trace_probes; /**< random probes for the trace, run in lockstep with the bidiagonalization; 0 none */
} lw_solve_options;

typedef struct lw_engine {
    const char *name;    /**< "dense", "cholesky", "qr", "lsqr", "cgls", "lsmr" */
    const char *summary; /**< one line for --help and inspect */
    unsigned abilities;
    /** lambda > 0 expected later, or an undamped problem (lambda 0): see lw_decomposition. The system is
     * borrowed and must outlive the decomposition; system->matrix may be made. */
    lw_status (*decompose)(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_decomposition **out, lw_error *error);
} lw_engine;

/** All engines, NULL-named end. */
const lw_engine *lw_engine_table(void);
/** The engine of that name, or NULL. */
const lw_engine *lw_engine_find(const char *name);

/** What `auto` takes for this system and why (sizes, fill estimate from the symbolic analysis, memory). */
typedef struct lw_engine_choice {
    const lw_engine *engine;
    char why[256];
    int64_t factor_nonzeros; /**< -1 unknown */
    double factor_flops;     /**< NaN unknown */
} lw_engine_choice;
lw_status lw_engine_choose(lw_system *system, double lambda, const lw_solve_options *options,
                           const lw_watch *watch, lw_engine_choice *out, lw_error *error);

/** Chooses (or takes the named one), checks abilities against what the system needs (LW_BAD_USAGE says which
 * engine could), decomposes; the gate from cholesky to qr (contraction of the first refinement step above
 * 0.1) is in here: the engine that was used in the end and the reason stand in `choice`. */
lw_status lw_decompose(lw_system *system, double lambda, const lw_solve_options *options,
                       const lw_watch *watch, lw_engine_choice *choice, lw_decomposition **out,
                       lw_error *error);

#endif
