/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "command/plot.h"

#include <libsmartcols.h>
#include <math.h>
#include <string.h>

/* One number with `digits` significant digits, or a dash. */
static void set(struct libscols_line *line, size_t column, int digits, double a)
{
    char text[40];
    if (isnan(a))
        snprintf(text, sizeof text, "-");
    else
        snprintf(text, sizeof text, "%.*g", digits, a);
    scols_line_set_data(line, column, text);
}

static void set_range(struct libscols_line *line, size_t column, double from, double to)
{
    char text[80];
    if (isnan(from))
        snprintf(text, sizeof text, "-");
    else
        snprintf(text, sizeof text, "%.3g to %.3g", from, to);
    scols_line_set_data(line, column, text);
}

void lw_plot_choices(const lw_curve *curve, FILE *to)
{
    static const char *const head[] = {
        "CRITERION", "DAMPING", "WITHIN 5 %", "MISFIT", "SIZE", "EFFECTIVE PARAMETERS", "NOTE"};
    struct libscols_table *table = scols_new_table();
    if (!table) return;
    for (size_t c = 0; c < sizeof head / sizeof *head; c++)
        scols_table_new_column(table, head[c], 0, c == 0 || c == 6 ? 0 : SCOLS_FL_RIGHT);
    for (int i = 0; i < curve->choices; i++) {
        const lw_choice *choice = &curve->choice[i];
        struct libscols_line *line = scols_table_new_line(table, NULL);
        if (!line) break;
        scols_line_set_data(line, 0, lw_criterion_name(choice->criterion));
        bool none = isnan(choice->damping);
        set(line, 1, 4, choice->damping);
        set_range(line, 2, choice->from, choice->to);
        set(line, 3, 4, none ? choice->damping : choice->at.point.misfit);
        set(line, 4, 4, none ? choice->damping : choice->at.point.size);
        set(line, 5, 4, none ? choice->damping : choice->at.point.effective_parameters);
        scols_line_set_data(line, 6, choice->warning[0] ? "see below" : "");
    }
    scols_table_set_stream(table, to);
    scols_print_table(table);
    scols_unref_table(table);
}

#define PLOT_WIDTH 64
#define PLOT_HEIGHT 16

typedef struct plot {
    char cell[PLOT_HEIGHT][PLOT_WIDTH + 1];
    double x0, x1, y0, y1;
} plot;

static void mark(plot *p, const lw_point *point, char letter)
{
    if (!(point->misfit > 0.0 && point->size > 0.0)) return;
    double x = (log(point->misfit) - p->x0) / (p->x1 - p->x0),
           y = (log(point->size) - p->y0) / (p->y1 - p->y0);
    if (!(x >= 0.0 && x <= 1.0 && y >= 0.0 && y <= 1.0)) return;
    p->cell[(int)lrint((1.0 - y) * (PLOT_HEIGHT - 1))][(int)lrint(x * (PLOT_WIDTH - 1))] = letter;
}

void lw_plot_curve(const lw_curve *curve, FILE *to)
{
    plot p = {.x0 = HUGE_VAL, .x1 = -HUGE_VAL, .y0 = HUGE_VAL, .y1 = -HUGE_VAL};
    for (int i = 0; i < PLOT_HEIGHT; i++) memset(p.cell[i], ' ', PLOT_WIDTH);
    for (int i = 0; i < curve->count; i++) {
        const lw_curve_row *row = &curve->row[i];
        if (!row->usable || !(row->point.misfit > 0.0 && row->point.size > 0.0)) continue;
        p.x0 = fmin(p.x0, log(row->point.misfit)), p.x1 = fmax(p.x1, log(row->point.misfit));
        p.y0 = fmin(p.y0, log(row->point.size)), p.y1 = fmax(p.y1, log(row->point.size));
    }
    if (!(p.x1 > p.x0 && p.y1 > p.y0)) return;
    for (int i = 0; i < curve->count; i++)
        if (curve->row[i].usable) mark(&p, &curve->row[i].point, '.');
    for (int i = 0; i < curve->choices; i++)
        if (!isnan(curve->choice[i].damping))
            mark(&p, &curve->choice[i].at.point, "CGDR"[curve->choice[i].criterion]);
    fprintf(to, "size %.3g\n", exp(p.y1));
    for (int i = 0; i < PLOT_HEIGHT; i++) fprintf(to, "  |%s\n", p.cell[i]);
    fprintf(to, "  +");
    for (int i = 0; i < PLOT_WIDTH; i++) fputc('-', to);
    fprintf(to,
            "\n  size %.3g; misfit %.3g to %.3g, both logarithmic; C corner, G gcv, D discrepancy, R risk\n",
            exp(p.y0), exp(p.x0), exp(p.x1));
}
