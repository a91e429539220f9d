/* SPDX-License-Identifier: GPL-3.0-or-later */
/** The sparse QR engine: M = [A; lambda L; ...] = Q R E', for matrices whose normal matrix is beyond double
 * precision. */
#ifndef LW_SOLVE_QR_H
#define LW_SOLVE_QR_H

#include "solve/engine.h"

extern const lw_engine lw_engine_qr;

#endif
