/** Choosing the lowest point of a function of the damping, as GCV and risk do. */
#ifndef LW_TRADEOFF_VALLEY_H
#define LW_TRADEOFF_VALLEY_H

#include "tradeoff/look.h"

/** name: "GCV". flat: relative variation below which the function says nothing (0 none). near: what counts as
 * near in value, added to the minimum, as a multiple of its magnitude. */
lw_status lw_valley_choose(lw_look *look, const char *name, lw_height *height, double flat,
                           lw_choice *choice);

#endif
