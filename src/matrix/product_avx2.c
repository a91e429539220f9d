/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The product loops for x86-64 machines with AVX2 and fused multiply-add; called only where the machine has
 * both. */
#include "matrix/product_kernel.h"

#if defined(__x86_64__)
#include <immintrin.h>

#define LW_FUSED_MULTIPLY_ADD
#if defined(__clang__)
#pragma clang attribute push(__attribute__((target("avx2,fma"))), apply_to = function)
#else
#pragma GCC target("avx2,fma")
#endif

#include "matrix/product_sweep.h"

const lw_product_kernels lw_product_avx2 = {"avx2", SWEEPS};

#if defined(__clang__)
#pragma clang attribute pop
#endif
#endif
