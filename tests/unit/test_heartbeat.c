/* Who stands still, by looking twice. */
#include "daemon/heartbeat.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

struct watched {
    struct heartbeat heartbeat;
    struct heartbeat_watch watch;
};

/* A writer and a trainer that wait for work, and nobody has looked yet. */
static int setup(void **state)
{
    static struct watched watched;
    watched = (struct watched){0};
    *state = &watched;
    return 0;
}

static enum heart look(struct watched *watched)
{
    return heartbeat_look(&watched->heartbeat, &watched->watch);
}

static void whoever_waits_for_work_does_not_stand_still(void **state)
{
    struct watched *watched = *state;
    for (int i = 0; i < 3; i++) {
        assert_int_equal(look(watched), HEART_COUNT);
    }
}

static void whoever_has_work_and_does_not_move_stands_still_at_the_second_look(void **state)
{
    struct watched *watched = *state;
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    assert_int_equal(look(watched), HEART_COUNT);
    assert_int_equal(look(watched), HEART_TRAINER);
    assert_int_equal(look(watched), HEART_TRAINER);
}

static void whoever_beats_between_two_looks_moves(void **state)
{
    struct watched *watched = *state;
    heartbeat_work(&watched->heartbeat, HEART_WRITER);
    (void)look(watched);
    for (int i = 0; i < 3; i++) {
        heartbeat_work(&watched->heartbeat, HEART_WRITER);
        assert_int_equal(look(watched), HEART_COUNT);
    }
    assert_int_equal(look(watched), HEART_WRITER);
}

static void whoever_has_come_to_wait_does_not_stand_still_any_more(void **state)
{
    struct watched *watched = *state;
    heartbeat_work(&watched->heartbeat, HEART_WRITER);
    (void)look(watched);
    assert_int_equal(look(watched), HEART_WRITER);
    heartbeat_rest(&watched->heartbeat, HEART_WRITER);
    assert_int_equal(look(watched), HEART_COUNT);
    assert_int_equal(look(watched), HEART_COUNT);
}

/* One that waits for a moment between two stretches of work has moved. */
static void whoever_had_a_rest_has_moved(void **state)
{
    struct watched *watched = *state;
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    (void)look(watched);
    heartbeat_rest(&watched->heartbeat, HEART_TRAINER);
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    assert_int_equal(look(watched), HEART_COUNT);
}

static void one_that_moves_does_not_hide_the_other(void **state)
{
    struct watched *watched = *state;
    heartbeat_work(&watched->heartbeat, HEART_WRITER);
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    (void)look(watched);
    heartbeat_work(&watched->heartbeat, HEART_WRITER);
    assert_int_equal(look(watched), HEART_TRAINER);
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    assert_int_equal(look(watched), HEART_WRITER);
}

static void each_has_a_name(void **state)
{
    (void)state;
    assert_string_equal(heartbeat_name(HEART_WRITER), "the writer");
    assert_string_equal(heartbeat_name(HEART_TRAINER), "the trainer");
}

#define TEST(name) cmocka_unit_test_setup(name, setup)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(whoever_waits_for_work_does_not_stand_still),
        TEST(whoever_has_work_and_does_not_move_stands_still_at_the_second_look),
        TEST(whoever_beats_between_two_looks_moves),
        TEST(whoever_has_come_to_wait_does_not_stand_still_any_more),
        TEST(whoever_had_a_rest_has_moved),
        TEST(one_that_moves_does_not_hide_the_other),
        TEST(each_has_a_name),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
