/*
 * Second taggings: the same item as another tagger tagged it, without knowing of the first. They
 * are evidence beside the item and change nothing on it.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static const char ID[] = "log/1911-02-03";
static const char TIME[] = "1911-02-04T09:00:00Z";

/* The entry of one night has fog, gale and, from a proposal, bell (seq 1), by m.quill. */
static int set_up(void **state)
{
    (void)fixture_setup(state);
    (void)fixture_file_as(*state,
                          (struct item_filing){.id = text_of(ID), .tagger = text_of("m.quill")},
                          (struct names){{"fog", "gale", "bell"}, {"bell"}, {NULL}});
    return 0;
}

static struct said tag_again(struct fixture *fixture, const char *tagger, struct names names)
{
    struct said said = fixture_tag_again(fixture, said_by(tagger, ID), TIME, true, names);
    assert_int_equal(said.result, STORE_OK);
    return said;
}

static void assert_seconds(struct fixture *fixture, uint64_t items, uint64_t first, uint64_t second,
                           uint64_t both)
{
    struct store_evidence evidence = fixture_totals(fixture).evidence;
    assert_int_equal(evidence.second_items, items);
    assert_int_equal(evidence.second_first, first);
    assert_int_equal(evidence.second_second, second);
    assert_int_equal(evidence.second_both, both);
}

/* --- beside the item --- */

static void a_second_tagging_is_read_again(void **state)
{
    struct fixture *fixture = *state;
    struct item_saying saying = {
        .id = text_of(ID), .who = text_of("o.reed"), .at_ms = -1858000000000, .uid = 1007};
    struct said said =
        fixture_tag_again(fixture, saying, TIME, true, (struct names){.tags = {"wreck", "fog"}});
    assert_int_equal(said.filed.was, ITEM_NEW);
    assert_int_equal(said.filed.seq, 2);
    struct item_record record = fixture_record(fixture, 2);
    assert_int_equal(record.change, ITEM_TAGGED_AGAIN);
    assert_int_equal(record.replaced, 1);
    assert_int_equal(record.uid, 1007);
    assert_int_equal(record.second_count, 1);
    assert_true(is_text(record.seconds[0].tagger, "o.reed"));
    assert_true(is_text(record.seconds[0].filed_at, TIME));
    assert_true(record.seconds[0].at_ms == -1858000000000);
    assert_names(fixture, record.seconds[0].tags, "fog wreck");
}

static void a_second_tagging_replaces_nothing(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_true(is_text(record.tagger, "m.quill"));
    assert_int_equal(record.filed_seq, 1);
    assert_names(fixture, record.filed, "fog gale bell");
    assert_names(fixture, record.tags, "fog gale bell");
    assert_names(fixture, record.prompted, "bell");
    assert_names(fixture, record.known_not, "");
    assert_int_equal(fixture_counts(fixture, "wreck").count, 0);
    assert_int_equal(fixture_counts(fixture, "fog").count, 1);
    assert_int_equal(fixture_counts(fixture, "fog").unprompted, 1);
    assert_int_equal(fixture_totals(fixture).items, 1);
}

static void a_second_tagging_stays_beside_rulings_and_checks(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    (void)fixture_rule(fixture, said_by("e.ditor", ID), (struct rulings){.denied = {"wreck"}});
    (void)fixture_check(fixture, said_by("c.lerk", ID), true, (struct names){.tags = {"gale"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.second_count, 1);
    assert_names(fixture, record.seconds[0].tags, "fog wreck");
    (void)tag_again(fixture, "p.inner", (struct names){.tags = {"gale"}});
    record = fixture_item(fixture, ID);
    assert_names(fixture, record.tags, "gale");
    assert_names(fixture, record.denied, "wreck");
    assert_true(record.check.is_there);
    assert_int_equal(record.second_count, 2);
}

static void a_second_tagging_may_hold_nothing(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {NULL}});
    assert_int_equal(fixture_item(fixture, ID).second_count, 1);
    assert_seconds(fixture, 1, 2, 0, 0);
}

static void an_item_of_no_named_tagger_may_be_tagged_again(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/2", "calm");
    struct said said = fixture_tag_again(fixture, said_by("o.reed", "log/2"), TIME, true,
                                         (struct names){.tags = {"fog"}});
    assert_int_equal(said.result, STORE_OK);
    assert_int_equal(said.filed.was, ITEM_NEW);
}

static void the_same_filing_after_a_second_tagging_is_the_same(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq = tag_again(fixture, "o.reed", (struct names){.tags = {"fog"}}).filed.seq;
    struct item_filed again = fixture_file_as(
        fixture, (struct item_filing){.id = text_of(ID), .tagger = text_of("m.quill")},
        (struct names){{"fog", "gale", "bell"}, {"bell"}, {NULL}});
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(again.seq, 1);
    assert_int_equal(fixture_totals(fixture).seq, seq);
}

static void a_revision_keeps_the_second_taggings(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    (void)fixture_file_as(fixture,
                          (struct item_filing){.id = text_of(ID), .tagger = text_of("m.quill")},
                          (struct names){.tags = {"wreck", "gale", "bell"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.second_count, 1);
    assert_true(is_text(record.seconds[0].tagger, "o.reed"));
    assert_seconds(fixture, 1, 3, 2, 1); /* first: all three now; both: wreck */
}

/* --- whose it is --- */

static void the_tagger_who_filed_the_item_is_refused(void **state)
{
    struct fixture *fixture = *state;
    struct said said = fixture_tag_again(fixture, said_by("m.quill", ID), TIME, true,
                                         (struct names){.tags = {"fog", "mermaid"}});
    assert_int_equal(said.result, STORE_REFUSED);
    assert_int_equal(said.refusal.list, REFUSED_TAGGER);
    assert_int_equal(fixture_totals(fixture).seq, 1);
    assert_int_equal(fixture_totals(fixture).tags, 3); /* none was opened */
    assert_int_equal(fixture_item(fixture, ID).second_count, 0);
}

static void a_tagger_whose_name_begins_alike_is_another(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "m.quil", (struct names){.tags = {"fog"}});
    (void)tag_again(fixture, "m.quill2", (struct names){.tags = {"fog"}});
    assert_int_equal(fixture_item(fixture, ID).second_count, 2);
}

static void a_later_tagging_by_the_same_tagger_takes_the_place_of_his_earlier_one(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    (void)tag_again(fixture, "p.inner", (struct names){.tags = {"gale"}});
    struct said said = tag_again(fixture, "o.reed", (struct names){.tags = {"lamp"}});
    assert_int_equal(said.filed.was, ITEM_REVISED);
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.second_count, 2);
    for (size_t i = 0; i < 2; i++) {
        bool is_his = is_text(record.seconds[i].tagger, "o.reed");
        assert_names(fixture, record.seconds[i].tags, is_his ? "lamp" : "gale");
    }
    assert_int_equal(fixture_counts(fixture, "wreck").second_true, 0);
    assert_int_equal(fixture_counts(fixture, "lamp").second_true, 1);
}

static void the_same_tagging_again_is_the_same_and_changes_nothing(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq = tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}}).filed.seq;
    struct said said = tag_again(fixture, "o.reed", (struct names){.tags = {"wreck", "fog"}});
    assert_int_equal(said.filed.was, ITEM_SAME);
    assert_int_equal(said.filed.seq, seq);
    assert_int_equal(fixture_totals(fixture).seq, seq);
    assert_seconds(fixture, 1, 2, 2, 1);
}

static void the_same_tags_by_another_tagger_are_a_tagging_of_their_own(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog"}});
    struct said said = tag_again(fixture, "p.inner", (struct names){.tags = {"fog"}});
    assert_int_equal(said.filed.was, ITEM_NEW);
    assert_int_equal(fixture_item(fixture, ID).second_count, 2);
}

/* --- counts --- */

/* First: fog and gale, bell being prompted; second: fog, bell and wreck; both: fog alone. */
static void a_second_tagging_is_counted(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "bell", "wreck"}});
    assert_seconds(fixture, 1, 2, 3, 1);
    assert_int_equal(fixture_counts(fixture, "fog").second_true, 1);
    assert_int_equal(fixture_counts(fixture, "fog").second_given, 1);
    assert_int_equal(fixture_counts(fixture, "bell").second_true, 1);
    assert_int_equal(fixture_counts(fixture, "bell").second_given, 0);
    assert_int_equal(fixture_counts(fixture, "wreck").second_true, 1);
    assert_int_equal(fixture_counts(fixture, "wreck").second_given, 0);
    assert_int_equal(fixture_counts(fixture, "gale").second_true, 0);
}

/* The first tagger's two unprompted tags stand against each of the others. */
static void each_second_tagging_counts(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    (void)tag_again(fixture, "p.inner", (struct names){.tags = {"fog", "gale", "lamp"}});
    assert_seconds(fixture, 1, 4, 5, 3);
    assert_int_equal(fixture_counts(fixture, "fog").second_true, 2);
    assert_int_equal(fixture_counts(fixture, "fog").second_given, 2);
}

static void what_the_first_tagger_gave_counts_even_if_it_was_taken_off(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog"}});
    (void)fixture_rule(fixture, said_by("e.ditor", ID), (struct rulings){.denied = {"fog"}});
    assert_seconds(fixture, 1, 2, 1, 1);
    assert_int_equal(fixture_counts(fixture, "fog").second_given, 1);
}

static void second_taggings_go_with_a_withdrawn_item(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck"}});
    (void)fixture_withdraw(fixture, ID);
    assert_seconds(fixture, 0, 0, 0, 0);
    assert_int_equal(fixture_counts(fixture, "fog").second_true, 0);
    assert_int_equal(fixture_counts(fixture, "fog").second_given, 0);
    assert_int_equal(fixture_counts(fixture, "wreck").second_true, 0);
}

/* --- the vocabulary's say --- */

static void an_unknown_tag_is_opened_where_that_is_allowed(void **state)
{
    struct fixture *fixture = *state;
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"fog", "wreck", "lamp"}});
    assert_int_equal(fixture_totals(fixture).tags, 5);
    assert_int_equal(fixture_tag(fixture, "wreck").opened_seq, 2);
    assert_int_equal(fixture_tag(fixture, "lamp").opened_seq, 2);
}

static void assert_refused(struct fixture *fixture, bool open_unknown, struct names names,
                           size_t at, bool retired)
{
    struct said said = fixture_tag_again(fixture, said_by("o.reed", ID), TIME, open_unknown, names);
    assert_int_equal(said.result, STORE_REFUSED);
    assert_int_equal(said.refusal.list, REFUSED_TAG);
    assert_int_equal(said.refusal.at, at);
    assert_int_equal(said.refusal.retired, retired);
    assert_int_equal(fixture_totals(fixture).seq, 1);
    assert_int_equal(fixture_totals(fixture).tags, 3);
    assert_seconds(fixture, 0, 0, 0, 0);
}

static void an_unknown_tag_is_refused_where_none_is_opened(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, false, (struct names){.tags = {"fog", "wreck"}}, 1, false);
}

static void a_retired_tag_is_refused_before_another_is_opened(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_rule(fixture, said_by("", ID), (struct rulings){.denied = {"gale"}});
    fixture_retire(fixture, "gale");
    struct said said = fixture_tag_again(fixture, said_by("o.reed", ID), TIME, true,
                                         (struct names){.tags = {"wreck", "gale"}});
    assert_int_equal(said.result, STORE_REFUSED);
    assert_int_equal(said.refusal.at, 1);
    assert_true(said.refusal.retired);
    assert_int_equal(fixture_totals(fixture).seq, 2);
    assert_int_equal(fixture_totals(fixture).tags, 3);
}

static void a_retired_tag_that_the_item_has_is_taken(void **state)
{
    struct fixture *fixture = *state;
    fixture_retire(fixture, "gale");
    (void)tag_again(fixture, "o.reed", (struct names){.tags = {"gale"}});
    assert_int_equal(fixture_counts(fixture, "gale").second_true, 1);
}

static void what_is_not_there_cannot_be_tagged_again(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_withdraw(fixture, ID);
    const struct names names = {.tags = {"fog", "mermaid"}};
    assert_int_equal(fixture_tag_again(fixture, said_by("o.reed", ID), TIME, true, names).result,
                     STORE_NOT_FOUND);
    assert_int_equal(
        fixture_tag_again(fixture, said_by("o.reed", "never"), TIME, true, names).result,
        STORE_NOT_FOUND);
    assert_int_equal(fixture_totals(fixture).seq, 2);
    assert_int_equal(fixture_totals(fixture).tags, 3);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_second_tagging_is_read_again),
        TEST(a_second_tagging_replaces_nothing),
        TEST(a_second_tagging_stays_beside_rulings_and_checks),
        TEST(a_second_tagging_may_hold_nothing),
        TEST(an_item_of_no_named_tagger_may_be_tagged_again),
        TEST(the_same_filing_after_a_second_tagging_is_the_same),
        TEST(a_revision_keeps_the_second_taggings),
        TEST(the_tagger_who_filed_the_item_is_refused),
        TEST(a_tagger_whose_name_begins_alike_is_another),
        TEST(a_later_tagging_by_the_same_tagger_takes_the_place_of_his_earlier_one),
        TEST(the_same_tagging_again_is_the_same_and_changes_nothing),
        TEST(the_same_tags_by_another_tagger_are_a_tagging_of_their_own),
        TEST(a_second_tagging_is_counted),
        TEST(each_second_tagging_counts),
        TEST(what_the_first_tagger_gave_counts_even_if_it_was_taken_off),
        TEST(second_taggings_go_with_a_withdrawn_item),
        TEST(an_unknown_tag_is_opened_where_that_is_allowed),
        TEST(an_unknown_tag_is_refused_where_none_is_opened),
        TEST(a_retired_tag_is_refused_before_another_is_opened),
        TEST(a_retired_tag_that_the_item_has_is_taken),
        TEST(what_is_not_there_cannot_be_tagged_again),
    };
    return cmocka_run_group_tests_name("second taggings", tests, NULL, NULL);
}
