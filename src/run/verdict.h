/** The verdict in plain words: what the terminal prints and the report opens with. */
#ifndef LW_RUN_VERDICT_H
#define LW_RUN_VERDICT_H

#include "run/run.h"

#define LW_VERDICT_NUMBERS 5
#define LW_VERDICT_CAUTIONS 8

typedef struct lw_verdict {
    char headline[512];
    struct {
        char label[64];
        char value[160];
    } number[LW_VERDICT_NUMBERS];           /**< the five numbers that matter; label "" = unused */
    char caution[LW_VERDICT_CAUTIONS][400]; /**< what changes how the result may be used; "" = unused */
    int cautions;
} lw_verdict;

void lw_verdict_make(const lw_run *run, lw_verdict *out);
/** "3.14e-05 s", "0.0012 m": a number with `digits` significant digits and its unit, for people. text: room
 * bytes. */
void lw_verdict_number(double value, int digits, const char *unit, char *text, size_t room);

#endif
