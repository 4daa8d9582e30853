/* What others need of what was superseded: it is not passed before they have let go. */
#include "daemon/backlog.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static int set_up(void **state)
{
    const struct backlog_start start = {.visible_within_ms = 1000};
    struct backlog *backlog = NULL;
    assert_int_equal(backlog_new(&start, &backlog), 0);
    *state = backlog;
    return 0;
}

static int tear_down(void **state)
{
    backlog_free(*state);
    return 0;
}

static void what_another_model_has_not_passed_is_not_kept_yet(void **state)
{
    struct backlog *backlog = *state;
    backlog_kept(backlog, 9);
    backlog_hold(backlog, BACKLOG_REBUILD, 4);
    assert_int_equal(backlog_read(backlog).kept, 4);
    backlog_kept(backlog, 12);
    assert_int_equal(backlog_read(backlog).kept, 4);
    backlog_hold(backlog, BACKLOG_REBUILD, 20); /* the other is ahead */
    assert_int_equal(backlog_read(backlog).kept, 12);
    backlog_hold(backlog, BACKLOG_REBUILD, UINT64_MAX);
    assert_int_equal(backlog_read(backlog).kept, 12);
}

static void what_is_superseded_from_now_on_is_held(void **state)
{
    struct backlog *backlog = *state;
    backlog_committed(backlog, 5, 100, 0);
    assert_int_equal(backlog_hold_committed(backlog, BACKLOG_REBUILD), 5);
    backlog_committed(backlog, 8, 100, 0);
    backlog_kept(backlog, 8);
    assert_int_equal(backlog_read(backlog).kept, 5);
}

static void each_holder_holds_for_itself(void **state)
{
    struct backlog *backlog = *state;
    backlog_kept(backlog, 12);
    backlog_hold(backlog, BACKLOG_REBUILD, 9);
    backlog_hold(backlog, BACKLOG_BACKUP, 7);
    assert_int_equal(backlog_read(backlog).kept, 7);
    backlog_hold(backlog, BACKLOG_BACKUP, UINT64_MAX);
    assert_int_equal(backlog_read(backlog).kept, 9);
    backlog_hold(backlog, BACKLOG_REBUILD, UINT64_MAX);
    assert_int_equal(backlog_read(backlog).kept, 12);
}

static void what_may_not_be_erased_yet_can_be_held(void **state)
{
    struct backlog *backlog = *state;
    backlog_kept(backlog, 3);
    assert_false(backlog_is_held(backlog, BACKLOG_BACKUP));
    backlog_hold_kept(backlog, BACKLOG_BACKUP);
    assert_true(backlog_is_held(backlog, BACKLOG_BACKUP));
    backlog_kept(backlog, 8);
    assert_int_equal(backlog_read(backlog).kept, 3);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_another_model_has_not_passed_is_not_kept_yet),
        TEST(what_is_superseded_from_now_on_is_held),
        TEST(each_holder_holds_for_itself),
        TEST(what_may_not_be_erased_yet_can_be_held),
    };
    return cmocka_run_group_tests_name("backlog holds", tests, NULL, NULL);
}
