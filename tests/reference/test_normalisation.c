/*
 * Our NFKC against Unicode's own: NormalizationTest.txt of the Unicode Character Database (Debian
 * package unicode-data), for Unicode Standard Annex #15. Its rules for NFKC:
 *   column 4 is the NFKC of each of the columns 1 to 5;
 *   a code point that part 1 does not list is its own NFKC.
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

static const char path[] = "/usr/share/unicode/NormalizationTest.txt";

enum {
    COLUMNS = 5,
    NFKC_COLUMN = 3,
    TEXT_ROOM = 256,
    POINTS = 0x110000,
    FEWEST_CASES = 15000
};

struct column {
    char text[TEXT_ROOM];
    size_t bytes;
};

/* "1E0A;1E0A;0044 0307;1E0A;0044 0307; # comment"; false where the line has no case. */
static bool parse_case(const char *line, struct column columns[COLUMNS])
{
    if (*line == '#' || *line == '@' || *line == '\0') {
        return false;
    }
    for (size_t i = 0; i < COLUMNS; i++) {
        columns[i].bytes = data_points(line, columns[i].text, TEXT_ROOM);
        assert_true(columns[i].bytes > 0 && columns[i].bytes < TEXT_ROOM - 4);
        line = strchr(line, ';');
        assert_non_null(line);
        line++;
    }
    return true;
}

static bool is_nfkc_of(struct fold *fold, const struct column *source, const struct column *nfkc)
{
    assert_int_equal(fold_text(fold, FOLD_NFKC, source->text, source->bytes), 0);
    return fold->bytes == nfkc->bytes && memcmp(fold->text, nfkc->text, nfkc->bytes) == 0;
}

static void every_case_of_unicode_gives_its_nfkc(void **state)
{
    (void)state;
    struct data_file file;
    struct fold fold = {0};
    struct column columns[COLUMNS];
    char line[DATA_LINE_BYTES];
    size_t cases = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    while (data_line(&file, line)) {
        if (!parse_case(line, columns)) {
            continue;
        }
        cases++;
        for (size_t i = 0; i < COLUMNS; i++) {
            if (!is_nfkc_of(&fold, &columns[i], &columns[NFKC_COLUMN])) {
                fail_msg("column %zu of %s", i + 1, line);
            }
        }
    }
    assert_true(data_close(&file));
    fold_deinit(&fold);
    print_message("%zu cases agree\n", cases);
    assert_true(cases >= FEWEST_CASES);
}

/* Marks the single code points in column 1 of part 1. */
static void mark_listed(struct data_file *file, bool *is_listed)
{
    char line[DATA_LINE_BYTES];
    bool in_part_1 = false;
    while (data_line(file, line)) {
        if (*line == '@') {
            in_part_1 = strncmp(line, "@Part1 ", 7) == 0;
        } else if (in_part_1 && *line != '#') {
            unsigned long point = strtoul(line, NULL, 16);
            assert_true(point < POINTS);
            is_listed[point] = true;
        }
    }
}

static void every_other_code_point_is_its_own_nfkc(void **state)
{
    (void)state;
    struct data_file file;
    struct fold fold = {0};
    size_t others = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    bool *is_listed = calloc(POINTS, sizeof *is_listed);
    assert_non_null(is_listed);
    mark_listed(&file, is_listed);
    assert_true(data_close(&file));
    for (int32_t point = 1; point < POINTS; point++) {
        if (is_listed[point] || (point >= 0xd800 && point < 0xe000)) {
            continue;
        }
        struct column column = {{0}, 0};
        column.bytes = (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)column.text);
        others++;
        if (!is_nfkc_of(&fold, &column, &column)) {
            fail_msg("U+%04X", (unsigned)point);
        }
    }
    free(is_listed);
    fold_deinit(&fold);
    print_message("%zu other code points agree\n", others);
    assert_true(others > 1000000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_case_of_unicode_gives_its_nfkc),
        cmocka_unit_test(every_other_code_point_is_its_own_nfkc),
    };
    return cmocka_run_group_tests_name("NFKC against Unicode", tests, NULL, NULL);
}
