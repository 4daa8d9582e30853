/* What can be configured: the table's rows, single options, reloading, what is learned with. */
#include "daemon/options.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

struct configured {
    struct options options;
    char error[OPTIONS_ERROR_BYTES];
};

static int setup(void **state)
{
    struct configured *configured = calloc(1, sizeof *configured);
    assert_non_null(configured);
    options_defaults(&configured->options);
    *state = configured;
    return 0;
}

static int teardown(void **state)
{
    free(*state);
    return 0;
}

static int set(struct configured *configured, const char *name, const char *value)
{
    configured->error[0] = '\0';
    return options_set(&configured->options, name, value, configured->error);
}

static void assert_same(const struct options *left, const struct options *right)
{
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row one;
        struct options_row other;
        options_describe(left, i, &one);
        options_describe(right, i, &other);
        if (strcmp(one.value, other.value) != 0) {
            fail_msg("%s is %s here and %s there", one.name, one.value, other.value);
        }
    }
}

/* --- the table --- */

static void every_default_is_a_value_that_can_be_set(void **state)
{
    struct configured *configured = *state;
    assert_true(options_count() > 20);
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(&configured->options, i, &row);
        if (set(configured, row.name, row.value) != 0) {
            fail_msg("%s", configured->error);
        }
    }
    struct options defaults;
    options_defaults(&defaults);
    assert_same(&configured->options, &defaults);
}

static void the_defaults_are_those_of_the_contract(void **state)
{
    struct configured *configured = *state;
    const struct options *options = &configured->options;
    assert_int_equal(options->line_limit_bytes, 8 * 1024 * 1024);
    assert_int_equal(options->text_limit_bytes, 1024 * 1024);
    assert_int_equal(options->tags_limit, 1000);
    assert_int_equal(options->words_limit, 20000);
    assert_int_equal(options->visible_within_ms, 1000);
    assert_int_equal(options->loss, SURROGATE_SQUARED_HINGE);
    /* Jain, Prabhu, Varma (KDD 2016): A = 0.55, B = 1.5 unless fitted. */
    assert_true(options->propensity_a == 0.55);
    assert_true(options->propensity_b == 1.5);
}

static void each_row_has_its_place_and_a_sentence(void **state)
{
    struct configured *configured = *state;
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(&configured->options, i, &row);
        assert_int_equal(options_find(row.name), i);
        assert_int_equal(row.sentence[strlen(row.sentence) - 1], '.');
    }
    assert_int_equal(options_find("lamp"), options_count());
}

/* What is learned with must not change under a running model. */
static void no_reload_takes_an_option_of_learning(void **state)
{
    struct configured *configured = *state;
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(&configured->options, i, &row);
        assert_false(row.group == OPTIONS_LEARNING && row.on_reload);
    }
}

/* --- single options --- */

static void sizes_have_units_of_1024(void **state)
{
    struct configured *configured = *state;
    static const struct {
        const char *text;
        uint64_t bytes;
    } sizes[] = {{"65536", 65536},  {"64KiB", 65536},    {"64 KiB", 65536},
                 {"2MiB", 2097152}, {"1.5MiB", 1572864}, {"0.25GiB", 268435456}};
    for (size_t i = 0; i < sizeof sizes / sizeof sizes[0]; i++) {
        assert_int_equal(set(configured, "line_limit", sizes[i].text), 0);
        assert_int_equal(configured->options.line_limit_bytes, sizes[i].bytes);
    }
}

static void what_is_no_size_is_refused(void **state)
{
    struct configured *configured = *state;
    static const char *const wrong[] = {
        "",        "MiB",      "2mib", "2MB", "2M",   "2 MiB x", "64 K",  "65535",   "1GiB",   "-1",
        "65536.5", "0.01GiBs", "inf",  "nan", "+inf", "1e99",    "1e999", "0x20000", "0X20000"};
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        if (set(configured, "line_limit", wrong[i]) == 0) {
            fail_msg("'%s' was taken as %llu", wrong[i],
                     (unsigned long long)configured->options.line_limit_bytes);
        }
    }
    assert_int_equal(configured->options.line_limit_bytes, 8 * 1024 * 1024);
    assert_int_equal(set(configured, "line_limit", "2MB"), -1);
    assert_string_equal(configured->error, "option line_limit is a size from 65536 to 268435456 "
                                           "bytes, such as 64MiB, not '2MB'");
}

static void whole_numbers_have_bounds_and_no_fraction(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "connections", "1"), 0);
    assert_int_equal(set(configured, "connections", "100000"), 0);
    assert_int_equal(configured->options.connections_limit, 100000);
    static const char *const wrong[] = {"0", "100001", "7.5", "-7", "seven", "7 ", "", "0X10"};
    for (size_t i = 0; i < sizeof wrong / sizeof wrong[0]; i++) {
        assert_int_equal(set(configured, "connections", wrong[i]), -1);
    }
    assert_int_equal(set(configured, "connections", "0"), -1);
    assert_string_equal(configured->error,
                        "option connections is a whole number from 1 to 100000, not '0'");
    assert_int_equal(configured->options.connections_limit, 100000);
}

static void numbers_have_bounds(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "title_weight", "2.5e0"), 0);
    assert_true(configured->options.title_weight == 2.5);
    assert_int_equal(set(configured, "title_weight", "0.09"), -1);
    assert_int_equal(set(configured, "title_weight", "100.1"), -1);
    assert_string_equal(configured->error,
                        "option title_weight is a number from 0.1 to 100, not '100.1'");
}

static void minus_zero_is_zero(void **state)
{
    struct configured *configured = *state;
    char before[1024];
    char after[1024];
    assert_int_equal(options_learning_text(&configured->options, before, sizeof before), 0);
    assert_int_equal(set(configured, "step", "-0"), 0);
    assert_int_equal(options_learning_text(&configured->options, after, sizeof after), 0);
    assert_string_equal(after, before);
}

static void a_switch_is_on_or_off(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "stemming", "on"), 0);
    assert_true(configured->options.stemming);
    assert_int_equal(set(configured, "stemming", "off"), 0);
    assert_false(configured->options.stemming);
    assert_int_equal(set(configured, "stemming", "yes"), -1);
    assert_string_equal(configured->error, "option stemming is on or off, not 'yes'");
}

static void a_choice_is_one_of_its_words(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "loss", "logistic"), 0);
    assert_int_equal(configured->options.loss, SURROGATE_LOGISTIC);
    assert_int_equal(set(configured, "loss", "hinge"), 0);
    assert_int_equal(configured->options.loss, SURROGATE_HINGE);
    assert_int_equal(set(configured, "unknown_tags", "refuse"), 0);
    assert_false(configured->options.open_unknown_tags);
    assert_int_equal(set(configured, "loss", "Hinge"), -1);
    assert_string_equal(configured->error,
                        "option loss is one of squared_hinge, hinge, logistic; not 'Hinge'");
}

static void a_language_is_one_that_has_a_stemmer_or_none(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "language", "en"), 0);
    assert_string_equal(configured->options.language, "en");
    assert_int_equal(set(configured, "language", "xx"), -1);
    assert_int_equal(set(configured, "language", "a language with a long name"), -1);
    assert_string_equal(configured->options.language, "en");
    assert_int_equal(set(configured, "language", ""), 0);
    assert_string_equal(configured->options.language, "");
}

static void a_right_is_a_list_of_users_and_groups(void **state)
{
    struct configured *configured = *state;
    struct options_row row;
    assert_int_equal(set(configured, "may_rule", "1911, @50 @socket"), 0);
    options_describe(&configured->options, options_find("may_rule"), &row);
    assert_string_equal(row.value, "1911 @50 @socket");
    assert_int_equal(configured->options.may[RIGHT_RULE].count, 3);
}

static void a_right_for_who_is_not_there_is_refused_by_name(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "may_file", "@no-such-harbour"), -1);
    assert_non_null(strstr(configured->error, "may_file"));
    assert_non_null(strstr(configured->error, "no group 'no-such-harbour'"));
    assert_int_equal(configured->options.may[RIGHT_FILE].count, 1); /* as it was */
}

static void a_path_is_text_that_is_not_too_long(void **state)
{
    struct configured *configured = *state;
    char longest[OPTIONS_PATH_BYTES + 1];
    memset(longest, 'a', sizeof longest);
    longest[OPTIONS_PATH_BYTES] = '\0'; /* one byte more than fits */
    assert_string_equal(configured->options.export_dir, "exports");
    assert_int_equal(set(configured, "export_dir", "/srv/logbooks/out"), 0);
    assert_int_equal(set(configured, "export_dir", ""), -1);
    assert_int_equal(set(configured, "export_dir", "out\nin"), -1);
    assert_int_equal(set(configured, "export_dir", "\xFF"), -1);
    assert_int_equal(set(configured, "export_dir", longest), -1);
    assert_non_null(strstr(configured->error, "export_dir is a path of 1 to 255 bytes"));
    assert_string_equal(configured->options.export_dir, "/srv/logbooks/out");
    assert_int_equal(set(configured, "export_dir", longest + 1), 0);
}

static void a_reload_does_not_move_the_exports(void **state)
{
    struct configured *configured = *state;
    struct options wanted = configured->options;
    const char *first = NULL;
    assert_int_equal(options_set(&wanted, "export_dir", "elsewhere", configured->error), 0);
    assert_int_equal(options_reload(&configured->options, &wanted, &first), 1);
    assert_string_equal(first, "export_dir");
    assert_string_equal(configured->options.export_dir, "exports");
}

/* The owner, who may do everything, is on no list. */
static void by_default_the_sockets_group_may_read_file_and_rule(void **state)
{
    struct configured *configured = *state;
    static const char *const expected[RIGHT_KINDS] = {"@socket", "@socket", "@socket", "", ""};
    for (int right = 0; right < RIGHT_KINDS; right++) {
        struct options_row row;
        size_t place = options_find(rights_option((enum right)right));
        options_describe(&configured->options, place, &row);
        assert_string_equal(row.value, expected[right]);
        assert_true(row.on_reload);
    }
}

static void an_unknown_option_is_refused(void **state)
{
    struct configured *configured = *state;
    assert_int_equal(set(configured, "lamps", "1"), -1);
    assert_non_null(strstr(configured->error, "there is no option 'lamps'"));
    assert_int_equal(set(configured, "connection", "1"), -1);
    assert_int_equal(set(configured, "", "1"), -1);
}

static void an_endless_value_is_refused_with_a_sentence_that_fits(void **state)
{
    struct configured *configured = *state;
    static const char *const kinds[] = {"line_limit", "connections", "title_weight",
                                        "stemming",   "loss",        "language"};
    char value[5000];
    memset(value, 'y', sizeof value);
    value[sizeof value - 1] = '\0';
    for (size_t i = 0; i < sizeof kinds / sizeof kinds[0]; i++) {
        assert_int_equal(set(configured, kinds[i], value), -1);
        assert_int_equal(strlen(configured->error), OPTIONS_ERROR_BYTES - 1);
    }
}

static void a_pair_sets_one_option(void **state)
{
    struct configured *configured = *state;
    struct options *options = &configured->options;
    assert_int_equal(options_set_pair(options, "connections=7", configured->error), 0);
    assert_int_equal(options->connections_limit, 7);
    assert_int_equal(options_set_pair(options, "language=", configured->error), 0);
    assert_int_equal(options_set_pair(options, "connections", configured->error), -1);
    assert_string_equal(configured->error, "--set takes name=value, not 'connections'");
    assert_int_equal(options_set_pair(options, "lamps=1", configured->error), -1);
    assert_string_equal(configured->error, "there is no option 'lamps'");
    assert_int_equal(options_set_pair(options, "connections=1=2", configured->error), -1);
    assert_int_equal(options->connections_limit, 7);
}

/* Or what daemon.state tells of it could not be written into one. */
static void a_path_that_a_file_could_not_say_is_refused(void **state)
{
    struct configured *configured = *state;
    static const char *const PAIRS[] = {"export_dir= lamps", "export_dir=lamps ", "export_dir=;x",
                                        "export_dir=lamps ;ships"};
    for (size_t i = 0; i < sizeof PAIRS / sizeof PAIRS[0]; i++) {
        assert_int_equal(options_set_pair(&configured->options, PAIRS[i], configured->error), -1);
        assert_non_null(strstr(configured->error, "option export_dir is a path of"));
    }
    assert_string_equal(configured->options.export_dir, "exports");
    assert_int_equal(
        options_set_pair(&configured->options, "export_dir=old lamps;2", configured->error), 0);
}

/* --- reloading --- */

static void a_reload_takes_only_what_it_may(void **state)
{
    struct configured *configured = *state;
    struct options wanted = configured->options;
    const char *first = "none";
    assert_int_equal(options_set(&wanted, "tags_limit", "5", configured->error), 0);
    assert_int_equal(options_set(&wanted, "connections", "5", configured->error), 0);
    assert_int_equal(options_set(&wanted, "loss", "hinge", configured->error), 0);
    assert_int_equal(options_reload(&configured->options, &wanted, &first), 2);
    assert_string_equal(first, "connections");
    assert_int_equal(configured->options.tags_limit, 5);
    assert_int_equal(configured->options.connections_limit, 1024);
    assert_int_equal(configured->options.loss, SURROGATE_SQUARED_HINGE);
}

static void a_reload_of_the_same_holds_nothing_back(void **state)
{
    struct configured *configured = *state;
    struct options wanted = configured->options;
    const char *first = "none";
    assert_int_equal(options_set(&wanted, "unknown_tags", "refuse", configured->error), 0);
    assert_int_equal(options_reload(&configured->options, &wanted, &first), 0);
    assert_string_equal(first, "none");
    assert_false(configured->options.open_unknown_tags);
}

/* --- what was learned with --- */

/* A value of an option that is not its default. */
static const char *other_value(const struct options_row *row)
{
    static const char *const candidates[] = {"off",   "on", "refuse", "hinge", "en",
                                             "32MiB", "5",  "500",    "0.25"};
    struct options options;
    char error[OPTIONS_ERROR_BYTES];
    for (size_t i = 0; i < sizeof candidates / sizeof candidates[0]; i++) {
        struct options_row changed;
        options_defaults(&options);
        if (options_set(&options, row->name, candidates[i], error) != 0) {
            continue;
        }
        options_describe(&options, options_find(row->name), &changed);
        if (strcmp(changed.value, row->value) != 0) {
            return candidates[i];
        }
    }
    return row->value;
}

static void the_learning_text_changes_with_an_option_of_learning_and_only_then(void **state)
{
    struct configured *configured = *state;
    char before[1024];
    assert_int_equal(options_learning_text(&configured->options, before, sizeof before), 0);
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        char after[1024];
        options_defaults(&configured->options);
        options_describe(&configured->options, i, &row);
        const char *value = other_value(&row);
        assert_int_equal(set(configured, row.name, value), 0);
        assert_int_equal(options_learning_text(&configured->options, after, sizeof after), 0);
        bool is_changed = strcmp(before, after) != 0;
        if (is_changed != (row.group == OPTIONS_LEARNING)) {
            fail_msg("%s = %s: the text has %s", row.name, value,
                     is_changed ? "changed" : "not changed");
        }
    }
}

static void a_learning_text_that_does_not_fit_is_told(void **state)
{
    struct configured *configured = *state;
    char text[1024];
    assert_int_equal(options_learning_text(&configured->options, text, sizeof text), 0);
    size_t needed = strlen(text) + 1;
    assert_int_equal(options_learning_text(&configured->options, text, needed), 0);
    assert_int_equal(options_learning_text(&configured->options, text, needed - 1), -1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_default_is_a_value_that_can_be_set),
        TEST(the_defaults_are_those_of_the_contract),
        TEST(each_row_has_its_place_and_a_sentence),
        TEST(no_reload_takes_an_option_of_learning),
        TEST(sizes_have_units_of_1024),
        TEST(what_is_no_size_is_refused),
        TEST(whole_numbers_have_bounds_and_no_fraction),
        TEST(numbers_have_bounds),
        TEST(minus_zero_is_zero),
        TEST(a_switch_is_on_or_off),
        TEST(a_choice_is_one_of_its_words),
        TEST(a_language_is_one_that_has_a_stemmer_or_none),
        TEST(a_right_is_a_list_of_users_and_groups),
        TEST(a_right_for_who_is_not_there_is_refused_by_name),
        TEST(a_path_is_text_that_is_not_too_long),
        TEST(a_reload_does_not_move_the_exports),
        TEST(by_default_the_sockets_group_may_read_file_and_rule),
        TEST(an_unknown_option_is_refused),
        TEST(an_endless_value_is_refused_with_a_sentence_that_fits),
        TEST(a_pair_sets_one_option),
        TEST(a_path_that_a_file_could_not_say_is_refused),
        TEST(a_reload_takes_only_what_it_may),
        TEST(a_reload_of_the_same_holds_nothing_back),
        TEST(the_learning_text_changes_with_an_option_of_learning_and_only_then),
        TEST(a_learning_text_that_does_not_fit_is_told),
    };
    return cmocka_run_group_tests_name("options", tests, NULL, NULL);
}
