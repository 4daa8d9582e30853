/* What an item's latest change was as of an earlier moment. The log of every test:
 *
 *   1 a filed   2 b filed   3 a revised   4 a revised   5 b withdrawn   6 a withdrawn   7 a filed
 */
#include "storage/items_latest.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static int set_up(void **state)
{
    assert_int_equal(fixture_setup(state), 0);
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "a", "fog");
    (void)fixture_file_text(fixture, "b", "lamp");
    (void)fixture_file_text(fixture, "a", "dense fog");
    (void)fixture_file_text(fixture, "a", "fog lifting");
    (void)fixture_withdraw(fixture, "b");
    (void)fixture_withdraw(fixture, "a");
    assert_int_equal(fixture_file_text(fixture, "a", "rain").seq, 7);
    return 0;
}

static bool was_latest(struct fixture *fixture, const char *id, uint64_t seq, uint64_t moment)
{
    struct store_error error = {0};
    bool was = false;
    struct store_view *view = fixture_read(fixture);
    int result = items_was_latest(view, text_of(id), seq, moment, &fixture->reading, &was, &error);
    store_end(view);
    if (result != STORE_OK) {
        fail_msg("%s", error.text);
    }
    return was;
}

static void a_change_is_the_latest_until_the_next_of_its_item(void **state)
{
    struct fixture *fixture = *state;
    assert_true(was_latest(fixture, "a", 1, 1));
    assert_true(was_latest(fixture, "a", 1, 2)); /* 2 is of another item */
    assert_false(was_latest(fixture, "a", 1, 3));
    assert_true(was_latest(fixture, "a", 3, 3));
    assert_false(was_latest(fixture, "a", 3, 4));
    assert_true(was_latest(fixture, "a", 4, 5));
    assert_true(was_latest(fixture, "a", 7, 7));
}

static void a_withdrawal_is_a_change(void **state)
{
    struct fixture *fixture = *state;
    assert_true(was_latest(fixture, "b", 2, 4));
    assert_false(was_latest(fixture, "b", 2, 5));
    assert_true(was_latest(fixture, "b", 5, 7));
    assert_true(was_latest(fixture, "a", 6, 6));
}

static void what_was_erased_up_to_the_moment_is_not_needed(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(fixture_erase(fixture, 4), 2); /* 1 and 3 */
    assert_true(was_latest(fixture, "a", 4, 4));
    assert_false(was_latest(fixture, "a", 3, 4));
}

static void a_change_behind_the_moment_that_is_gone_is_damage(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    bool was = false;
    assert_int_equal(fixture_erase(fixture, 7), 5);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(items_was_latest(view, text_of("a"), 1, 2, &fixture->reading, &was, &error),
                     STORE_CORRUPT);
    assert_string_equal(error.text, "the record of change 6 is gone");
    store_end(view);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_change_is_the_latest_until_the_next_of_its_item),
        TEST(a_withdrawal_is_a_change),
        TEST(what_was_erased_up_to_the_moment_is_not_needed),
        TEST(a_change_behind_the_moment_that_is_gone_is_damage),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
