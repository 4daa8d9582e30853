#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "client/args.h"

enum {
    JSON
};

enum {
    MOST,
    FLOOR,
    TAG,
    ORDER,
    TITLE,
    SOCKET,
    RATE
};

static const struct args_option GLOBALS[] = {
    [JSON] = {"json", ARGS_FLAG, NULL, 0, 0, "print JSON"},
};

static const struct args_option OWN[] = {
    [MOST] = {"most", ARGS_WHOLE, "N", 1, 1000, "at most N"},
    [FLOOR] = {"floor", ARGS_NUMBER, "X", 0, 1, "at least X"},
    [TAG] = {"tag", ARGS_LIST, "TAG", 0, 0, "a tag"},
    [ORDER] = {"order", ARGS_CHOICE, "name|count", 0, 0, "the order"},
    [TITLE] = {"title", ARGS_TEXT, "T", 0, 0, "a title"},
    [SOCKET] = {"socket", ARGS_PATH, "PATH", 0, 0, "a socket"},
    [RATE] = {"rate", ARGS_SIZE, "BYTES", 1024, 0x1p40, "bytes a second"},
};

struct fixture {
    struct args globals;
    struct args own;
    struct args_cursor cursor;
    struct failure failure;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){0};
    *state = &fixture;
    return args_init(&fixture.globals, GLOBALS, 1) ||
                   args_init(&fixture.own, OWN, sizeof OWN / sizeof OWN[0])
               ? -1
               : 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    args_deinit(&fixture->globals);
    args_deinit(&fixture->own);
    return 0;
}

/* Parses an argv that ends with NULL. */
static int parse(struct fixture *fixture, const char **argv)
{
    struct args *levels[] = {&fixture->globals, &fixture->own};
    fixture->cursor.at = (char **)argv; /* args_parse leaves the words as they are */
    return args_parse(levels, 2, &fixture->cursor, false, "see --help", &fixture->failure);
}

static void assert_refused(struct fixture *fixture, const char **argv, const char *sentence)
{
    assert_int_equal(parse(fixture, argv), FAILURE_USAGE);
    assert_string_equal(fixture->failure.message, sentence);
}

static void values_stand_behind_a_space_or_an_equals_sign(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"--most", "7", "--floor=.25", NULL}), 0);
    assert_int_equal(fixture->own.values[MOST].whole, 7);
    assert_true(fixture->own.values[FLOOR].number == .25);
    assert_false(fixture->own.values[TITLE].given);
}

static void words_and_options_may_stand_in_any_order(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"a", "--json", "-", "--most", "1", "b", NULL}),
                     0);
    assert_true(fixture->globals.values[JSON].given);
    assert_int_equal(fixture->own.word_count, 3);
    assert_string_equal(fixture->own.words[1], "-");
    assert_string_equal(fixture->own.words[2], "b");
}

static void after_two_dashes_everything_is_a_word(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"--", "--json", "-x", NULL}), 0);
    assert_false(fixture->globals.values[JSON].given);
    assert_int_equal(fixture->own.word_count, 2);
    assert_string_equal(fixture->own.words[0], "--json");
}

static void parsing_can_stop_in_front_of_the_first_word(void **state)
{
    struct fixture *fixture = *state;
    struct args *levels[] = {&fixture->globals};
    const char *argv[] = {"--json", "gaps", "--most", NULL};
    fixture->cursor.at = (char **)argv;
    assert_int_equal(args_parse(levels, 1, &fixture->cursor, true, "see --help", &fixture->failure),
                     0);
    assert_string_equal(*fixture->cursor.at, "gaps");
}

static void a_list_keeps_every_value_in_order(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"--tag", "fog", "--tag=", "--tag=-x", NULL}),
                     0);
    assert_int_equal(fixture->own.values[TAG].list_count, 3);
    assert_string_equal(fixture->own.values[TAG].list[0], "fog");
    assert_string_equal(fixture->own.values[TAG].list[1], "");
    assert_string_equal(fixture->own.values[TAG].list[2], "-x");
}

static void an_unknown_option_is_named_with_the_one_that_is_near(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"--mots=3", NULL},
                   "there is no option --mots here (is --most meant?); see --help");
}

static void an_unknown_option_that_is_near_to_none_is_named_alone(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"-v", NULL}, "there is no option -v here; see --help");
}

static void a_missing_value_is_named(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"--most", NULL},
                   "--most needs a value: --most N; see --help");
}

static void an_option_does_not_take_the_next_option_for_its_value(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"--title", "--json", NULL},
                   "--title needs a value (one that begins with dashes as --title=--json)");
}

static void a_whole_number_out_of_range_is_refused(void **state)
{
    static const char *const BAD[] = {
        "0", "1001", "-1", "1.5", "", "0x3", " 3", "1e2", "99999999999999999999"};
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        struct fixture *fixture = *state;
        assert_int_equal(parse(fixture, (const char *[]){"--most", BAD[i], NULL}), FAILURE_USAGE);
        assert_non_null(strstr(fixture->failure.message, "a whole number from 1 to 1,000, not"));
        assert_int_equal(tear_down(state), 0);
        assert_int_equal(set_up(state), 0);
    }
}

static void a_number_out_of_range_is_refused(void **state)
{
    static const char *const BAD[] = {"1.01", "-.1", "nan", "inf", "", "0x1", "a", ".5 "};
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        struct fixture *fixture = *state;
        assert_int_equal(parse(fixture, (const char *[]){"--floor", BAD[i], NULL}), FAILURE_USAGE);
        assert_non_null(
            strstr(fixture->failure.message, "--floor takes a number from 0 to 1, not"));
        assert_int_equal(tear_down(state), 0);
        assert_int_equal(set_up(state), 0);
    }
}

static void a_size_is_in_bytes_or_in_larger_units(void **state)
{
    /* 1.5 GiB = 1.5 · 1,024³ bytes = 1,610,612,736 */
    static const struct {
        const char *text;
        int64_t bytes;
    } SIZES[] = {{"4096", 4096}, {"1KiB", 1024}, {"64MiB", 67108864}, {"1.5GiB", 1610612736}};
    for (size_t i = 0; i < sizeof SIZES / sizeof SIZES[0]; i++) {
        struct fixture *fixture = *state;
        assert_int_equal(parse(fixture, (const char *[]){"--rate", SIZES[i].text, NULL}), 0);
        assert_int_equal(fixture->own.values[RATE].whole, SIZES[i].bytes);
        assert_int_equal(tear_down(state), 0);
        assert_int_equal(set_up(state), 0);
    }
}

static void a_size_of_another_unit_or_out_of_range_is_refused(void **state)
{
    static const char *const BAD[] = {"1023",  "0.5KiB", "64MB", "64 MiB", "1.0001KiB", "MiB",   "",
                                      "-4MiB", "nan",    "1e6",  "0x800",  "2000GiB",   "64MiBs"};
    for (size_t i = 0; i < sizeof BAD / sizeof BAD[0]; i++) {
        struct fixture *fixture = *state;
        char argument[32];
        (void)snprintf(argument, sizeof argument, "--rate=%s", BAD[i]);
        assert_int_equal(parse(fixture, (const char *[]){argument, NULL}), FAILURE_USAGE);
        assert_non_null(strstr(fixture->failure.message,
                               "--rate takes a size from 1,024 to 1,099,511,627,776 bytes, such as "
                               "64MiB, not '"));
        assert_int_equal(tear_down(state), 0);
        assert_int_equal(set_up(state), 0);
    }
}

static void a_choice_is_one_of_its_words_and_no_part_of_them(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"--order", "count", NULL}), 0);
    assert_int_equal(tear_down(state), 0);
    assert_int_equal(set_up(state), 0);
    assert_refused(fixture, (const char *[]){"--order", "coun", NULL},
                   "--order takes name|count, not 'coun'");
}

static void an_option_given_twice_is_refused(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"--title", "a", "--title", "b", NULL},
                   "--title is given twice");
}

static void a_flag_takes_no_value(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (const char *[]){"--json=yes", NULL},
                   "--json takes no value; see --help");
}

static void texts_must_be_utf8_and_paths_need_not(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(parse(fixture, (const char *[]){"--socket", "a\xFF", NULL}), 0);
    assert_refused(fixture, (const char *[]){"--title", "a\xFF", NULL},
                   "the value of --title is not UTF-8 (byte 2)");
}

static void a_swap_of_neighbours_counts_as_one_change(void **state)
{
    (void)state;
    assert_int_equal(args_distance("gpas", "gaps"), 1);
    assert_int_equal(args_distance("", "gaps"), 4);
    assert_int_equal(args_distance("gaps", "gaps"), 0);
    assert_int_equal(args_distance("kitten", "sitting"), 3); /* the usual textbook example */
    assert_true(args_is_near("stat", "state"));
    assert_false(args_is_near("rule", "file"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(values_stand_behind_a_space_or_an_equals_sign, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(words_and_options_may_stand_in_any_order, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(after_two_dashes_everything_is_a_word, set_up, tear_down),
        cmocka_unit_test_setup_teardown(parsing_can_stop_in_front_of_the_first_word, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_list_keeps_every_value_in_order, set_up, tear_down),
        cmocka_unit_test_setup_teardown(an_unknown_option_is_named_with_the_one_that_is_near,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(an_unknown_option_that_is_near_to_none_is_named_alone,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_missing_value_is_named, set_up, tear_down),
        cmocka_unit_test_setup_teardown(an_option_does_not_take_the_next_option_for_its_value,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_whole_number_out_of_range_is_refused, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_number_out_of_range_is_refused, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_size_is_in_bytes_or_in_larger_units, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_size_of_another_unit_or_out_of_range_is_refused, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_choice_is_one_of_its_words_and_no_part_of_them, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(an_option_given_twice_is_refused, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_flag_takes_no_value, set_up, tear_down),
        cmocka_unit_test_setup_teardown(texts_must_be_utf8_and_paths_need_not, set_up, tear_down),
        cmocka_unit_test(a_swap_of_neighbours_counts_as_one_change),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
