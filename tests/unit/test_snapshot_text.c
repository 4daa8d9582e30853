/* text.json says of every code point what the words are cut and folded by. */
#include "daemon/snapshot/snapshot_text.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "daemon/text/boundaries.h"
#include "daemon/text/fold.h"
#include "daemon/text/script.h"

enum {
    POINTS = 0x110000,
    SURROGATES_FIRST = 0xd800,
    SURROGATES_END = 0xe000
};

static int set_up(void **state)
{
    const struct features_settings settings = {
        .words = {.stemming = true, .pairs = false, .language = "de"}, .title_weight = 2.5};
    *state = snapshot_text_json(&settings, 1868);
    return *state ? 0 : -1;
}

static int tear_down(void **state)
{
    json_decref(*state);
    return 0;
}

static const json_t *words_of(void **state)
{
    return json_object_get(*state, "words");
}

/* Marks the code points of ranges; they rise and do not touch. */
static void mark_ranges(const json_t *ranges, bool *marks)
{
    json_int_t before = -2;
    assert_true(json_array_size(ranges) > 0);
    for (size_t i = 0; i < json_array_size(ranges); i++) {
        const json_t *range = json_array_get(ranges, i);
        json_int_t first = json_integer_value(json_array_get(range, 0));
        json_int_t last = json_integer_value(json_array_get(range, 1));
        assert_int_equal(json_array_size(range), 2);
        assert_true(before + 1 < first && first <= last && last < POINTS);
        memset(marks + first, true, (size_t)(last - first + 1));
        before = last;
    }
}

static void assert_ranges(const json_t *ranges, bool (*has)(int32_t point))
{
    bool *marks = calloc(POINTS, sizeof *marks);
    assert_non_null(marks);
    mark_ranges(ranges, marks);
    for (int32_t point = 0; point < POINTS; point++) {
        bool is_surrogate = point >= SURROGATES_FIRST && point < SURROGATES_END;
        if (!is_surrogate && marks[point] != has(point)) {
            fail_msg("U+%04X", (unsigned)point);
        }
    }
    free(marks);
}

static void it_says_what_makes_a_word(void **state)
{
    assert_ranges(json_object_get(words_of(state), "in_word"), script_in_word);
}

static void it_says_what_is_counted_in_pairs(void **state)
{
    assert_ranges(json_object_get(words_of(state), "in_pairs"), script_in_pairs);
}

static void it_says_what_folding_leaves_out(void **state)
{
    const json_t *fold = json_object_get(words_of(state), "fold");
    assert_ranges(json_object_get(fold, "ignored"), fold_ignores);
}

static void it_says_which_pictures_a_joiner_joins(void **state)
{
    assert_ranges(json_object_get(words_of(state), "extended_pictographic"),
                  boundaries_is_pictographic);
}

static bool is_letter(int32_t point)
{
    return strcmp(boundaries_property(point), "ALetter") == 0;
}

static bool is_extending(int32_t point)
{
    return strcmp(boundaries_property(point), "Extend") == 0;
}

static bool has_property(int32_t point)
{
    return strcmp(boundaries_property(point), "Other") != 0;
}

static void it_says_how_each_code_point_breaks_words(void **state)
{
    const json_t *word_break = json_object_get(words_of(state), "word_break");
    assert_ranges(json_object_get(word_break, "ALetter"), is_letter);
    assert_ranges(json_object_get(word_break, "Extend"), is_extending);
}

static void no_code_point_that_breaks_words_is_left_out_or_there_twice(void **state)
{
    json_t *word_break = json_object_get(words_of(state), "word_break");
    const char *name = NULL;
    const json_t *ranges = NULL;
    size_t listed = 0;
    size_t wanted = 0;
    json_object_foreach(word_break, name, ranges)
    {
        for (size_t i = 0; i < json_array_size(ranges); i++) {
            const json_t *range = json_array_get(ranges, i);
            listed += (size_t)(json_integer_value(json_array_get(range, 1)) -
                               json_integer_value(json_array_get(range, 0)) + 1);
        }
    }
    for (int32_t point = 0; point < POINTS; point++) {
        wanted += has_property(point);
    }
    assert_int_equal(listed, wanted);
    assert_null(json_object_get(word_break, "Other"));
}

/* WordBreakProperty.txt: "0027 ; Single_Quote", "2019 ; MidNumLet", "05D0..05EA ; Hebrew_Letter".
 */
static void properties_have_the_names_of_unicodes_files(void **state)
{
    (void)state;
    assert_string_equal(boundaries_property('\''), "Single_Quote");
    assert_string_equal(boundaries_property(0x2019), "MidNumLet");
    assert_string_equal(boundaries_property(0x5d0), "Hebrew_Letter");
    assert_string_equal(boundaries_property(0x4e00), "Other");
}

static void it_has_the_settings(void **state)
{
    const json_t *stemming = json_object_get(words_of(state), "stemming");
    const json_t *pairs = json_object_get(words_of(state), "pairs");
    assert_true(json_is_true(json_object_get(stemming, "on")));
    assert_string_equal(json_string_value(json_object_get(stemming, "language")), "de");
    assert_true(json_is_false(json_object_get(pairs, "on")));
    assert_true(json_real_value(json_object_get(*state, "title_weight")) == 2.5);
    assert_int_equal(json_integer_value(json_object_get(*state, "documents")), 1868);
}

static void each_code_of_a_language_has_snowballs_name(void **state)
{
    const json_t *algorithms =
        json_object_get(json_object_get(words_of(state), "stemming"), "algorithms");
    static const char *const GERMAN[] = {"de", "deu", "ger"};
    for (size_t i = 0; i < 3; i++) {
        assert_string_equal(json_string_value(json_object_get(algorithms, GERMAN[i])), "german");
    }
    assert_null(json_object_get(algorithms, ""));
    assert_null(json_object_get(algorithms, "xx"));
}

static void white_space_is_that_of_ascii(void **state)
{
    const char *white_space = json_string_value(json_object_get(words_of(state), "white_space"));
    assert_string_equal(white_space, "\t\n\v\f\r ");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(it_says_what_makes_a_word),
        cmocka_unit_test(it_says_what_is_counted_in_pairs),
        cmocka_unit_test(it_says_what_folding_leaves_out),
        cmocka_unit_test(it_says_which_pictures_a_joiner_joins),
        cmocka_unit_test(it_says_how_each_code_point_breaks_words),
        cmocka_unit_test(no_code_point_that_breaks_words_is_left_out_or_there_twice),
        cmocka_unit_test(properties_have_the_names_of_unicodes_files),
        cmocka_unit_test(it_has_the_settings),
        cmocka_unit_test(each_code_of_a_language_has_snowballs_name),
        cmocka_unit_test(white_space_is_that_of_ascii),
    };
    return cmocka_run_group_tests_name("snapshot_text", tests, set_up, tear_down);
}
