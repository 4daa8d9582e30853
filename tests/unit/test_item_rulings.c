/*
 * Rulings: an editor's word on single tags of a filed item. The latest word on each tag counts,
 * whether a ruling said it or a filing.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static const char ID[] = "log/1911-02-03";

/* The entry of one night has fog and gale (seq 1); another has bell, lamp and wreck (seq 2). */
static int set_up(void **state)
{
    (void)fixture_setup(state);
    (void)fixture_file_as(*state,
                          (struct item_filing){.id = text_of(ID), .tagger = text_of("m.quill")},
                          (struct names){.tags = {"fog", "gale"}});
    (void)fixture_file_as(*state, (struct item_filing){.id = text_of("log/2")},
                          (struct names){.tags = {"bell", "lamp", "wreck"}});
    return 0;
}

static struct item_filed file_tags(struct fixture *fixture, struct names names)
{
    return fixture_file_as(
        fixture, (struct item_filing){.id = text_of(ID), .tagger = text_of("m.quill")}, names);
}

static struct said rule(struct fixture *fixture, struct rulings rulings)
{
    struct said said = fixture_rule(fixture, said_by("e.ditor", ID), rulings);
    assert_int_equal(said.result, STORE_OK);
    return said;
}

static void assert_ruled(struct fixture *fixture, const char *tags, const char *belongs,
                         const char *denied)
{
    struct item_record record = fixture_item(fixture, ID);
    assert_names(fixture, record.tags, tags);
    assert_names(fixture, record.belongs, belongs);
    assert_names(fixture, record.denied, denied);
}

/* --- a ruling --- */

static void what_is_ruled_to_belong_is_on_the_item_and_what_is_not_is_off(void **state)
{
    struct fixture *fixture = *state;
    struct said said = rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"gale"}});
    assert_int_equal(said.filed.seq, 3);
    assert_int_equal(said.filed.was, ITEM_REVISED);
    assert_ruled(fixture, "fog bell", "bell", "gale");
    assert_names(fixture, fixture_item(fixture, ID).filed, "fog gale");
}

static void a_ruling_is_read_again_with_its_editor_and_time(void **state)
{
    struct fixture *fixture = *state;
    struct item_saying saying = {
        .id = text_of(ID), .who = text_of("e.ditor"), .at_ms = -1858000000000, .uid = 1007};
    struct said said = fixture_rule(fixture, saying, (struct rulings){.belongs = {"bell"}});
    struct item_record record = fixture_record(fixture, said.filed.seq);
    assert_int_equal(record.change, ITEM_RULED);
    assert_true(record.stored_at_ms == -1858000000000);
    assert_int_equal(record.uid, 1007);
    assert_int_equal(record.replaced, 1);
    assert_int_equal(record.ruling_count, 1);
    assert_int_equal(record.rulings[0].tag, fixture_tag(fixture, "bell").number);
    assert_true(record.rulings[0].belongs);
    assert_true(record.rulings[0].at_ms == -1858000000000);
    assert_true(is_text(record.rulings[0].editor, "e.ditor"));
}

static void a_ruling_may_come_from_nobody(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_rule(fixture, said_by("", ID), (struct rulings){.denied = {"fog"}});
    assert_int_equal(fixture_item(fixture, ID).rulings[0].editor.size, 0);
}

static void a_ruling_leaves_what_was_filed_as_it_was(void **state)
{
    struct fixture *fixture = *state;
    struct item_filing filing = {.id = text_of(ID),
                                 .title = text_of("Night watch"),
                                 .text = text_of("fog from the west"),
                                 .fields = text_of("{\"station\":\"Far Skerry\"}"),
                                 .language = text_of("en"),
                                 .tagger = text_of("m.quill"),
                                 .filed_at = text_of("1911-02-03T04:00:00Z"),
                                 .stored_at_ms = 77};
    struct names names = {{"fog", "gale"}, {"gale"}, {"wreck"}};
    uint64_t seq = fixture_file_as(fixture, filing, names).seq;
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.seq, seq + 1);
    assert_int_equal(record.filed_seq, seq);
    assert_true(record.filed_stored_at_ms == 77);
    assert_true(is_text(record.title, "Night watch"));
    assert_true(is_text(record.text, "fog from the west"));
    assert_true(is_text(record.fields, "{\"station\":\"Far Skerry\"}"));
    assert_true(is_text(record.language, "en"));
    assert_true(is_text(record.tagger, "m.quill"));
    assert_true(is_text(record.filed_at, "1911-02-03T04:00:00Z"));
    assert_names(fixture, record.filed, "fog gale");
    assert_names(fixture, record.prompted, "gale");
    assert_names(fixture, record.declined, "wreck");
}

/* Somebody has looked: a pair of which that is known is no longer an unprompted one. */
static void a_tag_ruled_in_is_examined_and_one_that_was_given_stays_unprompted(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"fog", "bell"}, .denied = {"gale"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_names(fixture, record.unprompted, "fog");
    assert_names(fixture, record.examined, "bell");
    assert_names(fixture, record.known_not, "gale");
}

static void a_ruling_is_counted_with_its_tag(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"fog", "bell"}, .denied = {"gale"}});
    struct vocabulary_counts bell = fixture_counts(fixture, "bell");
    assert_int_equal(bell.count, 2);
    assert_int_equal(bell.unprompted, 1);
    assert_int_equal(bell.found, 1);
    assert_int_equal(bell.ruled_belongs, 1);
    struct vocabulary_counts fog = fixture_counts(fixture, "fog");
    assert_int_equal(fog.found, 0); /* it was there */
    assert_int_equal(fog.ruled_belongs, 1);
    struct vocabulary_counts gale = fixture_counts(fixture, "gale");
    assert_int_equal(gale.count, 0);
    assert_int_equal(gale.unprompted, 0);
    assert_int_equal(gale.unchecked, 0);
    assert_int_equal(gale.ruled_not, 1);
}

/* --- the latest word --- */

static void the_latest_ruling_on_a_tag_counts(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    (void)rule(fixture, (struct rulings){.denied = {"bell"}});
    assert_ruled(fixture, "fog gale", "", "bell");
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    assert_ruled(fixture, "fog gale bell", "bell", "");
    assert_int_equal(fixture_item(fixture, ID).ruling_count, 1);
    assert_int_equal(fixture_counts(fixture, "bell").ruled_belongs, 1);
    assert_int_equal(fixture_counts(fixture, "bell").ruled_not, 0);
}

static void a_ruling_leaves_those_on_other_tags(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"wreck"}, .denied = {"gale"}});
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"lamp"}});
    (void)rule(fixture, (struct rulings){.denied = {"wreck"}});
    assert_ruled(fixture, "fog bell", "bell", "gale lamp wreck");
}

static void rulings_are_read_in_the_order_of_their_tags(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"wreck", "bell"}, .denied = {"lamp", "fog"}});
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.ruling_count, 4);
    for (size_t i = 1; i < record.ruling_count; i++) {
        assert_true(record.rulings[i - 1].tag < record.rulings[i].tag);
    }
}

static void a_filing_that_gives_a_tag_ruled_out_lifts_that(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.denied = {"bell", "lamp"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog", "bell"}});
    assert_ruled(fixture, "fog bell", "", "lamp");
    assert_int_equal(fixture_counts(fixture, "bell").ruled_not, 0);
}

static void a_filing_that_declines_a_tag_ruled_in_lifts_that(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"bell", "lamp"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog"}, .declined = {"bell"}});
    assert_ruled(fixture, "fog lamp", "lamp", "");
    assert_names(fixture, fixture_item(fixture, ID).known_not, "bell");
}

static void a_filing_that_agrees_with_a_ruling_leaves_it(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"lamp"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog", "bell"}, .declined = {"lamp"}});
    assert_ruled(fixture, "fog bell", "bell", "lamp");
}

static void a_revision_keeps_the_rulings_of_which_it_says_nothing(void **state)
{
    struct fixture *fixture = *state;
    struct said said = rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"gale"}});
    struct item_filed filed = file_tags(fixture, (struct names){.tags = {"wreck"}});
    assert_int_equal(filed.was, ITEM_REVISED);
    assert_int_equal(filed.seq, said.filed.seq + 1);
    assert_ruled(fixture, "bell wreck", "bell", "gale");
    struct item_record record = fixture_item(fixture, ID);
    assert_int_equal(record.change, ITEM_FILED);
    assert_int_equal(record.filed_seq, filed.seq);
    assert_true(is_text(record.rulings[0].editor, "e.ditor"));
}

/* What had been found missing counts as found until the desk gives it itself. */
static void a_tag_ruled_in_and_then_given_was_not_found(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    assert_int_equal(fixture_counts(fixture, "bell").found, 1);
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale", "bell"}});
    assert_int_equal(fixture_counts(fixture, "bell").found, 0);
    assert_int_equal(fixture_counts(fixture, "bell").unprompted, 2);
}

static void a_declined_tag_that_is_ruled_in_is_on_the_item(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog"}, .declined = {"bell", "lamp"}});
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    assert_ruled(fixture, "fog bell", "bell", "");
    assert_names(fixture, fixture_item(fixture, ID).known_not, "lamp");
}

/* --- the same filing again --- */

static void a_filing_equal_to_the_stored_one_is_the_same_and_the_rulings_stand(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq =
        rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"gale"}}).filed.seq;
    struct item_filed again = file_tags(fixture, (struct names){.tags = {"gale", "fog"}});
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(again.seq, 1); /* of the stored filing, not of the ruling */
    assert_int_equal(fixture_totals(fixture).seq, seq);
    assert_ruled(fixture, "fog bell", "bell", "gale");
    assert_int_equal(fixture_item(fixture, ID).seq, seq);
}

static void the_same_filing_has_the_seq_of_the_last_revision(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.denied = {"gale"}});
    uint64_t seq = file_tags(fixture, (struct names){.tags = {"fog"}}).seq;
    (void)rule(fixture, (struct rulings){.belongs = {"gale"}});
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}});
    struct item_filed again = file_tags(fixture, (struct names){.tags = {"fog"}});
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(again.seq, seq);
}

/* The filing of before the rulings, which is no longer the stored one. */
static void an_older_filing_is_a_revision(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog"}});
    (void)rule(fixture, (struct rulings){.denied = {"gale"}});
    struct item_filed again = file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    assert_int_equal(again.was, ITEM_REVISED);
    assert_ruled(fixture, "fog gale", "", "");
}

/* --- what is refused --- */

/* Nothing has changed since set_up, or since `seq`. */
static void assert_refused(struct fixture *fixture, struct rulings rulings, int list, size_t at,
                           bool retired)
{
    uint64_t seq = fixture_totals(fixture).seq;
    struct said said = fixture_rule(fixture, said_by("e.ditor", ID), rulings);
    assert_int_equal(said.result, STORE_REFUSED);
    assert_int_equal(said.refusal.list, list);
    assert_int_equal(said.refusal.at, at);
    assert_int_equal(said.refusal.retired, retired);
    assert_int_equal(fixture_totals(fixture).seq, seq);
    assert_int_equal(fixture_totals(fixture).tags, 5);
    assert_int_equal(fixture_item(fixture, ID).ruling_count, 0);
    assert_int_equal(fixture_counts(fixture, "bell").ruled_belongs, 0);
    assert_int_equal(fixture_counts(fixture, "bell").ruled_not, 0);
}

static void an_unknown_tag_is_refused_and_nothing_is_changed(void **state)
{
    struct fixture *fixture = *state;
    assert_refused(fixture, (struct rulings){.belongs = {"bell", "mermaid"}, .denied = {"fog"}},
                   REFUSED_BELONGS, 1, false);
    assert_refused(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"fog", "mermaid"}},
                   REFUSED_NOT, 1, false);
    assert_refused(fixture, (struct rulings){.denied = {"mermaid"}}, REFUSED_NOT, 0, false);
}

static void a_retired_tag_is_refused_on_an_item_that_does_not_have_it(void **state)
{
    struct fixture *fixture = *state;
    fixture_retire(fixture, "lamp");
    assert_refused(fixture, (struct rulings){.belongs = {"bell", "lamp"}}, REFUSED_BELONGS, 1,
                   true);
    assert_refused(fixture, (struct rulings){.denied = {"lamp"}}, REFUSED_NOT, 0, true);
}

static void a_retired_tag_may_be_ruled_on_where_the_item_has_it(void **state)
{
    struct fixture *fixture = *state;
    fixture_retire(fixture, "gale");
    (void)rule(fixture, (struct rulings){.belongs = {"gale"}});
    assert_ruled(fixture, "fog gale", "gale", "");
    (void)rule(fixture, (struct rulings){.denied = {"gale"}});
    assert_ruled(fixture, "fog", "", "gale");
    /* Now the item does not have it any more. */
    struct said said =
        fixture_rule(fixture, said_by("e.ditor", ID), (struct rulings){.belongs = {"gale"}});
    assert_int_equal(said.result, STORE_REFUSED);
    assert_true(said.refusal.retired);
}

static void what_is_not_there_cannot_be_ruled_on(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq = fixture_withdraw(fixture, ID);
    const struct rulings rulings = {.belongs = {"fog"}};
    assert_int_equal(fixture_rule(fixture, said_by("", ID), rulings).result, STORE_NOT_FOUND);
    assert_int_equal(fixture_rule(fixture, said_by("", "never"), rulings).result, STORE_NOT_FOUND);
    assert_int_equal(fixture_totals(fixture).seq, seq);
}

static void rulings_go_with_a_withdrawn_item(void **state)
{
    struct fixture *fixture = *state;
    (void)rule(fixture, (struct rulings){.belongs = {"bell"}, .denied = {"gale"}});
    (void)fixture_withdraw(fixture, ID);
    assert_int_equal(fixture_counts(fixture, "bell").ruled_belongs, 0);
    assert_int_equal(fixture_counts(fixture, "bell").found, 0);
    assert_int_equal(fixture_counts(fixture, "gale").ruled_not, 0);
    assert_int_equal(file_tags(fixture, (struct names){.tags = {"fog", "gale"}}).was, ITEM_NEW);
    assert_ruled(fixture, "fog gale", "", "");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_ruled_to_belong_is_on_the_item_and_what_is_not_is_off),
        TEST(a_ruling_is_read_again_with_its_editor_and_time),
        TEST(a_ruling_may_come_from_nobody),
        TEST(a_ruling_leaves_what_was_filed_as_it_was),
        TEST(a_tag_ruled_in_is_examined_and_one_that_was_given_stays_unprompted),
        TEST(a_ruling_is_counted_with_its_tag),
        TEST(the_latest_ruling_on_a_tag_counts),
        TEST(a_ruling_leaves_those_on_other_tags),
        TEST(rulings_are_read_in_the_order_of_their_tags),
        TEST(a_filing_that_gives_a_tag_ruled_out_lifts_that),
        TEST(a_filing_that_declines_a_tag_ruled_in_lifts_that),
        TEST(a_filing_that_agrees_with_a_ruling_leaves_it),
        TEST(a_revision_keeps_the_rulings_of_which_it_says_nothing),
        TEST(a_tag_ruled_in_and_then_given_was_not_found),
        TEST(a_declined_tag_that_is_ruled_in_is_on_the_item),
        TEST(a_filing_equal_to_the_stored_one_is_the_same_and_the_rulings_stand),
        TEST(the_same_filing_has_the_seq_of_the_last_revision),
        TEST(an_older_filing_is_a_revision),
        TEST(an_unknown_tag_is_refused_and_nothing_is_changed),
        TEST(a_retired_tag_is_refused_on_an_item_that_does_not_have_it),
        TEST(a_retired_tag_may_be_ruled_on_where_the_item_has_it),
        TEST(what_is_not_there_cannot_be_ruled_on),
        TEST(rulings_go_with_a_withdrawn_item),
    };
    return cmocka_run_group_tests_name("item rulings", tests, NULL, NULL);
}
