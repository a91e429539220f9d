/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "tradeoff/valley.h"

#include <math.h>
#include <stdio.h>

/* Minima nearer than this factor in damping are one valley. */
#define ONE_VALLEY 2.0

static double limit_of(double lowest)
{
    return lowest + LW_NEAR_OPTIMUM * fabs(lowest);
}

/* Lowest and highest value among the usable rows that have one; false when none has. */
static bool extremes(const lw_look *look, lw_height *height, int *lowest, int *highest)
{
    *lowest = *highest = -1;
    for (int i = look->low; i < look->count; i++) {
        double h = height(&look->row[i]);
        if (isnan(h)) continue;
        if (*lowest < 0 || h < height(&look->row[*lowest])) *lowest = i;
        if (*highest < 0 || h > height(&look->row[*highest])) *highest = i;
    }
    return *lowest >= 0;
}

static bool apart(const lw_curve_row *a, const lw_curve_row *b)
{
    double ratio = a->point.lambda / b->point.lambda;
    return ratio >= ONE_VALLEY || ratio <= 1.0 / ONE_VALLEY;
}

/* The other minimum that is as deep to 5 %: an interior one, or an end of the range towards which the
 * function falls. */
static lw_status find_rival(lw_look *look, lw_height *height, int found, const int *at,
                            const lw_choice *choice, lw_curve_row *rival, bool *has)
{
    double limit = limit_of(choice->value);
    *has = false;
    for (int i = 0; i < found; i++) {
        if (!apart(&look->row[at[i]], &choice->at) ||
            height(&look->row[at[i]]) > limit + 0.02 * fabs(choice->value))
            continue;
        lw_curve_row row;
        lw_status status = lw_look_lowest(look, height, at[i], &row);
        if (status != LW_OK) return status;
        if (height(&row) <= limit && (!*has || height(&row) < height(rival))) {
            *rival = row;
            *has = true;
        }
    }
    int first = look->low, last = look->count - 1, end[2] = {first, last}, inner[2] = {first + 1, last - 1};
    for (int i = 0; i < 2 && last - first >= 2; i++) {
        const lw_curve_row *row = &look->row[end[i]];
        bool falls = height(row) < height(&look->row[inner[i]]);
        if (falls && height(row) <= limit && apart(row, &choice->at) &&
            (!*has || height(row) < height(rival))) {
            *rival = *row;
            *has = true;
        }
    }
    return LW_OK;
}

lw_status lw_valley_choose(lw_look *look, const char *name, lw_height *height, double flat, lw_choice *choice)
{
    enum { MOST = 8 };
    int lowest, highest, at[MOST], found = lw_look_valleys(look, height, MOST, at);
    char *text = choice->warning;
    size_t room = sizeof choice->warning;
    if (!extremes(look, height, &lowest, &highest)) {
        snprintf(text, room, "%s is not known: the effective number of parameters was not computed.", name);
        return LW_OK;
    }
    double low = height(&look->row[lowest]), high = height(&look->row[highest]);
    if (flat > 0.0 && high - low <= flat * fabs(low)) {
        snprintf(text, room,
                 "%s is flat: it varies by less than %.2g %% over the range of dampings and picks none.",
                 name, 100.0 * flat);
        return LW_OK;
    }
    lw_curve_row best = look->row[lowest];
    bool at_end = found == 0 || height(&look->row[at[0]]) > low;
    for (int i = 0; i < found && !at_end; i++) { /* a shallower row may hide a deeper valley */
        if (i > 0 && height(&look->row[at[i]]) > low + 0.05 * fabs(low)) break;
        lw_curve_row row;
        lw_status status = lw_look_lowest(look, height, at[i], &row);
        if (status != LW_OK) return status;
        if (i == 0 || height(&row) < height(&best)) best = row;
    }
    lw_look_take(choice, &best, height(&best));
    lw_look_range(look, height, limit_of(choice->value), choice);
    lw_curve_row rival;
    bool has_rival;
    lw_status status = find_rival(look, height, found, at, choice, &rival, &has_rival);
    if (status != LW_OK) return status;
    int used = 0;
    if (at_end)
        used = snprintf(text, room,
                        "%s has no minimum inside the range: it is smallest at its %s end (damping %.4g).",
                        name, lowest == look->low ? "lower" : "upper", best.point.lambda);
    if (has_rival && used >= 0 && (size_t)used < room)
        snprintf(text + used, room - (size_t)used,
                 "%s%s has two minima of similar depth: %.6g at damping %.4g and %.6g at %.4g.",
                 used > 0 ? " " : "", name, choice->value, choice->damping, height(&rival),
                 rival.point.lambda);
    return LW_OK;
}
