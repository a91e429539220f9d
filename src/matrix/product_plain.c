/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The product loops for any machine. */
#include "matrix/product_sweep.h"

const lw_product_kernels lw_product_plain = {"plain", SWEEPS};
