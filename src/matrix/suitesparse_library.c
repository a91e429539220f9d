/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "matrix/suitesparse_library.h"

#include "core/memory.h"

/* The supernodal code asks for four OpenMP threads at each of its loops, whatever the number of threads set
 * before; with no active level its loops run on the calling thread. The symbol comes with CHOLMOD when that
 * was built with OpenMP. */
void omp_set_max_active_levels(int levels) __attribute__((weak));

lw_status lw_library_start(cholmod_common *common, lw_error *error)
{
    SuiteSparse_config.malloc_func = lw_hook_malloc;
    SuiteSparse_config.calloc_func = lw_hook_calloc;
    SuiteSparse_config.realloc_func = lw_hook_realloc;
    SuiteSparse_config.free_func = lw_hook_free;
    SuiteSparse_config.printf_func = NULL;
    if (omp_set_max_active_levels) omp_set_max_active_levels(0);
    if (!cholmod_l_start(common)) return lw_fail(error, LW_SYSTEM, "CHOLMOD does not start");
    common->print = 0;
    common->error_handler = NULL;
    common->try_catch = 1;
    common->SPQR_nthreads = 1;
    common->SPQR_grain = 1;
    common->useGPU = 0;
    return LW_OK;
}

lw_status lw_library_outcome(const cholmod_common *common, const char *what, lw_error *error)
{
    if (common->status == CHOLMOD_OUT_OF_MEMORY || common->status == CHOLMOD_TOO_LARGE)
        return lw_fail(error, LW_NO_MEMORY, "out of memory: %s", what);
    if (common->status < 0) return lw_fail(error, LW_SYSTEM, "%s failed (%d)", what, common->status);
    return LW_OK;
}

cholmod_sparse lw_library_matrix(const lw_sparse *A, SuiteSparse_long *index, int stype)
{
    return (cholmod_sparse){.nrow = (size_t)A->rows,
                            .ncol = (size_t)A->columns,
                            .nzmax = (size_t)lw_sparse_nonzeros(A),
                            .p = A->start,
                            .i = index,
                            .x = A->value,
                            .stype = stype,
                            .itype = CHOLMOD_LONG,
                            .xtype = CHOLMOD_REAL,
                            .dtype = CHOLMOD_DOUBLE,
                            .sorted = 1,
                            .packed = 1};
}

lw_status lw_library_index(const lw_sparse *A, SuiteSparse_long **out, lw_error *error)
{
    int64_t nonzeros = lw_sparse_nonzeros(A);
    *out = LW_NEW_ARRAY(SuiteSparse_long, nonzeros);
    if (!*out) return lw_fail_memory(error, "a copy of the row numbers", (size_t)nonzeros * sizeof **out);
    for (int64_t p = 0; p < nonzeros; p++) (*out)[p] = A->index[p];
    return LW_OK;
}
