/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/folder.h"

#include <check.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static char top[64];

static void setup(void)
{
    strcpy(top, "folder-test-XXXXXX");
    ck_assert_ptr_nonnull(mkdtemp(top));
}

static void teardown(void)
{
    char command[128];
    snprintf(command, sizeof command, "rm -rf %s", top);
    ck_assert_int_eq(system(command), 0);
}

static void put(const char *path)
{
    FILE *file = fopen(path, "w");
    ck_assert_ptr_nonnull(file);
    fputs("x\n", file);
    fclose(file);
}

static int exists(const char *name)
{
    char path[128];
    snprintf(path, sizeof path, "%s/%s", top, name);
    return access(path, F_OK) == 0;
}

static int entries(void)
{
    char command[128];
    snprintf(command, sizeof command, "exit $(ls -A %s | wc -l)", top);
    return WEXITSTATUS(system(command));
}

static lw_status begin(const char *name, bool overwrite, lw_folder **folder, lw_error *error)
{
    char path[128];
    snprintf(path, sizeof path, "%s/%s", top, name);
    return lw_folder_begin(path, overwrite, folder, error);
}

START_TEST(appears_when_committed)
{
    lw_folder *folder;
    lw_error error = {0};
    ck_assert_int_eq(begin("run///", false, &folder, &error), LW_OK);
    put(lw_folder_file(folder, "summary.json"));
    ck_assert(!exists("run"));
    ck_assert_int_eq(lw_folder_commit(folder, &error), LW_OK);
    ck_assert(exists("run/summary.json"));
    ck_assert_int_eq(entries(), 1);
}
END_TEST

START_TEST(leaves_nothing_when_abandoned)
{
    lw_folder *folder;
    lw_error error = {0};
    ck_assert_int_eq(begin("run", false, &folder, &error), LW_OK);
    put(lw_folder_file(folder, "parameters.csv"));
    lw_folder_abandon(folder);
    ck_assert_int_eq(entries(), 0);
}
END_TEST

START_TEST(refuses_to_replace_without_overwrite)
{
    lw_folder *folder;
    lw_error error = {0};
    ck_assert_int_eq(begin("run", false, &folder, &error), LW_OK);
    put(lw_folder_file(folder, "summary.json"));
    ck_assert_int_eq(lw_folder_commit(folder, &error), LW_OK);
    ck_assert_int_eq(begin("run", false, &folder, &error), LW_BAD_USAGE);
    ck_assert_ptr_null(folder);
    ck_assert_ptr_nonnull(strstr(error.text, "--overwrite"));
    ck_assert_int_eq(begin("run", true, &folder, &error), LW_OK);
    put(lw_folder_file(folder, "report.html"));
    ck_assert(exists("run/summary.json"));
    ck_assert_int_eq(lw_folder_commit(folder, &error), LW_OK);
    ck_assert(exists("run/report.html"));
    ck_assert(!exists("run/summary.json"));
    ck_assert_int_eq(entries(), 1);
}
END_TEST

START_TEST(leaves_folders_alone_that_are_no_run)
{
    lw_folder *folder;
    lw_error error = {0};
    char path[128];
    snprintf(path, sizeof path, "%s/photos", top);
    ck_assert_int_eq(mkdir(path, 0777), 0);
    snprintf(path, sizeof path, "%s/photos/a", top);
    put(path);
    ck_assert_int_eq(begin("photos", true, &folder, &error), LW_BAD_USAGE);
    ck_assert(exists("photos/a"));
    ck_assert_int_eq(begin("photos/a", true, &folder, &error), LW_BAD_USAGE);
}
END_TEST

START_TEST(says_when_the_place_is_missing)
{
    lw_folder *folder;
    lw_error error = {0};
    ck_assert_int_eq(begin("no/such/run", false, &folder, &error), LW_SYSTEM);
    ck_assert_ptr_nonnull(strstr(error.text, "no/such"));
}
END_TEST

Suite *suite_folder(void);
Suite *suite_folder(void)
{
    Suite *suite = suite_create("run/folder");
    TCase *each = tcase_create("folder");
    tcase_add_checked_fixture(each, setup, teardown);
    tcase_add_test(each, appears_when_committed);
    tcase_add_test(each, leaves_nothing_when_abandoned);
    tcase_add_test(each, refuses_to_replace_without_overwrite);
    tcase_add_test(each, leaves_folders_alone_that_are_no_run);
    tcase_add_test(each, says_when_the_place_is_missing);
    suite_add_tcase(suite, each);
    return suite;
}
