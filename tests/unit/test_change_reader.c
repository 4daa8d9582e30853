/* A change as the learner takes it. */
#include "daemon/change_reader.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "daemon/backlog.h"
#include "tests/unit/store_fixture.h"

struct reading {
    struct fixture *store;
    struct change_reader *reader;
    struct change_read read;
    struct store_error error;
};

/* 1 a filed; 2 b filed; 3 a revised; 4 b withdrawn. */
static int set_up(void **state)
{
    static const struct features_settings WORDS = {.title_weight = 1.5};
    struct reading *reading = calloc(1, sizeof *reading);
    assert_non_null(reading);
    assert_int_equal(fixture_setup((void **)&reading->store), 0);
    assert_int_equal(change_reader_new(&WORDS, &reading->reader), 0);
    const struct names weather = {.tags = {"weather"}};
    const struct names both = {.tags = {"weather", "wrecks"}};
    (void)fixture_file_as(reading->store,
                          (struct item_filing){.id = text_of("a"), .text = text_of("fog bell")},
                          weather);
    (void)fixture_file_as(
        reading->store, (struct item_filing){.id = text_of("b"), .text = text_of("lamp")}, weather);
    (void)fixture_file_as(reading->store,
                          (struct item_filing){.id = text_of("a"),
                                               .title = text_of("Wreck"),
                                               .text = text_of("dense fog")},
                          both);
    (void)fixture_withdraw(reading->store, "b");
    *state = reading;
    return 0;
}

static int tear_down(void **state)
{
    struct reading *reading = *state;
    change_reader_free(reading->reader);
    assert_int_equal(fixture_teardown((void **)&reading->store), 0);
    free(reading);
    return 0;
}

/* What it hands out stays when the view is over. */
static const struct change_read *read_change(struct reading *reading, uint64_t seq)
{
    struct store_view *view = fixture_read(reading->store);
    assert_int_equal(
        change_reader_read(reading->reader, view, seq, &reading->read, &reading->error), STORE_OK);
    store_end(view);
    return &reading->read;
}

static const struct change_read *read_anew(struct reading *reading, uint64_t seq, uint64_t moment)
{
    struct store_view *view = fixture_read(reading->store);
    assert_int_equal(change_reader_read_anew(reading->reader, view, seq, moment, &reading->read,
                                             &reading->error),
                     STORE_OK);
    store_end(view);
    return &reading->read;
}

static void a_filing_is_an_item_that_replaces_nothing(void **state)
{
    const struct change_read *read = read_change(*state, 1);
    assert_null(read->replaced);
    assert_int_equal(read->item->number, 1);
    assert_int_equal(read->item->feature_count, 2);
    assert_int_equal(read->item->tag_count, 1);
    assert_int_equal(read->cost, backlog_cost(strlen("fog bell"), 1));
}

static void a_revision_has_both_sides(void **state)
{
    const struct change_read *read = read_change(*state, 3);
    assert_int_equal(read->item->number, 3);
    assert_int_equal(read->item->feature_count, 3);
    assert_int_equal(read->replaced->number, 1);
    assert_int_equal(read->replaced->feature_count, 2);
    assert_int_equal(read->cost, backlog_cost(strlen("Wreck") + strlen("dense fog"), 2));
}

static void a_withdrawal_has_only_what_it_replaced(void **state)
{
    const struct change_read *read = read_change(*state, 4);
    assert_null(read->item);
    assert_int_equal(read->replaced->number, 2);
}

static void what_was_erased_is_not_there(void **state)
{
    struct reading *reading = *state;
    assert_int_equal(fixture_erase(reading->store, 4), 2);
    const struct change_read *read = read_change(reading, 1);
    assert_null(read->item);
    assert_null(read->replaced);
    read = read_change(reading, 3);
    assert_int_equal(read->item->number, 3);
    assert_null(read->replaced);
}

static void anew_an_item_is_met_at_its_latest_change_and_replaces_nothing(void **state)
{
    struct reading *reading = *state;
    assert_null(read_anew(reading, 1, 4)->item); /* there is a 3 */
    assert_null(read_anew(reading, 2, 4)->item); /* it is withdrawn by then */
    const struct change_read *read = read_anew(reading, 3, 4);
    assert_int_equal(read->item->number, 3);
    assert_null(read->replaced);
    read = read_anew(reading, 4, 4);
    assert_null(read->item);
    assert_null(read->replaced);
}

static void anew_what_comes_behind_the_moment_does_not_count_before_it(void **state)
{
    struct reading *reading = *state;
    assert_int_equal(read_anew(reading, 1, 2)->item->number, 1);
    assert_int_equal(read_anew(reading, 2, 2)->item->number, 2);
    const struct change_read *read = read_anew(reading, 3, 2);
    assert_int_equal(read->item->number, 3);
    assert_int_equal(read->replaced->number, 1);
}

static void an_item_can_be_read_alone(void **state)
{
    struct reading *reading = *state;
    const struct model_item *item = NULL;
    struct store_view *view = fixture_read(reading->store);
    assert_int_equal(change_reader_item(reading->reader, view, 3, &item, &reading->error),
                     STORE_OK);
    assert_int_equal(item->number, 3);
    assert_int_equal(change_reader_item(reading->reader, view, 4, &item, &reading->error),
                     STORE_OK);
    assert_null(item);
    store_end(view);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_filing_is_an_item_that_replaces_nothing),
        TEST(a_revision_has_both_sides),
        TEST(a_withdrawal_has_only_what_it_replaced),
        TEST(what_was_erased_is_not_there),
        TEST(anew_an_item_is_met_at_its_latest_change_and_replaces_nothing),
        TEST(anew_what_comes_behind_the_moment_does_not_count_before_it),
        TEST(an_item_can_be_read_alone),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
