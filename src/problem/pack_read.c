/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "problem/pack.h"

#include "core/memory.h"
#include "problem/pack_source.h"

#include <string.h>

static lw_status read_sizes(lw_pack_source *s)
{
    const lw_pack_section *section = lw_pack_get(s, "sizes", "");
    if (section == NULL || section->bytes != sizeof s->sizes) return lw_pack_refuse_length(s, "sizes", "");
    memcpy(&s->sizes, lw_pack_data(s, section), sizeof s->sizes);
    const lw_pack_sizes *z = &s->sizes;
    if (z->m < 0 || z->n < 0 || z->conditions < 0 || z->m > INT32_MAX || z->n > INT32_MAX ||
        z->conditions > INT32_MAX)
        return lw_pack_refuse(s, "sizes out of range", "the pack as it was written");
    s->problem->m = z->m;
    s->problem->n = z->n;
    s->problem->repeated_added = z->repeated_added;
    return LW_OK;
}

static lw_status read_arrays(lw_pack_source *s)
{
    lw_status status = LW_OK;
    for (int k = 0; k < lw_pack_array_count && status == LW_OK; k++) {
        const lw_pack_array *a = lw_pack_arrays + k;
        status = lw_pack_copy(s, a->name, "", lw_pack_count(a->length, &s->sizes), lw_pack_element(a->rule),
                              true, (char *)s->problem + a->offset);
    }
    return status;
}

static lw_status read_names(const lw_pack_source *s, const char *name, lw_ids **out)
{
    const lw_pack_section *section = lw_pack_get(s, name, "");
    if (section == NULL) return LW_OK;
    const char *text = lw_pack_data(s, section), *end = text + section->bytes;
    if (section->bytes > 0 && end[-1] != '\0') return lw_pack_refuse_length(s, name, "");
    lw_status status = lw_ids_new(0, out, s->error);
    for (size_t length; text < end && status == LW_OK; text += length + 1) {
        int64_t number;
        int added = 0;
        length = strlen(text);
        status = lw_ids_add(*out, text, length, &number, &added, s->error);
        if (status == LW_OK && !added)
            status = lw_pack_refuse(s, "an id twice", "the pack as it was written");
    }
    return status;
}

static lw_status read_ids(lw_pack_source *s)
{
    lw_status status = LW_OK;
    for (int k = 0; k < LW_PACK_IDS && status == LW_OK; k++)
        status = read_names(s, lw_pack_ids[k].name,
                            (lw_ids **)(void *)((char *)s->problem + lw_pack_ids[k].offset));
    return status;
}

/* A matrix whose arrays lie in the mapping. */
static lw_status map_matrix(const lw_pack_source *s, const char *name, lw_sparse **out)
{
    const lw_pack_section *index = lw_pack_get(s, name, ".index");
    const int64_t *shape = lw_pack_borrow(s, name, ".shape", 2, sizeof(int64_t));
    if (lw_pack_get(s, name, ".shape") == NULL) return LW_OK;
    if (shape == NULL || index == NULL || shape[0] < 0 || shape[1] < 0 || shape[0] > INT32_MAX ||
        shape[1] > INT32_MAX)
        return lw_pack_refuse_length(s, name, ".shape");
    uint64_t nonzeros = index->bytes / sizeof(int32_t);
    lw_sparse *A = LW_NEW(lw_sparse);
    if (A == NULL) return lw_fail_memory(s->error, "a matrix", sizeof(lw_sparse));
    *out = A;
    A->rows = shape[0];
    A->columns = shape[1];
    A->mapped = s->bytes;
    A->start =
        (int64_t *)(uintptr_t)lw_pack_borrow(s, name, ".start", (uint64_t)shape[1] + 1, sizeof(int64_t));
    A->index = (int32_t *)(uintptr_t)lw_pack_borrow(s, name, ".index", nonzeros, sizeof(int32_t));
    A->value = (double *)(uintptr_t)lw_pack_borrow(s, name, ".value", nonzeros, sizeof(double));
    A->low = (double *)(uintptr_t)lw_pack_borrow(s, name, ".low", nonzeros, sizeof(double));
    if (!A->start || !A->index || !A->value || (lw_pack_get(s, name, ".low") != NULL && !A->low) ||
        A->start[0] != 0 || A->start[A->columns] != (int64_t)nonzeros)
        return lw_pack_refuse_length(s, name, ".start");
    return LW_OK;
}

static lw_status read_matrices(lw_pack_source *s)
{
    lw_status status = LW_OK;
    for (int k = 0; k < LW_PACK_MATRICES && status == LW_OK; k++)
        status = map_matrix(s, lw_pack_matrices[k].name,
                            (lw_sparse **)(void *)((char *)s->problem + lw_pack_matrices[k].offset));
    if (status == LW_OK && s->problem->design == NULL) return lw_pack_refuse_length(s, "design", ".shape");
    return status;
}

static lw_status read_covariance(lw_pack_source *s)
{
    const lw_pack_section *start = lw_pack_get(s, "blocks", ".start");
    if (start == NULL) return LW_OK;
    lw_covariance *V = LW_NEW(lw_covariance);
    s->problem->covariance = V;
    if (V == NULL) return lw_fail_memory(s->error, "covariance blocks", sizeof(lw_covariance));
    int64_t count = (int64_t)(start->bytes / sizeof(int64_t));
    if (count < 2 || start->bytes % sizeof(int64_t) != 0) return lw_pack_refuse_length(s, "blocks", ".start");
    V->blocks = count - 1;
    lw_status status = lw_pack_copy(s, "blocks", ".start", count, sizeof(int64_t), false, &V->start);
    if (status == LW_OK)
        status = lw_pack_copy(s, "blocks", ".value_start", count, sizeof(int64_t), false, &V->value_start);
    if (status != LW_OK) return status;
    int64_t members = V->start[V->blocks], values = V->value_start[V->blocks];
    status = lw_pack_copy(s, "blocks", ".member", members, sizeof(int32_t), false, &V->member);
    if (status == LW_OK)
        status = lw_pack_copy(s, "blocks", ".value", values, sizeof(double), false, &V->value);
    if (status == LW_OK) status = lw_pack_copy(s, "blocks", ".low", values, sizeof(double), false, &V->low);
    if (status == LW_OK)
        status = lw_pack_copy(s, "blocks", ".block_of", s->sizes.m, sizeof(int32_t), false, &V->block_of);
    return status;
}

/* How many texts stand there, each with its NUL byte; -1 when the last one lacks it. */
static int64_t count_texts(const char *text, uint64_t bytes)
{
    int64_t count = 0;
    for (uint64_t k = 0; k < bytes; k++) count += text[k] == '\0';
    return bytes > 0 && text[bytes - 1] != '\0' ? -1 : count;
}

static bool fields_inside(const lw_carried *c, uint64_t bytes)
{
    for (int64_t f = 0; f < c->rows * c->columns; f++)
        if (c->field[f] < -1 || (c->field[f] >= 0 && (uint64_t)c->field[f] >= bytes)) return false;
    return true;
}

static lw_status read_carried(lw_pack_source *s, const char *name, int64_t rows, lw_carried *c)
{
    const lw_pack_section *names = lw_pack_get(s, name, ".name"), *text = lw_pack_get(s, name, ".text");
    c->rows = rows;
    if (names == NULL) return LW_OK;
    const char *at = lw_pack_data(s, names);
    int64_t columns = count_texts(at, names->bytes);
    if (columns < 1 || columns > 1000000 || text == NULL ||
        count_texts(lw_pack_data(s, text), text->bytes) < 0)
        return lw_pack_refuse_length(s, name, ".name");
    c->name = LW_NEW_ZEROS(char *, columns);
    if (c->name == NULL) return lw_fail_memory(s->error, "carried columns", (size_t)columns * sizeof(char *));
    for (c->columns = 0; c->columns < columns; c->columns++, at += strlen(at) + 1) {
        c->name[c->columns] = lw_copy_text(at);
        if (c->name[c->columns] == NULL) return lw_fail_memory(s->error, "carried columns", strlen(at));
    }
    lw_status status = lw_pack_copy(s, name, ".text", (int64_t)text->bytes, 1, false, &c->text);
    if (status == LW_OK)
        status = lw_pack_copy(s, name, ".field", lw_bytes(rows, columns), sizeof(int64_t), false, &c->field);
    if (status == LW_OK && !fields_inside(c, text->bytes)) return lw_pack_refuse_length(s, name, ".field");
    return status;
}

static lw_status read_inputs(lw_pack_source *s)
{
    const lw_pack_section *path = lw_pack_get(s, "inputs", ".path"), *units = lw_pack_get(s, "units", "");
    lw_problem *problem = s->problem;
    if (path == NULL || units == NULL || count_texts(lw_pack_data(s, units), units->bytes) != 2)
        return lw_pack_refuse_length(s, "units", "");
    const char *at = lw_pack_data(s, path), *unit = lw_pack_data(s, units);
    int64_t count = count_texts(at, path->bytes);
    const int64_t *bytes = lw_pack_borrow(s, "inputs", ".bytes", (uint64_t)count, sizeof(int64_t));
    const char *sha256 = lw_pack_borrow(s, "inputs", ".sha256", (uint64_t)count, 64);
    if (count < 0 || count > 1000 || bytes == NULL || sha256 == NULL)
        return lw_pack_refuse_length(s, "inputs", ".path");
    problem->value_unit = lw_copy_text(unit);
    problem->parameter_unit = lw_copy_text(unit + strlen(unit) + 1);
    problem->inputs = LW_NEW_ZEROS(lw_input_file, count);
    if (!problem->value_unit || !problem->parameter_unit || !problem->inputs)
        return lw_fail_memory(s->error, "the list of inputs", (size_t)path->bytes);
    for (int64_t k = 0; k < count; k++, at += strlen(at) + 1) {
        lw_input_file *file = problem->inputs + problem->input_count;
        file->path = lw_copy_text(at);
        if (file->path == NULL) return lw_fail_memory(s->error, "the list of inputs", strlen(at));
        file->bytes = bytes[k];
        memcpy(file->sha256, sha256 + 64 * k, 64);
        problem->input_count++;
    }
    return LW_OK;
}

static lw_status read_all(lw_pack_source *s, const lw_watch *watch)
{
    lw_status status = lw_pack_open(s, watch);
    if (status == LW_OK) status = read_sizes(s);
    if (status == LW_OK) status = read_ids(s);
    if (status == LW_OK) status = read_arrays(s);
    if (status == LW_OK) status = read_matrices(s);
    if (status == LW_OK) status = read_covariance(s);
    if (status == LW_OK)
        status = read_carried(s, lw_pack_carried[0].name, s->sizes.m, &s->problem->observation_carried);
    if (status == LW_OK)
        status = read_carried(s, lw_pack_carried[1].name, s->sizes.n, &s->problem->parameter_carried);
    if (status == LW_OK) status = read_inputs(s);
    return status == LW_OK ? lw_pack_check(s->problem, &s->sizes, s->path, s->error) : status;
}

/* Units named now stand; low parts that are not wanted are left out. */
static lw_status apply_options(lw_pack_source *s, const lw_read_options *options)
{
    lw_problem *problem = s->problem;
    const char *const unit[] = {options->value_unit, options->parameter_unit};
    char **const to[] = {&problem->value_unit, &problem->parameter_unit};
    for (int k = 0; k < 2; k++) {
        if (unit[k] == NULL) continue;
        lw_free(*to[k]);
        *to[k] = lw_copy_text(unit[k]);
        if (*to[k] == NULL) return lw_fail_memory(s->error, "a unit", strlen(unit[k]));
    }
    problem->low_kept = options->keep_low;
    if (!options->keep_low) problem->design->low = NULL; /* the arrays are the mapping's */
    if (!options->keep_low && problem->penalty != NULL) problem->penalty->low = NULL;
    const lw_carried *const carried[] = {&problem->observation_carried, &problem->parameter_carried};
    for (int k = 0; k < 2; k++)
        for (int c = 0; c < carried[k]->columns; c++)
            for (const char *const *name = options->reserved; name != NULL && *name != NULL; name++)
                if (strcmp(*name, carried[k]->name[c]) == 0)
                    return lw_fail(s->error, LW_BAD_INPUT,
                                   "%s: found a column '%s', expected another name: an output "
                                   "column has it",
                                   s->path, *name);
    return LW_OK;
}

lw_status lw_pack_read(const char *path, const lw_read_options *options, const lw_watch *watch,
                       lw_problem **out, lw_error *error)
{
    static const lw_read_options plain = {.keep_low = true};
    lw_pack_source s = {.path = path, .error = error};
    *out = NULL;
    s.problem = LW_NEW(lw_problem);
    if (s.problem == NULL) return lw_fail_memory(error, "a problem", sizeof(lw_problem));
    lw_status status = read_all(&s, watch);
    if (status == LW_OK) status = apply_options(&s, options != NULL ? options : &plain);
    if (status == LW_OK && (s.problem->folder = lw_copy_text(path)) == NULL)
        status = lw_fail_memory(error, "a path", strlen(path));
    if (status == LW_OK)
        *out = s.problem;
    else
        lw_problem_free(s.problem);
    return status;
}
