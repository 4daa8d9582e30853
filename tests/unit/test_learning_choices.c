/* Settings that a rebuild has chosen, over those that are configured. */
#include "daemon/learning_choices.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

static struct options options_with(const char *const *pairs)
{
    struct options options;
    char error[OPTIONS_ERROR_BYTES];
    options_defaults(&options);
    for (size_t i = 0; pairs[i]; i++) {
        if (options_set_pair(&options, pairs[i], error) < 0) {
            fail_msg("%s", error);
        }
    }
    return options;
}

#define OPTIONS(...) options_with((const char *const[]){__VA_ARGS__, NULL})
#define DEFAULTS() options_with((const char *const[]){NULL})

static void what_differs_is_chosen_and_nothing_else(void **state)
{
    (void)state;
    const struct options configured = OPTIONS("step=0.5", "drain_ms=1");
    const struct options wanted = OPTIONS("step=0.25", "loss=hinge", "drain_ms=2");
    struct learning_choices choices;
    learning_choose(&configured, &wanted, 3, 40, &choices);
    assert_int_equal(choices.number, 3);
    assert_int_equal(choices.seq, 40);
    assert_int_equal(choices.count, 2); /* drain_ms is nothing that is learned with */
    assert_string_equal(choices.list[0].name, "loss");
    assert_string_equal(choices.list[0].value, "hinge");
    assert_string_equal(choices.list[0].configured, "squared_hinge");
    assert_string_equal(choices.list[1].name, "step");
    assert_string_equal(choices.list[1].value, "0.25");
    assert_string_equal(choices.list[1].configured, "0.5");
}

static void choices_are_in_force_while_the_configuration_says_what_it_said(void **state)
{
    (void)state;
    const struct options configured = OPTIONS("step=0.5");
    const struct options wanted = OPTIONS("step=0.25", "loss=hinge", "language=en");
    struct options options = OPTIONS("step=0.5", "drain_ms=7"); /* the same of learning */
    struct learning_choices choices;
    char first[LEARNING_NAME_BYTES] = "none";
    learning_choose(&configured, &wanted, 1, 1, &choices);
    assert_int_equal(learning_lay_over(&choices, &options, first), 0);
    assert_string_equal(first, "none");
    assert_int_equal(options.loss, SURROGATE_HINGE);
    assert_true(options.step == 0.25);
    assert_string_equal(options.language, "en");
    assert_int_equal(options.drain_ms, 7);
}

static void a_choice_that_the_configuration_has_overtaken_is_dropped(void **state)
{
    (void)state;
    const struct options configured = DEFAULTS();
    const struct options wanted = OPTIONS("step=0.25", "loss=hinge");
    struct options options = OPTIONS("step=0.3");
    struct learning_choices choices;
    char first[LEARNING_NAME_BYTES] = "";
    learning_choose(&configured, &wanted, 1, 1, &choices);
    assert_int_equal(learning_lay_over(&choices, &options, first), 1);
    assert_string_equal(first, "step");
    assert_true(options.step == 0.3);
    assert_int_equal(options.loss, SURROGATE_HINGE); /* this one stays */
    assert_int_equal(choices.count, 1);
    assert_string_equal(choices.list[0].name, "loss");
}

static void a_choice_that_is_written_into_the_configuration_changes_nothing(void **state)
{
    (void)state;
    const struct options configured = DEFAULTS();
    const struct options wanted = OPTIONS("loss=hinge");
    struct options options = OPTIONS("loss=hinge");
    struct learning_choices choices;
    char first[LEARNING_NAME_BYTES] = "";
    learning_choose(&configured, &wanted, 1, 1, &choices);
    assert_int_equal(learning_lay_over(&choices, &options, first), 1);
    assert_int_equal(options.loss, SURROGATE_HINGE);
}

static void an_option_of_another_version_is_dropped(void **state)
{
    (void)state;
    struct options options = DEFAULTS();
    char first[LEARNING_NAME_BYTES] = "";
    struct learning_choices choices = {
        .count = 2,
        .list = {{.name = "keel", .value = "1", .configured = "0"},
                 {.name = "step", .value = "none", .configured = "0"}}};
    assert_int_equal(learning_lay_over(&choices, &options, first), 2);
    assert_string_equal(first, "keel");
    assert_true(options.step == 0.0);
}

static void a_model_is_known_by_what_it_is_learned_with_and_by_its_rebuild(void **state)
{
    (void)state;
    const struct options options = DEFAULTS();
    char plain[1024];
    char first[1024];
    char second[1024];
    char configured[1024];
    assert_int_equal(learning_text(&options, 0, plain, sizeof plain), 0);
    assert_int_equal(learning_text(&options, 1, first, sizeof first), 0);
    assert_int_equal(learning_text(&options, 22, second, sizeof second), 0);
    assert_int_equal(options_learning_text(&options, configured, sizeof configured), 0);
    assert_string_equal(plain, configured); /* models of homes without a rebuild stay ours */
    assert_string_not_equal(first, second);
    assert_int_equal(learning_number_of(plain), 0);
    assert_int_equal(learning_number_of(first), 1);
    assert_int_equal(learning_number_of(second), 22);
    assert_int_equal(learning_text(&options, 22, second, strlen(second)), -1); /* no room for NUL */
}

static void choices_come_back_from_a_record_as_they_were(void **state)
{
    (void)state;
    const struct options configured = DEFAULTS();
    const struct options wanted = OPTIONS("step=0.1", "loss=hinge", "language=en");
    struct learning_choices choices;
    struct learning_choices back;
    struct codec_writer record = {0};
    learning_choose(&configured, &wanted, 5, 1234567890123, &choices);
    learning_choices_put(&choices, &record);
    struct codec_reader reader = {.data = record.data, .size = record.size};
    assert_int_equal(learning_choices_get(&reader, &back), 0);
    assert_int_equal(back.number, 5);
    assert_true(back.seq == 1234567890123);
    assert_int_equal(back.count, 3);
    for (size_t i = 0; i < back.count; i++) {
        assert_string_equal(back.list[i].name, choices.list[i].name);
        assert_string_equal(back.list[i].value, choices.list[i].value);
        assert_string_equal(back.list[i].configured, choices.list[i].configured);
    }
    codec_deinit(&record);
}

static void a_record_that_is_cut_anywhere_is_none(void **state)
{
    (void)state;
    const struct options configured = DEFAULTS();
    const struct options wanted = OPTIONS("step=0.1", "loss=hinge");
    struct learning_choices choices;
    struct codec_writer record = {0};
    learning_choose(&configured, &wanted, 5, 7, &choices);
    learning_choices_put(&choices, &record);
    for (size_t size = 0; size < record.size; size++) {
        struct codec_reader reader = {.data = record.data, .size = size};
        struct learning_choices back = {.number = 99};
        assert_int_equal(learning_choices_get(&reader, &back), -1);
        assert_int_equal(back.number, 99); /* untouched */
    }
    codec_deinit(&record);
}

static void all_options_of_learning_fit_into_a_note(void **state)
{
    (void)state;
    struct learning_choices choices;
    struct codec_writer record = {0};
    const struct options configured =
        OPTIONS("title_weight=1.1000000000000001", "balance=0.10000000000000001",
                "step=0.10000000000000001", "specificity=0.10000000000000001",
                "propensity_a=0.10000000000000001", "propensity_b=0.10000000000000001",
                "evidence_half_life=1234567.1000000001");
    const struct options wanted =
        OPTIONS("stemming=on", "language=en", "word_pairs=on", "title_weight=1.3000000000000003",
                "loss=logistic", "correction=off", "even_out=off", "balance=0.30000000000000004",
                "step=0.30000000000000004", "specificity=0.30000000000000004",
                "propensity_a=0.30000000000000004", "propensity_b=0.30000000000000004",
                "evidence_half_life=1234567.3000000003", "shadow=off");
    learning_choose(&configured, &wanted, UINT64_MAX, UINT64_MAX, &choices);
    size_t of_learning = 0;
    for (size_t i = 0; i < options_count(); i++) {
        struct options_row row;
        options_describe(&wanted, i, &row);
        of_learning += row.group == OPTIONS_LEARNING;
    }
    assert_int_equal(choices.count, of_learning); /* a new option belongs into this test */
    learning_choices_put(&choices, &record);
    assert_in_range(record.size, 1, 1900);
    codec_deinit(&record);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_differs_is_chosen_and_nothing_else),
        cmocka_unit_test(choices_are_in_force_while_the_configuration_says_what_it_said),
        cmocka_unit_test(a_choice_that_the_configuration_has_overtaken_is_dropped),
        cmocka_unit_test(a_choice_that_is_written_into_the_configuration_changes_nothing),
        cmocka_unit_test(an_option_of_another_version_is_dropped),
        cmocka_unit_test(a_model_is_known_by_what_it_is_learned_with_and_by_its_rebuild),
        cmocka_unit_test(choices_come_back_from_a_record_as_they_were),
        cmocka_unit_test(a_record_that_is_cut_anywhere_is_none),
        cmocka_unit_test(all_options_of_learning_fit_into_a_note),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
