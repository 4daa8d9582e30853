/* What changed after a seq, page by page. */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

struct page {
    uint64_t seqs[8];
    size_t count;
    size_t stop_after;
};

static int note_change(void *user, const struct item_record *record)
{
    struct page *page = user;
    assert_true(page->count < 8);
    page->seqs[page->count++] = record->seq;
    return page->count == page->stop_after ? STORE_STOPPED : STORE_OK;
}

static uint64_t changed(struct fixture *fixture, uint64_t since, size_t most, struct page *page)
{
    struct store_error error = {0};
    uint64_t next = UINT64_MAX;
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(
        items_changed(view, since, most, note_change, page, &fixture->reading, &next, &error),
        STORE_OK);
    store_end(view);
    return next;
}

/* Seqs 1 to 6: log/1 filed, log/2 filed, log/1 revised, log/3 filed, log/2 withdrawn, log/4. */
static void file_six(struct fixture *fixture)
{
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_file_text(fixture, "log/2", "gale");
    (void)fixture_file_text(fixture, "log/1", "fog and gale");
    (void)fixture_file_text(fixture, "log/3", "calm");
    (void)fixture_withdraw(fixture, "log/2");
    (void)fixture_file_text(fixture, "log/4", "wreck");
}

static void each_changed_item_comes_once_with_its_newest_change(void **state)
{
    struct fixture *fixture = *state;
    struct page page = {0};
    file_six(fixture);
    assert_int_equal(changed(fixture, 0, 8, &page), 6);
    const uint64_t expected[] = {3, 4, 5, 6};
    assert_int_equal(page.count, 4);
    assert_memory_equal(page.seqs, expected, sizeof expected);
}

static void pages_follow_each_other_without_gap_or_overlap(void **state)
{
    struct fixture *fixture = *state;
    struct page first = {0};
    struct page second = {0};
    struct page third = {0};
    file_six(fixture);
    uint64_t next = changed(fixture, 0, 2, &first);
    assert_int_equal(next, 4);
    next = changed(fixture, next, 2, &second);
    assert_int_equal(next, 6);
    next = changed(fixture, next, 2, &third);
    assert_int_equal(next, 6);
    assert_int_equal(first.seqs[0], 3);
    assert_int_equal(first.seqs[1], 4);
    assert_int_equal(second.seqs[0], 5);
    assert_int_equal(second.seqs[1], 6);
    assert_int_equal(third.count, 0);
}

static void erased_changes_are_passed_over(void **state)
{
    struct fixture *fixture = *state;
    struct page page = {0};
    file_six(fixture);
    assert_int_equal(fixture_erase(fixture, 6), 2); /* 1 and 2 */
    assert_int_equal(changed(fixture, 0, 8, &page), 6);
    assert_int_equal(page.count, 4);
}

static void behind_the_last_change_there_is_nothing(void **state)
{
    struct fixture *fixture = *state;
    struct page page = {0};
    assert_int_equal(changed(fixture, 0, 8, &page), 0);
    file_six(fixture);
    assert_int_equal(changed(fixture, 6, 8, &page), 6);
    assert_int_equal(changed(fixture, 99, 8, &page), 99);
    assert_true(changed(fixture, UINT64_MAX, 8, &page) == UINT64_MAX);
    assert_int_equal(changed(fixture, 2, 0, &page), 2);
    assert_int_equal(page.count, 0);
}

static void the_caller_may_stop_a_page(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct page page = {.stop_after = 2};
    uint64_t next = 0;
    file_six(fixture);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(
        items_changed(view, 0, 8, note_change, &page, &fixture->reading, &next, &error),
        STORE_STOPPED);
    store_end(view);
    assert_int_equal(page.count, 2);
    assert_int_equal(next, 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(each_changed_item_comes_once_with_its_newest_change),
        TEST(pages_follow_each_other_without_gap_or_overlap),
        TEST(erased_changes_are_passed_over),
        TEST(behind_the_last_change_there_is_nothing),
        TEST(the_caller_may_stop_a_page),
    };
    return cmocka_run_group_tests_name("items changed", tests, NULL, NULL);
}
