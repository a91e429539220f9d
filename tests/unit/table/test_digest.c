/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "table/digest.h"

#include "check_table.h"

#include <string.h>

/* FIPS 180-4 examples: "abc" and the empty message. */
START_TEST(digests_of_the_standard)
{
    lw_digest *digest;
    char hex[65];
    ck_assert_int_eq(lw_digest_new(&digest, NULL), LW_OK);
    lw_digest_hex(digest, hex);
    ck_assert_str_eq(hex, "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
    lw_digest_add(digest, "ab", 2);
    lw_digest_hex(digest, hex);
    lw_digest_add(digest, "c", 1);
    lw_digest_hex(digest, hex);
    ck_assert_str_eq(hex, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    lw_digest_free(digest);
    lw_digest_free(NULL);
}
END_TEST

START_TEST(hashes_tell_texts_apart)
{
    char text[] = "t12345";
    uint64_t hash = lw_hash(text, 6);
    ck_assert(hash == lw_hash("t12345", 6));
    for (int i = 0; i < 6; i++) {
        text[i]++;
        ck_assert(hash != lw_hash(text, 6));
        text[i]--;
    }
    ck_assert(hash != lw_hash(text, 5));
}
END_TEST

Suite *suite_digest(void)
{
    Suite *suite = suite_create("digest");
    TCase *cases = tcase_create("digest");
    tcase_add_test(cases, digests_of_the_standard);
    tcase_add_test(cases, hashes_tell_texts_apart);
    suite_add_tcase(suite, cases);
    return suite;
}
