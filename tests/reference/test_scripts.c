/*
 * Which characters are counted in pairs, against Scripts.txt of the Unicode Character Database
 * (Debian package unicode-data): the letters and numbers of Han, Hiragana and Katakana, and the few
 * between them that Unicode calls Common.
 */
#include "daemon/text/script.h"

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

static const char path[] = "/usr/share/unicode/Scripts.txt";

/* Common, yet written within these scripts alone: ScriptExtensions.txt says Hira, Kana or Hani. */
static bool is_shared_mark(unsigned long point)
{
    return point == 0x3006 || (point >= 0x3031 && point <= 0x3035) || point == 0x30fc ||
           point == 0xff70;
}

/* "3041..3096 ; Hiragana # Lo [86] …"; returns how many code points of ours the line has. */
static size_t check_line(const char *line)
{
    const char *script = strchr(line, ';');
    const char *category = strchr(line, '#');
    if (*line == '#' || !script || !category) {
        return 0;
    }
    script += strspn(script, "; ");
    category += strspn(category, "# ");
    bool is_ours = strncmp(script, "Han ", 4) == 0 || strncmp(script, "Hiragana ", 9) == 0 ||
                   strncmp(script, "Katakana ", 9) == 0;
    bool is_letter_or_number = *category == 'L' || *category == 'N';
    if (!is_letter_or_number) {
        return 0;
    }
    char *end = NULL;
    unsigned long first = strtoul(line, &end, 16);
    unsigned long last = strncmp(end, "..", 2) == 0 ? strtoul(end + 2, NULL, 16) : first;
    for (unsigned long point = first; point <= last; point++) {
        if (script_in_pairs((int32_t)point) != (is_ours || is_shared_mark(point))) {
            fail_msg("U+%04lX: %s", point, line);
        }
        if (!script_in_word((int32_t)point)) {
            fail_msg("U+%04lX is no letter or number: %s", point, line);
        }
    }
    return is_ours ? last - first + 1 : 0;
}

static void the_letters_of_three_scripts_and_no_others_are_counted_in_pairs(void **state)
{
    (void)state;
    struct data_file file;
    char line[DATA_LINE_BYTES];
    size_t ours = 0;
    if (!data_open(&file, path, "unicode-data")) {
        skip();
    }
    while (data_line(&file, line)) {
        ours += check_line(line);
    }
    assert_true(data_close(&file));
    print_message("%zu letters of Han, Hiragana and Katakana\n", ours);
    assert_true(ours > 90000);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_letters_of_three_scripts_and_no_others_are_counted_in_pairs),
    };
    return cmocka_run_group_tests_name("scripts against Unicode", tests, NULL, NULL);
}
