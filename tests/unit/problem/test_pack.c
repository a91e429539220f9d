/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "check_problem.h"
#include "folder.h"

#include "core/memory.h"
#include "core/watch.h"
#include "problem/pack.h"
#include "problem/pack_file.h"
#include "table/digest.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static folder at, packed;
static lw_problem *original;

static void setup(void)
{
    at = folder_small();
    packed = folder_new();
    folder_put(
        &at, "observations.csv",
        "observation,value,sigma,group,note\na,1,0.1,g,n1\nb,3,0.1,h,\nc,2.1,0.1,g,\nd,2.2,0.2,g,n4\n");
    folder_put(
        &at, "parameters.csv",
        "parameter,prior,prior_sigma,lower,upper,fixed,damp_weight,datum,point,axis,region,x,y,z,site\n"
        "y,0.1,0.5,-1,2,,,yes,P,east,r1,1,2,,f\nx,,,,,,,no,P,north,,,,-5,\nw,7,,8,,3.3,4,,Q,up,r2,0,0,0,q\n");
    folder_put(&at, "covariance.csv", "observation_a,observation_b,covariance\nd,a,0.005\nc,b,-0.001\n");
    folder_put(&at, "penalty.csv", "row,parameter,coefficient\nr,x,0.1\nr,y,-1\n");
    folder_put(&at, "conditions.csv", "condition,parameter,coefficient,value\nk,x,1,0.3\nk,w,0.7,\n");
    lw_read_options options = {.keep_low = true, .value_unit = "mm"};
    original = folder_read(&at, &options);
    lw_error error = {0};
    ck_assert_msg(lw_pack_write(original, packed.path, NULL, &error) == LW_OK, "%s", error.text);
}

static void teardown(void)
{
    lw_problem_free(original);
    folder_remove(&at);
    folder_remove(&packed);
}

static void same_matrix(const lw_sparse *A, const lw_sparse *B)
{
    size_t nonzeros = (size_t)lw_sparse_nonzeros(A);
    ck_assert_int_eq(A->rows, B->rows);
    ck_assert_int_eq(A->columns, B->columns);
    ck_assert_mem_eq(A->start, B->start, (size_t)(A->columns + 1) * sizeof(int64_t));
    ck_assert_mem_eq(A->index, B->index, nonzeros * sizeof(int32_t));
    ck_assert_mem_eq(A->value, B->value, nonzeros * sizeof(double));
    ck_assert_int_eq(A->low == NULL, B->low == NULL);
    if (A->low != NULL) ck_assert_mem_eq(A->low, B->low, nonzeros * sizeof(double));
}

static void same_problem(const lw_problem *p, const lw_problem *q)
{
    lw_pack_sizes sizes = {p->m, p->n, p->conditions->rows, 0};
    ck_assert_int_eq(q->m, p->m);
    ck_assert_int_eq(q->n, p->n);
    for (int k = 0; k < lw_pack_array_count; k++) {
        const lw_pack_array *a = lw_pack_arrays + k;
        const void *x = lw_pack_pointer(p, a->offset), *y = lw_pack_pointer(q, a->offset);
        ck_assert_msg(x != NULL && y != NULL, "%s", a->name);
        ck_assert_mem_eq(x, y, (size_t)lw_pack_count(a->length, &sizes) * lw_pack_element(a->rule));
    }
    for (int k = 0; k < LW_PACK_IDS; k++) {
        const lw_ids *x = lw_pack_pointer(p, lw_pack_ids[k].offset),
                     *y = lw_pack_pointer(q, lw_pack_ids[k].offset);
        ck_assert_int_eq(lw_ids_count(x), lw_ids_count(y));
        for (int64_t i = 0; i < lw_ids_count(x); i++) ck_assert_str_eq(lw_ids_name(x, i), lw_ids_name(y, i));
    }
    for (int k = 0; k < LW_PACK_MATRICES; k++)
        same_matrix(lw_pack_pointer(p, lw_pack_matrices[k].offset),
                    lw_pack_pointer(q, lw_pack_matrices[k].offset));
    ck_assert_int_eq(q->covariance->blocks, 2);
    ck_assert_mem_eq(p->covariance->value, q->covariance->value, 8 * sizeof(double));
    ck_assert_mem_eq(p->covariance->low, q->covariance->low, 8 * sizeof(double));
    ck_assert_int_eq(q->input_count, p->input_count);
    for (int k = 0; k < p->input_count; k++) {
        ck_assert_str_eq(p->inputs[k].path, q->inputs[k].path);
        ck_assert_str_eq(p->inputs[k].sha256, q->inputs[k].sha256);
        ck_assert_int_eq(p->inputs[k].bytes, q->inputs[k].bytes);
    }
    for (int64_t i = 0; i < p->m; i++)
        ck_assert_str_eq(lw_carried_text(&p->observation_carried, i, 0),
                         lw_carried_text(&q->observation_carried, i, 0));
    ck_assert_str_eq(q->parameter_carried.name[0], "site");
    ck_assert_str_eq(lw_carried_text(&q->parameter_carried, 2, 0), "q");
    ck_assert_str_eq(p->value_unit, q->value_unit);
}

START_TEST(everything_comes_back)
{
    lw_problem *back = folder_read(&packed, NULL);
    same_problem(original, back);
    ck_assert(back->low_kept);
    ck_assert_ptr_nonnull(back->design->mapped);
    ck_assert_str_eq(back->folder, packed.path);
    lw_problem_free(back);
}
END_TEST

START_TEST(the_file_itself_is_taken_too)
{
    lw_problem *back;
    lw_read_options options = {.keep_low = false, .value_unit = "m"};
    ck_assert_int_eq(lw_problem_read(folder_file(&packed, LW_PACK_NAME), &options, NULL, &back, NULL), LW_OK);
    ck_assert_ptr_null(back->design->low);
    ck_assert(!back->low_kept);
    ck_assert_ptr_nonnull(back->conditions->low);
    ck_assert_str_eq(back->value_unit, "m");
    lw_problem_free(back);
}
END_TEST

START_TEST(packing_twice_gives_the_same_bytes)
{
    size_t first, second;
    char *a = folder_get(&packed, LW_PACK_NAME, &first);
    lw_problem *back = folder_read(&packed, NULL);
    ck_assert_int_eq(lw_pack_write(back, packed.path, NULL, NULL), LW_OK); /* over the file that is mapped */
    lw_problem_free(back);
    char *b = folder_get(&packed, LW_PACK_NAME, &second);
    ck_assert_uint_eq(first, second);
    ck_assert_mem_eq(a, b, first);
    free(a);
    free(b);
}
END_TEST

START_TEST(an_old_pack_is_left_aside)
{
    lw_log warnings = {0};
    lw_watch watch = {.log = &warnings};
    lw_read_options options = {.keep_low = true};
    lw_problem *back;
    ck_assert_int_eq(lw_pack_write(original, at.path, NULL, NULL), LW_OK);
    ck_assert_int_eq(lw_problem_read(at.path, &options, &watch, &back, NULL), LW_OK);
    ck_assert_ptr_nonnull(back->mapping);
    lw_problem_free(back);
    folder_put(&at, "penalty.csv", "row,parameter,coefficient\nr,x,0.1\nr,y,-2.5\n");
    ck_assert_int_eq(lw_problem_read(at.path, &options, &watch, &back, NULL), LW_OK);
    ck_assert_ptr_null(back->mapping);
    ck_assert_double_eq(back->penalty->value[0], -2.5);
    ck_assert_uint_eq(warnings.count, 1);
    lw_problem_free(back);
    lw_log_clear(&warnings);
}
END_TEST

/* Every single byte changed, and every length: refused, or of no consequence (padding). */
START_TEST(damage_is_found)
{
    size_t length;
    char *bytes = folder_get(&packed, LW_PACK_NAME, &length);
    static lw_error error;
    lw_problem *back;
    lw_read_options options = {.keep_low = true};
    for (size_t k = 0; k < length; k += 7) {
        bytes[k] ^= 0x41;
        folder_put_bytes(&packed, LW_PACK_NAME, bytes, length);
        lw_status status = lw_problem_read(packed.path, &options, NULL, &back, &error);
        ck_assert(status == LW_OK || status == LW_BAD_INPUT);
        if (status == LW_BAD_INPUT) ck_assert_ptr_nonnull(strstr(error.text, ": found "));
        if (status == LW_OK) same_problem(original, back);
        lw_problem_free(back);
        bytes[k] ^= 0x41;
    }
    for (size_t k = 0; k < length; k += 13) {
        folder_put_bytes(&packed, LW_PACK_NAME, bytes, k);
        ck_assert_int_eq(lw_problem_read(packed.path, &options, NULL, &back, &error), LW_BAD_INPUT);
    }
    free(bytes);
}
END_TEST

/* Checksums made to fit: every 8 bytes of every section set to numbers that break ranges. No crash; what is
 * accepted can be freed. */
START_TEST(forgery_does_not_crash)
{
    static const int64_t poison[] = {-1, INT64_MAX,         INT64_MIN, 0x7ff8000000000000, 0x7ff0000000000000,
                                     1,  0x0101010101010101};
    size_t length;
    char *bytes = folder_get(&packed, LW_PACK_NAME, &length);
    char *forged = malloc(length);
    lw_pack_header header;
    lw_read_options options = {.keep_low = true};
    memcpy(&header, bytes, sizeof header);
    for (uint64_t s = 0; s < header.sections; s++) {
        lw_pack_section section;
        memcpy(&section, bytes + sizeof header + s * sizeof section, sizeof section);
        for (uint64_t k = 0; k + 8 <= section.bytes; k += 8)
            for (int v = 0; v < 7; v++) {
                lw_problem *back;
                memcpy(forged, bytes, length);
                memcpy(forged + section.offset + k, poison + v, 8);
                section.hash = lw_hash(forged + section.offset, section.bytes);
                memcpy(forged + sizeof header + s * sizeof section, &section, sizeof section);
                lw_pack_section *table = malloc((size_t)header.sections * sizeof section);
                memcpy(table, forged + sizeof header, (size_t)header.sections * sizeof section);
                header.hash = lw_pack_hash(&header, table);
                memcpy(forged, &header, sizeof header);
                free(table);
                folder_put_bytes(&packed, LW_PACK_NAME, forged, length);
                lw_status status = lw_problem_read(packed.path, &options, NULL, &back, NULL);
                ck_assert(status == LW_OK || status == LW_BAD_INPUT);
                lw_problem_free(back);
            }
    }
    free(bytes);
    free(forged);
}
END_TEST

START_TEST(foreign_files)
{
    static const char *const message[] = {"problem.lwpack: found 0 bytes, expected a pack of 64 or more",
                                          "problem.lwpack: found another kind of file, expected a pack",
                                          "problem.lwpack: found a pack of version 9, expected version 1"};
    char bytes[128] = {0};
    folder_put_bytes(&packed, LW_PACK_NAME, bytes, 0);
    ck_assert_str_eq(folder_refused(&packed, NULL), message[0]);
    memset(bytes, 'x', sizeof bytes);
    folder_put_bytes(&packed, LW_PACK_NAME, bytes, sizeof bytes);
    ck_assert_str_eq(folder_refused(&packed, NULL), message[1]);
    lw_pack_header header = {.version = 9, .order = LW_PACK_ORDER};
    memcpy(header.magic, LW_PACK_MAGIC, 8);
    memcpy(bytes, &header, sizeof header);
    folder_put_bytes(&packed, LW_PACK_NAME, bytes, sizeof bytes);
    ck_assert_str_eq(folder_refused(&packed, NULL), message[2]);
}
END_TEST

START_TEST(nothing_is_left_behind_on_failure)
{
    lw_error error = {0};
    const char *below = folder_file(&packed, "below");
    volatile sig_atomic_t cancel = 1;
    lw_watch watch = {.cancel = &cancel};
    ck_assert_int_eq(lw_pack_write(original, below, &watch, &error), LW_INTERRUPTED);
    struct stat about;
    ck_assert_int_ne(stat(folder_file(&packed, "below"), &about), 0);
    ck_assert_int_eq(lw_pack_write(original, "no/such/place", NULL, &error), LW_SYSTEM);
    original->low_kept = false;
    ck_assert_int_eq(lw_pack_write(original, packed.path, NULL, &error), LW_BAD_USAGE);
}
END_TEST

static bool fail_at(void *state)
{
    int *left = state;
    return (*left)-- == 0;
}

/* Every allocation of writing and of reading in turn fails: said, and nothing is left. */
START_TEST(failing_allocations)
{
    for (int reading = 0; reading < 2; reading++) {
        lw_status status = LW_NO_MEMORY;
        lw_problem *back = NULL;
        int k = 0;
        for (; status == LW_NO_MEMORY && k < 1000; k++) {
            int left = k;
            lw_memory_set_gate(fail_at, &left);
            status = reading ? lw_problem_read(packed.path, NULL, NULL, &back, NULL)
                             : lw_pack_write(original, packed.path, NULL, NULL);
            lw_memory_set_gate(NULL, NULL);
            ck_assert(status == LW_OK || status == LW_NO_MEMORY);
            ck_assert(back == NULL || status == LW_OK);
        }
        ck_assert_int_gt(k, 5);
        if (reading) same_problem(original, back);
        lw_problem_free(back);
    }
}
END_TEST

Suite *suite_pack(void)
{
    Suite *suite = suite_create("pack");
    TCase *tests = tcase_create("pack");
    tcase_set_timeout(tests, 60);
    tcase_add_checked_fixture(tests, setup, teardown);
    tcase_add_test(tests, everything_comes_back);
    tcase_add_test(tests, the_file_itself_is_taken_too);
    tcase_add_test(tests, packing_twice_gives_the_same_bytes);
    tcase_add_test(tests, an_old_pack_is_left_aside);
    tcase_add_test(tests, damage_is_found);
    tcase_add_test(tests, forgery_does_not_crash);
    tcase_add_test(tests, foreign_files);
    tcase_add_test(tests, failing_allocations);
    tcase_add_test(tests, nothing_is_left_behind_on_failure);
    suite_add_tcase(suite, tests);
    return suite;
}
