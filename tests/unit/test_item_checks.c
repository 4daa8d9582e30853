/*
 * Checks: somebody has gone through the whole vocabulary, and the complete list becomes the item's
 * tags. What the check found of pairs that nobody had examined before is a trial of whether the
 * tagger gives what belongs.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static const char ID[] = "log/1911-02-03";

enum {
    PICKED = false,
    RANDOM = true
};

/* The entry of one night has fog and gale (seq 1); another has bell, lamp and wreck (seq 2). */
static int set_up(void **state)
{
    (void)fixture_setup(state);
    (void)fixture_file_as(*state, (struct item_filing){.id = text_of(ID)},
                          (struct names){.tags = {"fog", "gale"}});
    (void)fixture_file_as(*state, (struct item_filing){.id = text_of("log/2")},
                          (struct names){.tags = {"bell", "lamp", "wreck"}});
    return 0;
}

static struct item_filed file_tags(struct fixture *fixture, struct names names)
{
    return fixture_file_as(fixture, (struct item_filing){.id = text_of(ID)}, names);
}

static void rule(struct fixture *fixture, struct rulings rulings)
{
    assert_int_equal(fixture_rule(fixture, said_by("e.ditor", ID), rulings).result, STORE_OK);
}

static struct said check(struct fixture *fixture, bool is_random, struct names names)
{
    struct said said = fixture_check(fixture, said_by("c.lerk", ID), is_random, names);
    assert_int_equal(said.result, STORE_OK);
    return said;
}

static void assert_tags(struct fixture *fixture, const char *tags)
{
    assert_names(fixture, fixture_item(fixture, ID).tags, tags);
}

/* What the check is a trial of: pairs that were on the item, and pairs that were missing. */
static void assert_trials(struct fixture *fixture, const char *given, const char *hidden)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_names(fixture, record.check.given, given);
    assert_names(fixture, record.check.hidden, hidden);
}

/* --- what a check says --- */

static void a_check_tells_what_was_missed_and_what_was_extra(void **state)
{
    struct fixture *fixture = *state;
    struct said said = check(fixture, RANDOM, (struct names){.tags = {"wreck", "fog", "bell"}});
    assert_string_equal(said.missed, "bell wreck");
    assert_string_equal(said.extra, "gale");
    assert_int_equal(said.filed.seq, 3);
}

static void the_complete_list_becomes_the_tags(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"wreck", "fog", "bell"}});
    assert_tags(fixture, "fog bell wreck");
    assert_names(fixture, fixture_item(fixture, ID).filed, "fog gale");
}

static void a_check_is_read_again(void **state)
{
    struct fixture *fixture = *state;
    struct item_saying saying = {
        .id = text_of(ID), .who = text_of("c.lerk"), .at_ms = -1858000000000, .uid = 1007};
    (void)fixture_check(fixture, saying, RANDOM, (struct names){.tags = {"wreck", "fog", "bell"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.change, ITEM_CHECKED);
    assert_int_equal(record.replaced, 1);
    assert_int_equal(record.filed_seq, 1);
    assert_int_equal(record.uid, 1007);
    assert_true(record.stored_at_ms == -1858000000000);
    assert_true(record.check.is_there);
    assert_true(record.check.is_random);
    assert_true(record.check.at_ms == -1858000000000);
    assert_true(is_text(record.check.checker, "c.lerk"));
    assert_int_equal(record.check.vocabulary, 5); /* all tags were there to be gone through */
    assert_int_equal(record.check.seen, 2);       /* fog and gale */
    assert_names(fixture, record.check.tags, "fog bell wreck");
    assert_names(fixture, record.check.extra, "gale");
}

static void a_check_may_leave_an_item_without_tags(void **state)
{
    struct fixture *fixture = *state;
    struct said said = check(fixture, RANDOM, (struct names){.tags = {NULL}});
    assert_string_equal(said.missed, "");
    assert_string_equal(said.extra, "fog gale");
    assert_tags(fixture, "");
    assert_true(fixture_item(fixture, ID).check.is_there);
}

static void a_check_that_finds_all_right_is_a_check(void **state)
{
    struct fixture *fixture = *state;
    struct said said = check(fixture, RANDOM, (struct names){.tags = {"fog", "gale"}});
    assert_string_equal(said.missed, "");
    assert_string_equal(said.extra, "");
    assert_trials(fixture, "fog gale", "");
    assert_int_equal(fixture_totals(fixture).evidence.checks_random, 1);
}

/* Ruled tags are on the item before the check as filed ones are. */
static void what_was_missed_is_told_against_the_tags_of_before(void **state)
{
    struct fixture *fixture = *state;
    rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"gale"}});
    struct said said = check(fixture, RANDOM, (struct names){.tags = {"gale", "bell", "lamp"}});
    assert_string_equal(said.missed, "gale lamp");
    assert_string_equal(said.extra, "fog");
    assert_int_equal(fixture_item(fixture, ID).check.seen, 2); /* fog and bell */
}

/* --- the latest word --- */

static void a_check_lifts_the_rulings_that_it_contradicts(void **state)
{
    struct fixture *fixture = *state;
    rule(fixture, (struct rulings){.belongs = {"bell", "lamp"}, .denied = {"gale", "fog"}});
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_names(fixture, record.tags, "fog bell");
    assert_names(fixture, record.belongs, "bell");
    assert_names(fixture, record.denied, "gale");
    assert_int_equal(fixture_counts(fixture, "lamp").ruled_belongs, 0);
    assert_int_equal(fixture_counts(fixture, "fog").ruled_not, 0);
    assert_int_equal(fixture_counts(fixture, "gale").ruled_not, 1);
}

static void a_ruling_after_a_check_counts(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell"}});
    rule(fixture, (struct rulings){.belongs = {"gale"}, .denied = {"bell"}});
    assert_tags(fixture, "fog gale");
    assert_true(fixture_item(fixture, ID).check.is_there);
}

static void a_filing_after_a_check_adds_to_the_list(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"bell", "fog"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog", "lamp"}});
    assert_tags(fixture, "fog bell lamp");
    struct item_record record = fixture_item(fixture, ID);
    assert_true(record.filed_after_check);
    assert_names(fixture, record.filed, "fog lamp");
    rule(fixture, (struct rulings){.denied = {"fog"}}); /* the filing is after the check still */
    assert_tags(fixture, "bell lamp");
}

static void the_same_filing_after_a_check_changes_nothing(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"bell"}});
    struct item_filed again = file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(again.seq, 1);
    assert_tags(fixture, "bell");
}

static void a_second_check_takes_the_place_of_the_first(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, PICKED, (struct names){.tags = {"fog", "bell"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale", "lamp"}});
    struct said said = check(fixture, RANDOM, (struct names){.tags = {"lamp", "wreck"}});
    assert_string_equal(said.missed, "wreck");
    assert_string_equal(said.extra, "fog gale bell");
    assert_tags(fixture, "lamp wreck");
    assert_false(fixture_item(fixture, ID).filed_after_check);
    assert_int_equal(fixture_totals(fixture).evidence.checks_picked, 0);
    assert_int_equal(fixture_totals(fixture).evidence.checks_random, 1);
}

/* --- trials --- */

static void pairs_that_nobody_had_examined_are_trials(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell", "wreck"}});
    assert_trials(fixture, "fog", "bell wreck");
}

static void what_was_prompted_is_no_trial(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){{"fog", "gale"}, {"gale"}, {NULL}});
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "gale"}});
    assert_trials(fixture, "fog", "");
}

static void what_was_ruled_in_is_no_trial(void **state)
{
    struct fixture *fixture = *state;
    rule(fixture, (struct rulings){.belongs = {"fog", "bell"}});
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "gale", "bell", "lamp"}});
    assert_trials(fixture, "gale", "lamp");
}

static void what_was_ruled_out_is_no_trial(void **state)
{
    struct fixture *fixture = *state;
    rule(fixture, (struct rulings){.denied = {"gale", "bell"}});
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "gale", "bell", "lamp"}});
    assert_trials(fixture, "fog", "lamp");
}

static void what_was_declined_is_no_trial(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog"}, .declined = {"bell", "lamp"}});
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell", "wreck"}});
    assert_trials(fixture, "fog", "wreck");
}

static void what_does_not_belong_is_no_trial(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog"}});
    assert_trials(fixture, "fog", "");
    assert_int_equal(fixture_counts(fixture, "gale").check_true, 0);
}

static void trials_stay_those_of_their_day(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell"}});
    (void)file_tags(fixture, (struct names){.tags = {"gale", "bell"}});
    rule(fixture, (struct rulings){.denied = {"bell"}});
    assert_trials(fixture, "fog", "bell");
}

/* --- counts --- */

static void a_random_check_counts_its_trials(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell"}});
    assert_int_equal(fixture_counts(fixture, "fog").check_true, 1);
    assert_int_equal(fixture_counts(fixture, "fog").check_given, 1);
    assert_int_equal(fixture_counts(fixture, "bell").check_true, 1);
    assert_int_equal(fixture_counts(fixture, "bell").check_given, 0);
    struct store_evidence evidence = fixture_totals(fixture).evidence;
    assert_int_equal(evidence.checks_random, 1);
    assert_int_equal(evidence.checks_picked, 0);
    assert_int_equal(evidence.seen, 2);  /* fog and gale, */
    assert_int_equal(evidence.wrong, 1); /* of which gale was taken off */
}

/* An item that somebody picked says nothing of the others. */
static void a_picked_check_counts_apart(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, PICKED, (struct names){.tags = {"fog", "bell"}});
    assert_tags(fixture, "fog bell");
    assert_false(fixture_item(fixture, ID).check.is_random);
    assert_int_equal(fixture_counts(fixture, "fog").check_true, 0);
    assert_int_equal(fixture_counts(fixture, "fog").check_given, 0);
    assert_int_equal(fixture_counts(fixture, "bell").check_true, 0);
    struct store_evidence evidence = fixture_totals(fixture).evidence;
    assert_int_equal(evidence.checks_random, 0);
    assert_int_equal(evidence.checks_picked, 1);
    assert_int_equal(evidence.seen, 0);
    assert_int_equal(evidence.wrong, 0);
}

static void the_pairs_of_a_checked_item_are_unchecked_no_more(void **state)
{
    struct fixture *fixture = *state;
    rule(fixture, (struct rulings){.belongs = {"bell"}});
    assert_int_equal(fixture_counts(fixture, "fog").unchecked, 1);
    assert_int_equal(fixture_counts(fixture, "bell").found, 1);
    (void)check(fixture, PICKED, (struct names){.tags = {"fog", "bell", "lamp"}});
    struct vocabulary_counts fog = fixture_counts(fixture, "fog");
    assert_int_equal(fog.unprompted, 1);
    assert_int_equal(fog.unchecked, 0);
    struct vocabulary_counts bell = fixture_counts(fixture, "bell");
    assert_int_equal(bell.count, 2);
    assert_int_equal(bell.unchecked, 1); /* of the other item */
    assert_int_equal(bell.found, 0);
    assert_int_equal(bell.ruled_belongs, 1);
    assert_int_equal(fixture_counts(fixture, "lamp").unprompted, 1); /* of the other item */
}

/* --- what is refused --- */

static void assert_refused(struct fixture *fixture, struct names names, size_t at, bool retired)
{
    uint64_t seq = fixture_totals(fixture).seq;
    struct said said = fixture_check(fixture, said_by("c.lerk", ID), RANDOM, names);
    assert_int_equal(said.result, STORE_REFUSED);
    assert_int_equal(said.refusal.list, REFUSED_TAG);
    assert_int_equal(said.refusal.at, at);
    assert_int_equal(said.refusal.retired, retired);
    assert_int_equal(fixture_totals(fixture).seq, seq);
    assert_int_equal(fixture_totals(fixture).tags, 5);
    assert_int_equal(fixture_totals(fixture).evidence.checks_random, 0);
    assert_tags(fixture, "fog gale");
}

static void an_unknown_tag_is_refused_and_nothing_is_changed(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (struct names){.tags = {"fog", "bell", "mermaid"}}, 2, false);
}

static void a_retired_tag_is_refused_on_an_item_that_does_not_have_it(void **state)
{
    struct fixture *fixture = *state;
    fixture_retire(fixture, "bell");
    assert_refused(fixture, (struct names){.tags = {"fog", "bell"}}, 1, true);
}

static void a_retired_tag_stays_on_an_item_that_has_it(void **state)
{
    struct fixture *fixture = *state;
    fixture_retire(fixture, "gale");
    struct said said = check(fixture, RANDOM, (struct names){.tags = {"gale", "bell"}});
    assert_string_equal(said.missed, "bell");
    assert_tags(fixture, "gale bell");
}

static void what_is_not_there_cannot_be_checked(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq = fixture_withdraw(fixture, ID);
    const struct names names = {.tags = {"fog"}};
    assert_int_equal(fixture_check(fixture, said_by("", ID), RANDOM, names).result,
                     STORE_NOT_FOUND);
    assert_int_equal(fixture_check(fixture, said_by("", "never"), RANDOM, names).result,
                     STORE_NOT_FOUND);
    assert_int_equal(fixture_totals(fixture).seq, seq);
}

static void a_check_goes_with_a_withdrawn_item(void **state)
{
    struct fixture *fixture = *state;
    (void)check(fixture, RANDOM, (struct names){.tags = {"fog", "bell"}});
    (void)fixture_withdraw(fixture, ID);
    struct store_evidence evidence = fixture_totals(fixture).evidence;
    assert_int_equal(evidence.checks_random, 0);
    assert_int_equal(evidence.seen, 0);
    assert_int_equal(evidence.wrong, 0);
    assert_int_equal(fixture_counts(fixture, "bell").check_true, 0);
    assert_int_equal(fixture_counts(fixture, "fog").check_given, 0);
    assert_int_equal(file_tags(fixture, (struct names){.tags = {"fog", "gale"}}).was, ITEM_NEW);
    assert_false(fixture_item(fixture, ID).check.is_there);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_check_tells_what_was_missed_and_what_was_extra),
        TEST(the_complete_list_becomes_the_tags),
        TEST(a_check_is_read_again),
        TEST(a_check_may_leave_an_item_without_tags),
        TEST(a_check_that_finds_all_right_is_a_check),
        TEST(what_was_missed_is_told_against_the_tags_of_before),
        TEST(a_check_lifts_the_rulings_that_it_contradicts),
        TEST(a_ruling_after_a_check_counts),
        TEST(a_filing_after_a_check_adds_to_the_list),
        TEST(the_same_filing_after_a_check_changes_nothing),
        TEST(a_second_check_takes_the_place_of_the_first),
        TEST(pairs_that_nobody_had_examined_are_trials),
        TEST(what_was_prompted_is_no_trial),
        TEST(what_was_ruled_in_is_no_trial),
        TEST(what_was_ruled_out_is_no_trial),
        TEST(what_was_declined_is_no_trial),
        TEST(what_does_not_belong_is_no_trial),
        TEST(trials_stay_those_of_their_day),
        TEST(a_random_check_counts_its_trials),
        TEST(a_picked_check_counts_apart),
        TEST(the_pairs_of_a_checked_item_are_unchecked_no_more),
        TEST(an_unknown_tag_is_refused_and_nothing_is_changed),
        TEST(a_retired_tag_is_refused_on_an_item_that_does_not_have_it),
        TEST(a_retired_tag_stays_on_an_item_that_has_it),
        TEST(what_is_not_there_cannot_be_checked),
        TEST(a_check_goes_with_a_withdrawn_item),
    };
    return cmocka_run_group_tests_name("item checks", tests, NULL, NULL);
}
