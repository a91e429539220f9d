/* SPDX-License-Identifier: GPL-3.0-or-later */
/** What the suitesparse files share. Included by suitesparse*.c only. */
#ifndef LW_MATRIX_SUITESPARSE_LIBRARY_H
#define LW_MATRIX_SUITESPARSE_LIBRARY_H

#include "core/status.h"
#include "matrix/sparse.h"

#include <stdint.h>
#include <suitesparse/SuiteSparseQR_C.h>
#include <suitesparse/cholmod.h>

/** Starts the library: memory from core/memory, nothing printed, one thread. */
lw_status lw_library_start(cholmod_common *common, lw_error *error);
/** The library's last status as ours, for work named `what`. */
lw_status lw_library_outcome(const cholmod_common *common, const char *what, lw_error *error);
/** The library's view of A: values and starts borrowed, index the 64-bit copy of A's. stype 1: upper
 * triangle, 0: all. */
cholmod_sparse lw_library_matrix(const lw_sparse *A, SuiteSparse_long *index, int stype);
/** 64-bit copy of the row indices. */
lw_status lw_library_index(const lw_sparse *A, SuiteSparse_long **out, lw_error *error);

#endif
