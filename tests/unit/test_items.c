/*
 * Filing, withdrawing and reading: when an item is new, revised or the same, the chain of what took
 * the place of what, and what the vocabulary refuses.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* Files the entry of one night. */
static struct item_filed file(struct fixture *fixture, struct item_filing filing,
                              struct names names)
{
    filing.id = text_of("log/1911-02-03");
    return fixture_file_as(fixture, filing, names);
}

static const struct item_filing nothing_more;

static struct item_filed file_tags(struct fixture *fixture, struct names names)
{
    return file(fixture, nothing_more, names);
}

static int find(struct fixture *fixture, const char *id, uint64_t *ret_seq)
{
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    int result = items_find(view, text_of(id), ret_seq, &error);
    store_end(view);
    return result;
}

/* --- new, revised, the same --- */

static void the_first_filing_is_new_and_has_seq_1(void **state)
{
    struct fixture *fixture = *state;
    struct item_filed filed = fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(filed.was, ITEM_NEW);
    assert_int_equal(filed.seq, 1);
    assert_int_equal(fixture_totals(fixture).items, 1);
}

static void what_was_filed_is_read_again(void **state)
{
    struct fixture *fixture = *state;
    struct item_filing filing = {.title = text_of("Night watch"),
                                 .text = text_of("fog from the west"),
                                 .fields = text_of("{\"station\":\"Far Skerry\"}"),
                                 .language = text_of("en"),
                                 .tagger = text_of("m.quill"),
                                 .filed_at = text_of("1911-02-03T04:00:00Z"),
                                 .stored_at_ms = -1858967999999,
                                 .uid = 1007};
    uint64_t seq = file(fixture, filing, (struct names){{"fog", "gale"}, {"gale"}, {NULL}}).seq;
    struct item_record record = fixture_record(fixture, seq);
    assert_int_equal(record.seq, seq);
    assert_int_equal(record.replaced, 0);
    assert_false(item_is_withdrawn(&record));
    assert_true(is_text(record.id, "log/1911-02-03"));
    assert_true(is_text(record.title, "Night watch"));
    assert_true(is_text(record.text, "fog from the west"));
    assert_true(is_text(record.fields, "{\"station\":\"Far Skerry\"}"));
    assert_true(is_text(record.language, "en"));
    assert_true(is_text(record.tagger, "m.quill"));
    assert_true(is_text(record.filed_at, "1911-02-03T04:00:00Z"));
    assert_true(record.stored_at_ms == -1858967999999);
    assert_int_equal(record.uid, 1007);
    /* Tags are numbered as they are opened: fog 0, gale 1. */
    assert_int_equal(record.tags.count, 2);
    assert_int_equal(record.tags.list[0], 0);
    assert_int_equal(record.tags.list[1], 1);
    assert_int_equal(record.prompted.count, 1);
    assert_int_equal(record.prompted.list[0], 1);
    assert_int_equal(record.declined.count, 0);
}

static void a_second_filing_of_the_same_is_the_same_and_changes_nothing(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_file_text(fixture, "log/2", "gale");
    struct item_filed again = fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(again.seq, 1);
    assert_int_equal(fixture_totals(fixture).seq, 2);
}

static void tags_in_another_order_are_the_same(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale", "wreck"}});
    struct item_filed again = file_tags(fixture, (struct names){.tags = {"wreck", "fog", "gale"}});
    assert_int_equal(again.was, ITEM_SAME);
    assert_int_equal(fixture_tag(fixture, "wreck").counts.count, 1);
}

static void an_absent_member_is_an_empty_one(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog"}});
    struct item_filing empty = {.title = text_of(""), .text = text_of(""), .fields = text_of("")};
    assert_int_equal(file(fixture, empty, (struct names){.tags = {"fog"}}).was, ITEM_SAME);
}

static void tagger_and_time_of_filing_do_not_count(void **state)
{
    struct fixture *fixture = *state;
    struct item_filing first = {.tagger = text_of("m.quill"), .filed_at = text_of("1911")};
    struct item_filing second = {
        .tagger = text_of("o.reed"), .filed_at = text_of("1912"), .stored_at_ms = 5, .uid = 7};
    (void)file(fixture, first, (struct names){.tags = {"fog"}});
    assert_int_equal(file(fixture, second, (struct names){.tags = {"fog"}}).was, ITEM_SAME);
    assert_true(is_text(fixture_record(fixture, 1).tagger, "m.quill"));
}

static void each_other_member_makes_a_revision(void **state)
{
    struct fixture *fixture = *state;
    const struct item_filing filings[] = {{.title = text_of("a")},
                                          {.text = text_of("a")},
                                          {.fields = text_of("a")},
                                          {.language = text_of("a")}};
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog"}});
    uint64_t seq = 2;
    for (size_t i = 0; i < sizeof filings / sizeof filings[0]; i++) {
        struct item_filed filed = file(fixture, filings[i], (struct names){.tags = {"fog"}});
        assert_int_equal(filed.was, ITEM_REVISED);
        assert_int_equal(filed.seq, ++seq);
    }
    const struct names lists[] = {{.tags = {"fog", "gale"}},
                                  {.tags = {"fog"}, .prompted = {"fog"}},
                                  {.tags = {"fog"}, .declined = {"gale"}},
                                  {.tags = {NULL}}};
    for (size_t i = 0; i < sizeof lists / sizeof lists[0]; i++) {
        struct item_filed filed = file_tags(fixture, lists[i]);
        assert_int_equal(filed.was, ITEM_REVISED);
        assert_int_equal(filed.seq, ++seq);
    }
    assert_int_equal(fixture_totals(fixture).items, 1);
}

static void the_border_between_two_members_counts(void **state)
{
    struct fixture *fixture = *state;
    struct item_filing first = {.title = text_of("fog"), .text = text_of("gale")};
    struct item_filing second = {.title = text_of("foggale")};
    (void)file(fixture, first, (struct names){0});
    assert_int_equal(file(fixture, second, (struct names){0}).was, ITEM_REVISED);
}

/* --- withdrawing --- */

static void a_withdrawn_item_is_not_found(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seq = 0;
    (void)fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(fixture_withdraw(fixture, "log/1"), 2);
    assert_int_equal(find(fixture, "log/1", &seq), STORE_NOT_FOUND);
    assert_int_equal(seq, 0);
    assert_int_equal(fixture_totals(fixture).items, 0);
    struct item_record record = fixture_record(fixture, 2);
    assert_true(item_is_withdrawn(&record));
    assert_true(is_text(record.id, "log/1"));
    assert_int_equal(record.replaced, 1);
    assert_int_equal(record.text.size, 0);
    assert_int_equal(record.tags.count, 0);
}

static void what_is_not_there_cannot_be_withdrawn(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    uint64_t seq = 0;
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_withdraw(fixture, "log/1");
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(items_withdraw(view, text_of("log/1"), 0, 0, &fixture->buffer, &seq, &error),
                     STORE_NOT_FOUND);
    assert_int_equal(items_withdraw(view, text_of("never"), 0, 0, &fixture->buffer, &seq, &error),
                     STORE_NOT_FOUND);
    fixture_commit(view);
    assert_int_equal(fixture_totals(fixture).seq, 2);
}

static void an_item_filed_again_after_its_withdrawal_is_new(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_withdraw(fixture, "log/1");
    struct item_filed again = fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(again.was, ITEM_NEW);
    assert_int_equal(again.seq, 3);
    assert_int_equal(fixture_record(fixture, 3).replaced, 2);
    assert_int_equal(fixture_totals(fixture).items, 1);
}

/* --- what took the place of what --- */

static void each_change_names_the_one_it_replaced(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_file_text(fixture, "log/2", "calm");
    (void)fixture_file_text(fixture, "log/1", "fog and gale");
    (void)fixture_withdraw(fixture, "log/1");
    assert_int_equal(fixture_record(fixture, 3).replaced, 1);
    assert_int_equal(fixture_record(fixture, 4).replaced, 3);
    /* What was replaced is still there for the learner to take out. */
    assert_true(is_text(fixture_record(fixture, 1).text, "fog"));
    assert_true(is_text(fixture_record(fixture, 3).text, "fog and gale"));
}

static int read_change(struct fixture *fixture, uint64_t seq)
{
    struct store_error error = {0};
    struct item_record record = {0};
    struct store_view *view = fixture_read(fixture);
    int result = items_read(view, seq, &fixture->reading, &record, &error);
    store_end(view);
    return result;
}

static void what_was_replaced_is_erased_once_passed(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", "fog");          /* 1 */
    (void)fixture_file_text(fixture, "log/1", "fog and gale"); /* 2 replaces 1 */
    (void)fixture_withdraw(fixture, "log/1");                  /* 3 replaces 2 */
    assert_int_equal(fixture_erase(fixture, 1), 0);
    assert_int_equal(fixture_erase(fixture, 2), 1);
    assert_int_equal(read_change(fixture, 1), STORE_NOT_FOUND);
    assert_int_equal(read_change(fixture, 2), STORE_OK);
    assert_int_equal(fixture_erase(fixture, 3), 1);
    assert_int_equal(read_change(fixture, 2), STORE_NOT_FOUND);
    assert_int_equal(fixture_record(fixture, 3).change, ITEM_WITHDRAWN);
}

static void a_long_text_is_erased_with_all_its_pieces(void **state)
{
    struct fixture *fixture = *state;
    enum {
        BYTES = 10000 /* six pieces of at most 1,900 */
    };
    char letters[BYTES];
    memset(letters, 'x', sizeof letters);
    struct item_filing filing = {.id = text_of("log/1"), .text = {letters, sizeof letters}};
    (void)fixture_file(fixture, filing);
    assert_memory_equal(fixture_record(fixture, 1).text.data, letters, sizeof letters);
    (void)fixture_erase(fixture, fixture_withdraw(fixture, "log/1"));
    assert_int_equal(read_change(fixture, 1), STORE_NOT_FOUND);
    assert_int_equal(fixture_record(fixture, 2).change, ITEM_WITHDRAWN);
}

/* --- the vocabulary's say --- */

static int try_to_file(struct fixture *fixture, const char *tag, const char *declined,
                       struct item_refusal *refusal)
{
    struct store_error error = {0};
    struct item_filed filed = {0};
    struct store_text tags[] = {text_of("fog"), text_of(tag)};
    struct store_text refused = text_of(declined ? declined : "");
    struct item_filing filing = {.id = text_of("log/9"),
                                 .tags = tags,
                                 .tag_count = 2,
                                 .declined = &refused,
                                 .declined_count = declined ? 1 : 0};
    struct store_view *view = fixture_write(fixture);
    int result = items_file(view, &filing, &fixture->buffer, &filed, refusal, &error);
    fixture_commit(view);
    return result;
}

static void an_unknown_tag_is_refused_where_none_is_opened(void **state)
{
    struct fixture *fixture = *state;
    struct item_refusal refusal = {.list = REFUSED_DECLINED};
    (void)file_tags(fixture, (struct names){.tags = {"fog"}});
    assert_int_equal(try_to_file(fixture, "gale", NULL, &refusal), STORE_REFUSED);
    assert_int_equal(refusal.list, REFUSED_TAG);
    assert_int_equal(refusal.at, 1);
    assert_false(refusal.retired);
    assert_int_equal(fixture_totals(fixture).seq, 1);
    assert_int_equal(fixture_totals(fixture).tags, 1);
    assert_int_equal(fixture_tag(fixture, "fog").counts.count, 1);
}

static void an_unknown_tag_that_was_declined_is_refused(void **state)
{
    struct fixture *fixture = *state;
    struct item_refusal refusal = {0};
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    assert_int_equal(try_to_file(fixture, "gale", "wreck", &refusal), STORE_REFUSED);
    assert_int_equal(refusal.list, REFUSED_DECLINED);
    assert_int_equal(refusal.at, 0);
}

static void retire(struct fixture *fixture, const char *name)
{
    struct store_error error = {0};
    struct vocabulary_tag tag = fixture_tag(fixture, name);
    tag.state = VOCABULARY_RETIRED;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_put(view, &tag, &error), STORE_OK);
    fixture_commit(view);
}

static void a_retired_tag_is_refused_on_an_item_that_does_not_have_it(void **state)
{
    struct fixture *fixture = *state;
    struct item_refusal refusal = {0};
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    retire(fixture, "gale");
    assert_int_equal(try_to_file(fixture, "gale", NULL, &refusal), STORE_REFUSED);
    assert_int_equal(refusal.at, 1);
    assert_true(refusal.retired);
}

static void a_retired_tag_stays_on_an_item_that_has_it(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    retire(fixture, "gale");
    struct item_filing filing = {.text = text_of("revised")};
    struct item_filed filed = file(fixture, filing, (struct names){.tags = {"fog", "gale"}});
    assert_int_equal(filed.was, ITEM_REVISED);
    assert_int_equal(fixture_tag(fixture, "gale").counts.count, 1);
    assert_int_equal(fixture_tag(fixture, "gale").state, VOCABULARY_RETIRED);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_first_filing_is_new_and_has_seq_1),
        TEST(what_was_filed_is_read_again),
        TEST(a_second_filing_of_the_same_is_the_same_and_changes_nothing),
        TEST(tags_in_another_order_are_the_same),
        TEST(an_absent_member_is_an_empty_one),
        TEST(tagger_and_time_of_filing_do_not_count),
        TEST(each_other_member_makes_a_revision),
        TEST(the_border_between_two_members_counts),
        TEST(a_withdrawn_item_is_not_found),
        TEST(what_is_not_there_cannot_be_withdrawn),
        TEST(an_item_filed_again_after_its_withdrawal_is_new),
        TEST(each_change_names_the_one_it_replaced),
        TEST(what_was_replaced_is_erased_once_passed),
        TEST(a_long_text_is_erased_with_all_its_pieces),
        TEST(an_unknown_tag_is_refused_where_none_is_opened),
        TEST(an_unknown_tag_that_was_declined_is_refused),
        TEST(a_retired_tag_is_refused_on_an_item_that_does_not_have_it),
        TEST(a_retired_tag_stays_on_an_item_that_has_it),
    };
    return cmocka_run_group_tests_name("items", tests, NULL, NULL);
}
