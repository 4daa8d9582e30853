/*
 * Our word boundaries against Unicode's own: auxiliary/WordBreakTest.txt of the Unicode Character
 * Database (Debian package unicode-data), for Unicode Standard Annex #29.
 */
#include "daemon/text/boundaries.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

#include "tests/reference/data_file.h"

static const char path[] = "/usr/share/unicode/auxiliary/WordBreakTest.txt";

enum {
    TEXT_ROOM = 256,
    FEWEST_CASES = 1000
};

struct test_case {
    char text[TEXT_ROOM];
    size_t bytes;
    char is_boundary[TEXT_ROOM]; /* as the file has it; at 0 it means nothing */
    bool is_ascii;
};

/* "÷ 0061 × 0308 ÷ # comment"; false where the line has no case. */
static bool parse_case(const char *line, struct test_case *test_case)
{
    static const char boundary[] = "÷";
    static const char no_boundary[] = "×";
    memset(test_case, 0, sizeof *test_case);
    test_case->is_ascii = true;
    bool is_boundary = false;
    for (const char *at = line; *at && *at != '#';) {
        if (strncmp(at, boundary, strlen(boundary)) == 0) {
            is_boundary = true;
            at += strlen(boundary);
        } else if (strncmp(at, no_boundary, strlen(no_boundary)) == 0) {
            is_boundary = false;
            at += strlen(no_boundary);
        } else if (*at == ' ' || *at == '\t') {
            at++;
        } else {
            size_t length = strcspn(at, " \t");
            size_t bytes = data_points(at, test_case->text + test_case->bytes, 4);
            assert_true(bytes > 0 && test_case->bytes + bytes + 4 < TEXT_ROOM);
            test_case->is_boundary[test_case->bytes] = is_boundary ? 1 : 0;
            test_case->is_ascii = test_case->is_ascii && bytes == 1;
            test_case->bytes += bytes;
            at += length;
        }
    }
    return test_case->bytes > 0;
}

static bool full_rules_agree(const struct test_case *test_case)
{
    char is_boundary[TEXT_ROOM];
    boundaries_find(test_case->text, test_case->bytes, is_boundary);
    for (size_t i = 1; i < test_case->bytes; i++) {
        if ((is_boundary[i] != 0) != (test_case->is_boundary[i] != 0)) {
            return false;
        }
    }
    return true;
}

static bool ascii_rules_agree(const struct test_case *test_case)
{
    size_t end = boundaries_ascii_end(test_case->text, test_case->bytes, 0);
    for (size_t i = 1; i < test_case->bytes; i++) {
        if ((end == i) != (test_case->is_boundary[i] != 0)) {
            return false;
        }
        if (end == i) {
            end = boundaries_ascii_end(test_case->text, test_case->bytes, i);
        }
    }
    return end == test_case->bytes;
}

static void every_case_of_unicode_is_cut_as_unicode_cuts_it(void **state)
{
    (void)state;
    struct data_file file;
    char line[DATA_LINE_BYTES];
    struct test_case test_case;
    size_t cases = 0;
    size_t agreed = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    while (data_line(&file, line)) {
        if (parse_case(line, &test_case)) {
            bool agrees = full_rules_agree(&test_case);
            cases++;
            agreed += agrees;
            if (!agrees) {
                print_error("cut otherwise: %s\n", line);
            }
        }
    }
    assert_true(data_close(&file));
    print_message("%zu of %zu cases agree\n", agreed, cases);
    assert_true(cases >= FEWEST_CASES);
    assert_int_equal(agreed, cases);
}

static void its_ascii_cases_are_cut_alike_by_the_short_rules(void **state)
{
    (void)state;
    struct data_file file;
    char line[DATA_LINE_BYTES];
    struct test_case test_case;
    size_t cases = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    while (data_line(&file, line)) {
        if (parse_case(line, &test_case) && test_case.is_ascii) {
            cases++;
            if (!ascii_rules_agree(&test_case)) {
                fail_msg("cut otherwise: %s", line);
            }
        }
    }
    assert_true(data_close(&file));
    print_message("%zu cases of ASCII agree\n", cases);
    assert_true(cases > 100);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_case_of_unicode_is_cut_as_unicode_cuts_it),
        cmocka_unit_test(its_ascii_cases_are_cut_alike_by_the_short_rules),
    };
    return cmocka_run_group_tests_name("word boundaries against Unicode", tests, NULL, NULL);
}
