/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Products with a sparse matrix by sweeps over its lines (the longer side). The lines are cut into parts by
 * nonzeros; each part gathers from and scatters into pairs of its own, which are summed in the order of the
 * parts. */
#include "matrix/product.h"

#include "core/memory.h"
#include "matrix/product_kernel.h"

#define MOST_PARTS 16
#define MOST_VECTORS 8
/* A part is worth its private pairs when it has this many nonzeros for each of them. */
#define NONZEROS_PER_PAIR 16
/* Fewer nonzeros than this in a part are not worth a thread. */
#define LEAST_NONZEROS 8192
/* Indices summed at a time, so that the sums stay in the first cache. */
#define REDUCE_STRIDE 1024
#define SHARED_BYTES (INT64_C(64) << 20)

typedef struct product {
    lw_lines lines;
    lw_sweep_kernel *sweep;
    int by_rows; /* the lines are the rows of A */
    int parts;
    int64_t bound[MOST_PARTS + 1];             /* blocks bound[p] .. bound[p+1]-1 belong to part p */
    int64_t low[MOST_PARTS], high[MOST_PARTS]; /* the shorter side that part p touches */
    double *pairs;                             /* parts x width x 2 shorter */
    int width;                                 /* vectors that one sweep carries */
} product;

/* One sweep of up to width vectors over all parts. */
typedef struct sweep_job {
    const product *m;
    lw_sweep sweep;  /* without from, to, pairs */
    const double *s; /* shorter x k, in */
    double *a;       /* shorter x k, out */
    double square[MOST_PARTS][MOST_VECTORS];
} sweep_job;

static double *part_pairs(const product *m, int part, int c)
{
    return m->pairs + 2 * m->lines.shorter * ((int64_t)part * m->width + c);
}

static void fill_pairs(const sweep_job *job, int part, int64_t from, int64_t to)
{
    for (int c = 0; c < job->sweep.k; c++) {
        double *pairs = part_pairs(job->m, part, c);
        const double *s = job->sweep.gather ? job->s + c * job->m->lines.shorter : NULL;
        for (int64_t i = from; i < to; i++) {
            pairs[2 * i] = s ? s[i] : 0;
            pairs[2 * i + 1] = 0;
        }
    }
}

static void fill_range(void *state, int part)
{
    const sweep_job *job = state;
    int64_t n = job->m->lines.shorter;
    fill_pairs(job, 0, n * part / job->m->parts, n * (part + 1) / job->m->parts);
}

static void sweep_part(void *state, int part)
{
    sweep_job *job = state;
    const product *m = job->m;
    lw_sweep sweep = job->sweep;
    double square[MOST_VECTORS] = {0};
    if (sweep.scatter) fill_pairs(job, part, m->low[part], m->high[part]);
    sweep.from = m->bound[part];
    sweep.to = m->bound[part + 1];
    sweep.pairs = part_pairs(m, sweep.scatter ? part : 0, 0);
    sweep.square = square;
    m->sweep(&sweep);
    for (int c = 0; c < sweep.k; c++) job->square[part][c] = square[c];
}

/* a_i <- sum over the parts that touch i, in their order. */
static void reduce_range(void *state, int range)
{
    const sweep_job *job = state;
    const product *m = job->m;
    int64_t n = m->lines.shorter, first = n * range / m->parts, last = n * (range + 1) / m->parts;
    for (int c = 0; c < job->sweep.k; c++) {
        double *a = job->a + c * n;
        for (int64_t from = first; from < last; from += REDUCE_STRIDE) {
            int64_t to = from + REDUCE_STRIDE < last ? from + REDUCE_STRIDE : last;
            for (int64_t i = from; i < to; i++) a[i] = 0;
            for (int part = 0; part < m->parts; part++) {
                const double *pairs = part_pairs(m, part, c);
                int64_t low = m->low[part] > from ? m->low[part] : from;
                int64_t high = m->high[part] < to ? m->high[part] : to;
                for (int64_t i = low; i < high; i++) a[i] += pairs[2 * i + 1];
            }
        }
    }
}

/* parts x width x 2 shorter, and one vector of the shorter side behind them. */
static double *new_pairs(const product *m, int64_t width)
{
    return lw_alloc_scattered((size_t)(m->lines.shorter * (2 * m->parts * width + 1)), sizeof(double));
}

/* More vectors in one sweep need more pairs; without memory for them the sweeps carry fewer vectors, with the
 * same bytes. */
static void widen(product *m, int k)
{
    int64_t one = lw_bytes(2 * m->lines.shorter * m->parts, sizeof(double));
    int64_t room = m->lines.bytes > SHARED_BYTES ? m->lines.bytes : SHARED_BYTES;
    int64_t want = one ? room / one : MOST_VECTORS;
    if (want > MOST_VECTORS) want = MOST_VECTORS;
    if (want > k) want = k;
    if (want <= m->width) return;
    double *pairs = new_pairs(m, want);
    if (!pairs) return;
    lw_free(m->pairs);
    m->pairs = pairs;
    m->width = (int)want;
}

/* t <- M s - beta t where s is given, and a <- M' t where a is asked for. */
static void sweep_all(lw_operator *op, int k, const double *s, const double *beta, const double *t_in,
                      double *t_out, double *a, double *square)
{
    product *m = op->state;
    widen(m, k);
    for (int done = 0; done < k; done += m->width) {
        int now = k - done < m->width ? k - done : m->width;
        int64_t line = done * m->lines.lines, place = done * m->lines.shorter;
        sweep_job job = {.m = m, .s = s ? s + place : NULL, .a = a ? a + place : NULL};
        job.sweep = (lw_sweep){.lines = &m->lines,
                               .k = now,
                               .gather = s != NULL,
                               .scatter = a != NULL,
                               .beta = beta ? beta + done : NULL,
                               .line_scale = s && a ? op->line_scale : NULL,
                               .t_in = t_in ? t_in + line : NULL,
                               .t_out = t_out ? t_out + line : NULL};
        if (!a) lw_team_run(op->team, m->parts, fill_range, &job);
        lw_team_run(op->team, m->parts, sweep_part, &job);
        if (a) lw_team_run(op->team, m->parts, reduce_range, &job);
        for (int c = 0; square && c < now; c++) {
            square[done + c] = 0;
            for (int part = 0; part < m->parts; part++) square[done + c] += job.square[part][c];
        }
    }
}

static void product_apply(lw_operator *op, int k, const double *x, double *y)
{
    const product *m = op->state;
    if (m->by_rows)
        sweep_all(op, k, x, NULL, NULL, y, NULL, NULL);
    else
        sweep_all(op, k, NULL, NULL, x, NULL, y, NULL);
}

static void product_apply_transposed(lw_operator *op, int k, const double *y, double *x)
{
    const product *m = op->state;
    if (m->by_rows)
        sweep_all(op, k, NULL, NULL, y, NULL, x, NULL);
    else
        sweep_all(op, k, y, NULL, NULL, x, NULL, NULL);
}

/* out <- in - factor out and the square of the new out, for steps against the grain of the layout. */
static void subtract_scaled(int64_t n, double factor, const double *in, double *out, double *square)
{
    double sum = 0;
    for (int64_t i = 0; i < n; i++) {
        out[i] = factor != 0 ? in[i] - factor * out[i] : in[i];
        sum += out[i] * out[i];
    }
    *square = sum;
}

/* The step against the grain: a new vector on the shorter side is complete only after a whole sweep, so it
 * takes two. Its sum is formed behind the pairs. */
static void step_across(lw_operator *op, int k, const double *t, const double *beta, double *s,
                        double *t_next, double *square)
{
    product *m = op->state;
    int64_t n = m->lines.shorter;
    for (int c = 0; c < k; c++) {
        sweep_job job = {.m = m, .a = part_pairs(m, m->parts, 0)};
        job.sweep = (lw_sweep){.lines = &m->lines, .k = 1, .scatter = 1, .t_in = t + c * m->lines.lines};
        lw_team_run(op->team, m->parts, sweep_part, &job);
        lw_team_run(op->team, m->parts, reduce_range, &job);
        subtract_scaled(n, beta[c], job.a, s + c * n, &square[c]);
    }
    sweep_all(op, k, s, NULL, NULL, t_next, NULL, NULL);
}

static void product_step_rows(lw_operator *op, int k, const double *v, const double *alpha, double *u,
                              double *w, double *square)
{
    const product *m = op->state;
    if (!m->by_rows) {
        step_across(op, k, v, alpha, u, w, square);
    } else if (op->fusion == LW_FUSED_ROWS) {
        sweep_all(op, k, v, alpha, NULL, u, w, square);
    } else {
        sweep_all(op, k, v, alpha, NULL, u, NULL, square);
        sweep_all(op, k, NULL, NULL, u, NULL, w, NULL);
    }
}

static void product_step_columns(lw_operator *op, int k, const double *u, const double *beta, double *v,
                                 double *w, double *square)
{
    const product *m = op->state;
    if (m->by_rows) {
        step_across(op, k, u, beta, v, w, square);
    } else if (op->fusion == LW_FUSED_COLUMNS) {
        sweep_all(op, k, u, beta, NULL, v, w, square);
    } else {
        sweep_all(op, k, u, beta, NULL, v, NULL, square);
        sweep_all(op, k, NULL, NULL, v, NULL, w, NULL);
    }
}

static void product_free(lw_operator *op)
{
    product *m = op->state;
    if (!m) return;
    lw_lines_clear(&m->lines);
    lw_free(m->pairs);
    lw_free(m);
}

static const lw_operator_methods product_methods = {
    .name = "sparse matrix",
    .apply = product_apply,
    .apply_transposed = product_apply_transposed,
    .step_rows = product_step_rows,
    .step_columns = product_step_columns,
    .free_state = product_free,
    .takes_line_scale = 1,
};

static const lw_product_kernels *choose_kernels(void)
{
#if defined(__x86_64__)
    if (__builtin_cpu_supports("avx2") && __builtin_cpu_supports("fma")) return &lw_product_avx2;
#endif
    return &lw_product_plain;
}

/* As many parts as the private pairs are worth, two at least (one when small), sixteen at most. */
static int count_parts(int64_t nonzeros, int64_t shorter)
{
    int64_t parts = nonzeros / NONZEROS_PER_PAIR / (shorter > 0 ? shorter : 1);
    if (parts < 2) parts = 2;
    if (parts > nonzeros / LEAST_NONZEROS) parts = nonzeros / LEAST_NONZEROS;
    if (parts > MOST_PARTS) parts = MOST_PARTS;
    return parts < 1 ? 1 : (int)parts;
}

/* Cuts the blocks into parts of about equal length and notes what each part touches. */
static void cut_parts(product *m)
{
    const lw_lines *lines = &m->lines;
    int64_t block = 0, total = lines->start[lines->blocks];
    for (int part = 0; part < m->parts; part++) {
        int64_t goal = total / m->parts * (part + 1), low = lines->shorter, high = 0;
        m->bound[part] = block;
        for (; block < lines->blocks && (part == m->parts - 1 || lines->start[block + 1] <= goal); block++) {
            int64_t from = lines->start[block], to = lines->start[block + 1];
            if (from == to) continue;
            if (lines->index[from] < low) low = lines->index[from];
            if (lines->index[to - 1] + 1 > high) high = lines->index[to - 1] + 1;
        }
        m->low[part] = low < high ? low : 0;
        m->high[part] = high;
    }
    m->bound[m->parts] = lines->blocks;
}

static lw_status make_product(const lw_sparse *A, const lw_product_options *options, product *m,
                              lw_error *error)
{
    lw_sparse *transposed = NULL;
    lw_status status;
    m->by_rows = A->rows > A->columns;
    if (m->by_rows) {
        status = lw_sparse_transpose(A, &transposed, error);
        if (status) return status;
        status = lw_lines_make(transposed, options->storage, options->two_pass == LW_TWO_PASS_PLAIN,
                               options->row_scale, NULL, options->team, &m->lines, error);
    } else {
        status = lw_lines_make(A, options->storage, options->two_pass == LW_TWO_PASS_PLAIN, NULL,
                               options->row_scale, options->team, &m->lines, error);
    }
    if (status) {
        lw_sparse_free(transposed);
        return status;
    }
    if (m->lines.block == 4)
        lw_sparse_free(transposed);
    else if (transposed)
        lw_lines_keep(&m->lines, transposed);
    m->parts = count_parts(lw_sparse_nonzeros(A), m->lines.shorter);
    cut_parts(m);
    m->sweep = choose_kernels()->sweep[m->lines.storage == LW_STORE_SINGLE][m->lines.block == 4];
    m->width = 1;
    m->pairs = new_pairs(m, 1);
    if (!m->pairs)
        return lw_fail_memory(error, "matrix sums", (size_t)m->lines.shorter * (size_t)m->parts * 16);
    return LW_OK;
}

/* Below this a pass takes a few tenths of a millisecond, and waking the threads costs what they would save
 * (measured at 400 000 nonzeros: a fifth more processor time for a fifth less by the clock). */
#define FEW_NONZEROS 1000000

lw_status lw_product_new(const lw_sparse *A, const lw_product_options *options, lw_operator **out,
                         lw_error *error)
{
    static const lw_product_options defaults = {.storage = LW_STORE_DOUBLE};
    if (!options) options = &defaults;
    *out = NULL;
    lw_operator *op = LW_NEW(lw_operator);
    product *m = LW_NEW(product);
    if (!op || !m) {
        lw_free(op);
        lw_free(m);
        return lw_fail_memory(error, "matrix operator", sizeof *op + sizeof *m);
    }
    *op = (lw_operator){.methods = &product_methods,
                        .rows = A->rows,
                        .columns = A->columns,
                        .team = lw_sparse_nonzeros(A) < FEW_NONZEROS ? NULL : options->team,
                        .state = m};
    lw_status status = make_product(A, options, m, error);
    if (status) {
        lw_operator_free(op);
        return status;
    }
    if (!options->two_pass) op->fusion = m->by_rows ? LW_FUSED_ROWS : LW_FUSED_COLUMNS;
    *out = op;
    return LW_OK;
}

void lw_product_describe(const lw_operator *op, lw_product_layout *out)
{
    const product *m = op->state;
    *out =
        (lw_product_layout){.fusion = op->fusion,
                            .block = m->lines.block,
                            .fill = m->lines.fill,
                            .parts = m->parts,
                            .bytes = m->lines.bytes + m->lines.shorter * 8 * (2 * m->parts * m->width + 1)};
}

int64_t lw_product_bytes(const lw_sparse *A, const lw_product_options *options)
{
    int64_t nonzeros = lw_sparse_nonzeros(A), longer = A->rows > A->columns ? A->rows : A->columns;
    int64_t shorter = A->rows + A->columns - longer, parts = count_parts(nonzeros, shorter);
    int64_t value = options && options->storage == LW_STORE_SINGLE ? 4 : 8;
    /* Blocks of four hold less than 3 places a nonzero, four of which share an index; double ones of long
     * lines less than 2. */
    int64_t most = value == 4 || nonzeros < 64 * longer ? 3 : 2;
    int64_t bytes = lw_bytes(most * (value + 1), nonzeros) + 2 * longer;
    if (A->rows > A->columns)
        bytes += lw_bytes(12, nonzeros) + 8 * longer; /* the transposed matrix, in passing or kept */
    return bytes + lw_bytes(shorter * 8, 2 * parts + 1);
}
