/*
 * Our case folding against the property NFKC_Casefold of each code point, from
 * DerivedNormalizationProps.txt of the Unicode Character Database (Debian package unicode-data). A
 * code point that the file does not list maps to itself. We stray in two places: the apostrophe
 * U+2019 becomes ', and the code points that are ignorable though not assigned stay.
 */
#include "daemon/text/fold.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "tests/reference/data_file.h"

static const char path[] = "/usr/share/unicode/DerivedNormalizationProps.txt";

enum {
    POINTS = 0x110000,
    TEXT_ROOM = 128,
    APOSTROPHE_TYPED = 0x2019
};

static void assert_folds_to(struct fold *fold, int32_t point, const char *expected, size_t bytes)
{
    char text[4];
    size_t length = (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)text);
    assert_int_equal(fold_text(fold, FOLD_CASE, text, length), 0);
    if (fold->bytes != bytes || memcmp(fold->text, expected, bytes) != 0) {
        fail_msg("U+%04X", (unsigned)point);
    }
}

/* "00C0..00C5 ; NFKC_CF; 0061 0300 # comment"; what stays unlisted must map to itself. */
static size_t check_line(struct fold *fold, const char *line, bool *is_listed)
{
    const char *property = strstr(line, "; NFKC_CF;");
    if (*line == '#' || !property) {
        return 0;
    }
    char expected[TEXT_ROOM];
    size_t bytes = data_points(property + strlen("; NFKC_CF;"), expected, sizeof expected);
    char *end = NULL;
    unsigned long first = strtoul(line, &end, 16);
    unsigned long last = strncmp(end, "..", 2) == 0 ? strtoul(end + 2, NULL, 16) : first;
    assert_true(first <= last && last < POINTS);
    for (unsigned long point = first; point <= last; point++) {
        if (bytes > 0 || utf8proc_category((int32_t)point) != UTF8PROC_CATEGORY_CN) {
            is_listed[point] = true;
            assert_folds_to(fold, (int32_t)point, expected, bytes);
        }
    }
    return last - first + 1;
}

static void every_code_point_folds_as_unicode_folds_it(void **state)
{
    (void)state;
    struct data_file file;
    struct fold fold = {0};
    char line[DATA_LINE_BYTES];
    size_t listed = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    bool *is_listed = calloc(POINTS, sizeof *is_listed);
    assert_non_null(is_listed);
    while (data_line(&file, line)) {
        listed += check_line(&fold, line, is_listed);
    }
    assert_true(data_close(&file));
    for (int32_t point = 1; point < POINTS; point++) {
        bool is_surrogate = point >= 0xd800 && point < 0xe000;
        if (!is_listed[point] && !is_surrogate && point != APOSTROPHE_TYPED) {
            char text[4];
            size_t bytes = (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)text);
            assert_folds_to(&fold, point, text, bytes);
        }
    }
    assert_folds_to(&fold, APOSTROPHE_TYPED, "'", 1);
    free(is_listed);
    fold_deinit(&fold);
    print_message("%zu listed code points agree, and all others\n", listed);
    assert_true(listed > 10000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_code_point_folds_as_unicode_folds_it),
    };
    return cmocka_run_group_tests_name("case folding against Unicode", tests, NULL, NULL);
}
