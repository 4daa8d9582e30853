#include "daemon/text/fold.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <utf8proc.h>

#include <cmocka.h>

static int set_up(void **state)
{
    *state = calloc(1, sizeof(struct fold));
    return *state ? 0 : -1;
}

static int tear_down(void **state)
{
    fold_deinit(*state);
    free(*state);
    return 0;
}

static void check_form(void **state, enum fold_form form, const char *text, const char *expected)
{
    struct fold *fold = *state;
    assert_int_equal(fold_text(fold, form, text, strlen(text)), 0);
    bool is_length = fold->bytes == strlen(expected);
    if (!is_length || (fold->bytes > 0 && memcmp(fold->text, expected, fold->bytes) != 0)) {
        fail_msg("\"%s\" became \"%.*s\", not \"%s\"", text, (int)fold->bytes, fold->text,
                 expected);
    }
}

#define assert_nfkc(text, expected) check_form(state, FOLD_NFKC, text, expected)
#define assert_folded(text, expected) check_form(state, FOLD_CASE, text, expected)

static void compatibility_forms_become_plain_ones(void **state)
{
    assert_nfkc("ﬁre", "fire");
    assert_nfkc("Ａ１", "A1");
    assert_nfkc("ｶﾞ", "ガ");
    assert_nfkc("½", "1⁄2");
}

static void marks_are_composed(void **state)
{
    assert_nfkc("e\u0301", "é");
    assert_nfkc("\u1112\u1161\u11ab", "한");
}

static void marks_are_put_into_canonical_order(void **state)
{
    /* Dot below (class 220) goes before acute (230), in whichever order they were typed. */
    assert_nfkc("q\u0301\u0323", "q\u0323\u0301");
    assert_nfkc("q\u0323\u0301", "q\u0323\u0301");
}

static void marks_of_one_class_keep_their_order(void **state)
{
    assert_nfkc("q\u0301\u0300", "q\u0301\u0300");
    assert_nfkc("q\u0300\u0301", "q\u0300\u0301");
}

static void nfkc_leaves_case_and_joiners(void **state)
{
    assert_nfkc("La\u00admp", "La\u00admp");
}

static void case_is_folded_in_full(void **state)
{
    assert_folded("Straße", "strasse");
    assert_folded("ΟΔΟΣ", "οδοσ");
    assert_folded("οδος", "οδοσ");
    assert_folded("МАЯК", "маяк");
    assert_folded("İ", "i\u0307"); /* the default folding, which is not the Turkish one */
}

static void what_is_ignorable_is_left_out(void **state)
{
    assert_folded("la\u00admp", "lamp");
    assert_folded("la\u200dmp\ufe0f", "lamp");
    assert_folded("\u00ad", "");
}

static void marks_meet_their_letter_when_what_stood_between_is_gone(void **state)
{
    assert_folded("e\u00ad\u0301", "é");
}

static void a_typed_apostrophe_becomes_the_plain_one(void **state)
{
    assert_folded("keeper’s", "keeper's");
}

static void an_empty_text_is_empty(void **state)
{
    assert_nfkc("", "");
    assert_int_equal(fold_origin_start(*state, 0), 0);
    assert_int_equal(fold_origin_end(*state, 0), 0);
}

static void a_byte_that_is_not_utf8_becomes_a_replacement(void **state)
{
    assert_nfkc("a\xff"
                "b",
                "a\ufffdb");
    assert_nfkc("\xe4\xba", "\ufffd\ufffd");
}

static void a_text_beyond_the_limit_is_refused_unread(void **state)
{
    struct fold *fold = *state;
    assert_int_equal(fold_text(fold, FOLD_NFKC, "", (size_t)FOLD_TEXT_BYTES + 1), -E2BIG);
    assert_int_equal(fold->bytes, 0);
}

static void offsets_lead_back_to_the_source(void **state)
{
    struct fold *fold = *state;
    /* Written: ﬁ (3 bytes), r, e, acute (2 bytes), s. In NFKC: f, i, r, é (2 bytes), s. */
    assert_nfkc("ﬁre\u0301s", "firés");
    assert_int_equal(fold_origin_start(fold, 0), 0);
    assert_int_equal(fold_origin_start(fold, 1), 0); /* i is of the same ligature */
    assert_int_equal(fold_origin_end(fold, 1), 3);
    assert_int_equal(fold_origin_start(fold, 2), 3); /* r */
    assert_int_equal(fold_origin_end(fold, 3), 4);
    assert_int_equal(fold_origin_start(fold, 3), 4); /* é */
    assert_int_equal(fold_origin_end(fold, 5), 7);
    assert_int_equal(fold_origin_start(fold, 5), 7); /* s */
    assert_int_equal(fold_origin_end(fold, 6), 8);
    assert_int_equal(fold_origin_start(fold, 6), 8); /* the end */
}

static void what_is_left_out_belongs_to_what_stands_before_it(void **state)
{
    struct fold *fold = *state;
    assert_folded("a\u00adb", "ab");
    assert_int_equal(fold_origin_end(fold, 1), 3);
    assert_int_equal(fold_origin_start(fold, 1), 3);
}

static void a_long_row_of_marks_is_ordered_like_a_short_one(void **state)
{
    enum {
        MARKS = 1000
    };
    struct fold *fold = *state;
    char text[1 + 2 * MARKS + 1] = "q";
    char expected[sizeof text] = "q";
    for (size_t i = 0; i < MARKS; i++) { /* by turns acute and dot below, which goes first */
        (void)stpcpy(text + 1 + 2 * i, i % 2 == 0 ? "\u0301" : "\u0323");
        (void)stpcpy(expected + 1 + 2 * i, i < MARKS / 2 ? "\u0323" : "\u0301");
    }
    assert_nfkc(text, expected);
    assert_int_equal(fold_origin_end(fold, fold->bytes), sizeof text - 1);
}

/* Calls `check` with each code point that Unicode 15 gives out, and many that it does not. */
static void for_each_point(struct fold *fold, void (*check)(struct fold *fold, int32_t point))
{
    for (int32_t point = 1; point < 0xe1000; point++) {
        bool is_surrogate = point >= 0xd800 && point < 0xe000;
        bool is_unused = point >= 0x34000 && point < 0xe0000;
        if (!is_surrogate && !is_unused) {
            check(fold, point);
        }
    }
}

static void check_against_library(struct fold *fold, int32_t point)
{
    char text[8] = "a";
    size_t bytes = 1 + (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)text + 1);
    text[bytes++] = 'b';
    utf8proc_uint8_t *expected = NULL;
    utf8proc_ssize_t expected_bytes =
        utf8proc_map((const utf8proc_uint8_t *)text, (utf8proc_ssize_t)bytes, &expected,
                     UTF8PROC_STABLE | UTF8PROC_COMPOSE | UTF8PROC_COMPAT);
    assert_int_equal(fold_text(fold, FOLD_NFKC, text, bytes), 0);
    if ((utf8proc_ssize_t)fold->bytes != expected_bytes ||
        memcmp(fold->text, expected, fold->bytes) != 0) {
        fail_msg("U+%04X", (unsigned)point);
    }
    free(expected); /* NOLINT(cppcoreguidelines-no-malloc): utf8proc_map gives malloc's memory */
}

static void working_by_stretches_gives_what_the_whole_text_gives(void **state)
{
    for_each_point(*state, check_against_library);
}

static void check_idempotent(struct fold *fold, int32_t point)
{
    char text[8];
    char once[128];
    size_t bytes = (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)text);
    assert_int_equal(fold_text(fold, FOLD_CASE, text, bytes), 0);
    size_t once_bytes = fold->bytes;
    assert_true(once_bytes <= sizeof once);
    memcpy(once, fold->text, once_bytes);
    assert_int_equal(fold_text(fold, FOLD_CASE, once, once_bytes), 0);
    if (fold->bytes != once_bytes || memcmp(fold->text, once, once_bytes) != 0) {
        fail_msg("U+%04X", (unsigned)point);
    }
}

static void folding_again_changes_nothing(void **state)
{
    for_each_point(*state, check_idempotent);
}

static void check_length(struct fold *fold, int32_t point)
{
    (void)fold;
    int boundary_class = 0;
    int32_t decomposed[32];
    utf8proc_ssize_t count = utf8proc_decompose_char(
        point, decomposed, 32, UTF8PROC_COMPAT | UTF8PROC_CASEFOLD, &boundary_class);
    if (count < 1 || count > 18) {
        fail_msg("U+%04X", (unsigned)point);
    }
}

static void no_code_point_decomposes_into_more_than_18(void **state)
{
    for_each_point(*state, check_length);
}

int main(void)
{
#define fold_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        fold_test(compatibility_forms_become_plain_ones),
        fold_test(marks_are_composed),
        fold_test(marks_are_put_into_canonical_order),
        fold_test(marks_of_one_class_keep_their_order),
        fold_test(nfkc_leaves_case_and_joiners),
        fold_test(case_is_folded_in_full),
        fold_test(what_is_ignorable_is_left_out),
        fold_test(marks_meet_their_letter_when_what_stood_between_is_gone),
        fold_test(a_typed_apostrophe_becomes_the_plain_one),
        fold_test(an_empty_text_is_empty),
        fold_test(a_byte_that_is_not_utf8_becomes_a_replacement),
        fold_test(a_text_beyond_the_limit_is_refused_unread),
        fold_test(offsets_lead_back_to_the_source),
        fold_test(what_is_left_out_belongs_to_what_stands_before_it),
        fold_test(a_long_row_of_marks_is_ordered_like_a_short_one),
        fold_test(working_by_stretches_gives_what_the_whole_text_gives),
        fold_test(folding_again_changes_nothing),
        fold_test(no_code_point_decomposes_into_more_than_18),
    };
    return cmocka_run_group_tests_name("fold", tests, NULL, NULL);
}
