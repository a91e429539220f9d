/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Makes the k-th allocation fail, for every k, from the files to the run's tables: no crash, nothing lost,
 * and either a whole answer or a status with a message. Leaks are counted by the C library's own accounts,
 * and by the leak sanitizer where the program is built with it. Speaks TAP. */
#include "certainty/certainty.h"
#include "core/memory.h"
#include "problem/check.h"
#include "run/write.h"
#include "solve/engine.h"
#include "tradeoff/sweep.h"

#include <malloc.h>
#include <stdatomic.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

/* One way through the layers. */
typedef struct way {
    const char *name, *engine;
    double damping;
    lw_penalty_kind prefer;
    bool sweep, free_datum;
    bool files; /* also write the tables (which waits for the disk) */
    const char *folder;
    const char *out;
} way;

typedef struct gate {
    atomic_long left; /* allocations that still succeed */
    bool once;        /* only that one fails, else all from there on */
} gate;

static bool refuse(void *state)
{
    gate *g = state;
    long before = atomic_fetch_sub(&g->left, 1);
    return g->once ? before == 0 : before <= 0;
}

static lw_status write_tables(const lw_run *run, const char *out, lw_error *error)
{
    static const struct {
        const char *name;
        lw_status (*write)(const lw_run *run, const char *path, lw_error *error);
    } files[] = {{"parameters.csv", lw_write_parameters},
                 {"residuals.csv", lw_write_residuals},
                 {"summary.json", lw_write_summary}};
    lw_status status = LW_OK;
    for (size_t k = 0; k < sizeof files / sizeof *files && status == LW_OK; k++) {
        char path[300];
        (void)snprintf(path, sizeof path, "%s/%s", out, files[k].name);
        status = files[k].write(run, path, error);
    }
    return status;
}

/* From the files to the tables; what was made is freed on every way out. */
static lw_status go(const way *w, const lw_watch *watch, lw_error *error)
{
    lw_read_options read = {.keep_low = true};
    lw_system_options system_options = {.penalty = {.prefer = w->prefer}};
    lw_solve_options solve = {.engine = w->engine,
                              .tolerance = 1e-6,
                              .datum_free = w->free_datum,
                              .sweep = w->sweep,
                              .sweep_from = w->sweep ? 10.0 : 0.0,
                              .sweep_to = w->sweep ? 0.1 : 0.0,
                              .trace_probes = w->sweep};
    lw_sweep_options grid = {
        .count = 5, .damping = (const double[]){0.1, 0.3, 1.0, 3.0, 10.0}, .sigma_stated = true};
    lw_certainty_options options = {
        .confidence = 0.95, .alpha = 0.001, .power = 0.80, .sigma = true, .reliability = true};
    lw_problem *problem = NULL;
    lw_check check = {0};
    lw_system *system = NULL;
    lw_engine_choice choice = {0};
    lw_decomposition *decomposition = NULL;
    lw_estimate *estimate = NULL;
    lw_curve *curve = NULL;
    lw_certainty *certainty = NULL;
    lw_status status = lw_problem_read(w->folder, &read, watch, &problem, error);
    if (status >= 0) status = lw_check_problem(problem, watch->log, &check, error);
    if (status >= 0) status = lw_system_new(problem, &system_options, watch, &system, error);
    if (status >= 0) status = lw_decompose(system, w->damping, &solve, watch, &choice, &decomposition, error);
    if (status >= 0 && w->sweep) status = lw_sweep(decomposition, &grid, watch, &curve, error);
    if (status >= 0)
        status = decomposition->methods->estimate(decomposition, w->damping, watch, &estimate, error);
    if (status >= 0)
        status = lw_certainty_make(decomposition, estimate, &options, true, watch, &certainty, error);
    if (status >= 0 && w->files) {
        lw_run run = {.version = "0",
                      .command = "solve",
                      .command_line = "solve",
                      .folder = w->out,
                      .problem = problem,
                      .system = system,
                      .check = &check,
                      .engine = choice,
                      .estimate = estimate,
                      .curve = curve,
                      .certainty = certainty,
                      .damping = w->damping,
                      .damping_chosen_by = "none",
                      .warnings = watch->log};
        status = lw_run_measure(&run, error);
        if (status >= 0) status = write_tables(&run, w->out, error);
    }
    lw_certainty_free(certainty);
    lw_estimate_free(estimate);
    lw_curve_free(curve);
    lw_decomposition_free(decomposition);
    lw_system_free(system);
    lw_check_clear(&check);
    lw_problem_free(problem);
    return status;
}

/* With a team of two threads, which is made under the gate too. */
static lw_status attempt(const way *w, lw_error *error)
{
    lw_log log = {0};
    lw_team *team = NULL;
    lw_watch watch = {.log = &log};
    *error = (lw_error){0};
    lw_status status = lw_team_new(2, &team, error);
    watch.team = team;
    if (status == LW_OK) status = go(w, &watch, error);
    lw_log_clear(&log);
    lw_team_free(team);
    return status;
}

static long count_allocations(const way *w)
{
    gate g = {.once = false};
    lw_error error;
    atomic_store(&g.left, 1L << 40);
    lw_memory_set_gate(refuse, &g);
    (void)attempt(w, &error);
    lw_memory_set_gate(NULL, NULL);
    return (1L << 40) - atomic_load(&g.left);
}

/* A failed attempt must say so; memory must come back. Returns whether all was well. */
static bool fail_each(const way *w, bool once, long most)
{
    static lw_error error;
    long wrong = 0;
    for (long k = 0; k < most; k++) {
        gate g = {.once = once};
        atomic_store(&g.left, k);
        lw_memory_set_gate(refuse, &g);
        lw_status status = attempt(w, &error);
        lw_memory_set_gate(NULL, NULL);
        bool fine = status >= 0 || ((status == LW_NO_MEMORY || status == LW_SYSTEM) && error.text[0] != '\0');
        if (!fine && wrong++ < 5)
            printf("# allocation %ld of %ld: status %d, '%s'\n", k, most, (int)status, error.text);
    }
    return wrong == 0;
}

static bool nothing_lost(const way *w, long most)
{
    static lw_error error;
    size_t before = 0, lost = 0;
    for (int round = 0; round < 2; round++) {
        size_t at_start = mallinfo2().uordblks;
        for (long k = 0; k < most; k += 1 + most / 300) {
            gate g = {.once = true};
            atomic_store(&g.left, k);
            lw_memory_set_gate(refuse, &g);
            (void)attempt(w, &error);
            lw_memory_set_gate(NULL, NULL);
        }
        size_t now = mallinfo2().uordblks;
        lost = now > at_start ? now - at_start : 0;
        before = at_start;
    }
    if (lost > 4096) printf("# %zu bytes more in use than the %zu before\n", lost, before);
    return lost <= 4096;
}

static void put(const char *folder, const char *name, const char *text)
{
    char path[300];
    (void)snprintf(path, sizeof path, "%s/%s", folder, name);
    FILE *file = fopen(path, "w");
    if (!file || fputs(text, file) < 0 || fclose(file) != 0) abort();
}

/* A small problem with priors, correlations, groups, carried columns and coordinates. */
static void make_problem(const char *folder, bool datum_defect)
{
    put(folder, "design.csv",
        datum_defect
            ? "observation,parameter,coefficient\na,x,-1\na,y,1\nb,y,-1\nb,z,1\nc,x,-1\nc,z,1\nd,z,-1\nd,x,1."
              "0\n"
            : "observation,parameter,coefficient\na,x,1\nb,x,0.1\nb,y,1\nc,y,1\nd,x,2\nd,z,1e-3\ne,z,1\n");
    put(folder, "observations.csv",
        "observation,value,sigma,group,day\na,1,0.1,g,mon\nb,3,0.1,g,\"tue, "
        "late\"\nc,4.1,0.1,h,\nd,-4.2,0.2,h,wed\n");
    put(folder, "parameters.csv",
        "parameter,prior,prior_sigma,point,axis,x,note\nx,0.9,,P,east,0,a\ny,2,,P,north,1,b\nz,0,,,,2,\"c "
        "\"\"d\"\"\"\n");
    put(folder, "covariance.csv", "observation_a,observation_b,covariance\na,b,0.001\n");
    if (datum_defect) return;
    put(folder, "observations.csv",
        "observation,value,sigma,group,day\na,1,0.1,g,mon\nb,3,0.1,g,\"tue, "
        "late\"\nc,2.1,0.1,h,\nd,2.2,0.2,h,wed\ne,1,0.5,h,\n");
    put(folder, "parameters.csv",
        "parameter,prior,prior_sigma,point,axis,x,note\nx,0.9,,P,east,0,a\ny,2,0.5,P,north,1,b\nz,0,,,,2,\"c "
        "\"\"d\"\"\"\n");
}

static void remove_problem(const char *folder)
{
    static const char *const names[] = {"design.csv",     "observations.csv", "parameters.csv",
                                        "covariance.csv", "residuals.csv",    "summary.json"};
    char path[300];
    for (size_t k = 0; k < sizeof names / sizeof *names; k++) {
        (void)snprintf(path, sizeof path, "%s/%s", folder, names[k]);
        (void)unlink(path);
    }
    (void)rmdir(folder);
}

int main(void)
{
    char plain[] = P_tmpdir "/leastwise-allocation-XXXXXX", loose[] = P_tmpdir "/leastwise-allocation-XXXXXX",
         out[] = P_tmpdir "/leastwise-allocation-XXXXXX";
    if (!mkdtemp(plain) || !mkdtemp(loose) || !mkdtemp(out)) return 1;
    make_problem(plain, false);
    make_problem(loose, true);
    const way ways[] = {
        {.name = "dense, tables written", .engine = "dense", .files = true, .folder = plain, .out = out},
        {.name = "cholesky", .engine = "cholesky", .folder = plain, .out = out},
        {.name = "dense, damped", .engine = "dense", .damping = 0.5, .folder = plain, .out = out},
        {.name = "dense, sweep",
         .engine = "dense",
         .damping = 1.0,
         .sweep = true,
         .folder = plain,
         .out = out},
        {.name = "cholesky, flattest",
         .engine = "cholesky",
         .damping = 0.5,
         .prefer = LW_PREFER_FLATTEST,
         .folder = plain,
         .out = out},
        {.name = "cholesky, free datum",
         .engine = "cholesky",
         .free_datum = true,
         .folder = loose,
         .out = out},
        {.name = "lsqr, damped", .engine = "lsqr", .damping = 0.5, .folder = plain, .out = out},
        {.name = "lsqr, sweep",
         .engine = "lsqr",
         .damping = 1.0,
         .sweep = true,
         .folder = plain,
         .out = out}};
    int count = (int)(sizeof ways / sizeof *ways), failed = 0, number = 0;
    printf("1..%d\n", 4 * count);
    for (int i = 0; i < count; i++) {
        const way *w = ways + i;
        lw_error error;
        lw_status status = attempt(w, &error); /* also warms what libraries keep */
        if (status < 0) printf("# %s\n", error.text);
        failed += status < 0;
        printf("%sok %d - %s: without a failure\n", status < 0 ? "not " : "", ++number, w->name);
        long most = count_allocations(w);
        const bool result[] = {fail_each(w, true, most), fail_each(w, false, most), nothing_lost(w, most)};
        static const char *const what[] = {"each allocation in turn", "each and all after it",
                                           "memory comes back"};
        for (int r = 0; r < 3; r++) {
            failed += !result[r];
            printf("%sok %d - %s: %s (%ld allocations)\n", result[r] ? "" : "not ", ++number, w->name,
                   what[r], most);
        }
        (void)fflush(stdout);
    }
    remove_problem(plain);
    remove_problem(loose);
    remove_problem(out);
    return failed != 0;
}
