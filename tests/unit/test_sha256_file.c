/*
 * Sums of files. The digests are those of the examples that NIST publishes with FIPS 180 ("abc",
 * and a million times the letter a); that of no bytes is what `sha256sum /dev/null` of GNU
 * coreutils prints.
 */
#include "daemon/sha256_file.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include <cmocka.h>
#include <errno.h>

static int set_up(void **state)
{
    *state = tmpfile();
    return *state ? 0 : -1;
}

static int tear_down(void **state)
{
    return fclose(*state);
}

static void assert_sum(FILE *file, const char *expected, uint64_t expected_bytes)
{
    char text[SHA256_TEXT_BYTES];
    uint64_t bytes = UINT64_MAX;
    assert_int_equal(fflush(file), 0);
    assert_int_equal(sha256_file(fileno(file), text, &bytes), 0);
    assert_string_equal(text, expected);
    assert_int_equal(bytes, expected_bytes);
}

static void a_file_without_bytes_has_a_sum(void **state)
{
    assert_sum(*state, "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855", 0);
}

static void a_short_file_has_the_published_sum(void **state)
{
    assert_int_equal(fputs("abc", *state) >= 0, 1);
    assert_sum(*state, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad", 3);
}

/* More than one piece is read. */
static void a_long_file_has_the_published_sum(void **state)
{
    for (int i = 0; i < 1000000; i++) {
        assert_int_equal(fputc('a', *state), 'a');
    }
    assert_sum(*state, "cdc76e5c9914fb9281a1c7e284d73e67f1809a48a497200e046d39ccc7112cd0", 1000000);
}

static void the_place_in_the_file_makes_no_difference_and_stays(void **state)
{
    assert_int_equal(fputs("abc", *state) >= 0, 1);
    assert_int_equal(fflush(*state), 0);
    assert_int_equal(lseek(fileno(*state), 2, SEEK_SET), 2);
    assert_sum(*state, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad", 3);
    assert_int_equal(lseek(fileno(*state), 0, SEEK_CUR), 2);
}

static void what_cannot_be_read_is_told(void **state)
{
    (void)state;
    char text[SHA256_TEXT_BYTES] = "as it was";
    uint64_t bytes = 7;
    assert_int_equal(sha256_file(-1, text, &bytes), -EBADF);
    assert_string_equal(text, "as it was");
    assert_int_equal(bytes, 7);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_file_without_bytes_has_a_sum),
        TEST(a_short_file_has_the_published_sum),
        TEST(a_long_file_has_the_published_sum),
        TEST(the_place_in_the_file_makes_no_difference_and_stays),
        TEST(what_cannot_be_read_is_told),
    };
    return cmocka_run_group_tests_name("sha256_file", tests, NULL, NULL);
}
