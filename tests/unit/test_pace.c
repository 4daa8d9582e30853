/* Bytes a second, and stopping. */
#include "daemon/pace.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <pthread.h>

#include "daemon/clock.h"

enum {
    MIB = 1 << 20
};

static void without_a_limit_bytes_are_only_counted(void **state)
{
    struct pace pace;
    struct store_error error = {0};
    (void)state;
    pace_init(&pace, 0);
    assert_int_equal(pace_add(&pace, (uint64_t)1 << 60, &error), STORE_OK);
    assert_int_equal(pace_add(&pace, 7, &error), STORE_OK);
    assert_int_equal(pace.done, ((uint64_t)1 << 60) + 7);
}

/* 64 KiB at 1 MiB a second take 62.5 ms; it may come back up to one early. */
static void bytes_take_the_time_that_the_rate_gives_them(void **state)
{
    struct pace pace;
    struct store_error error = {0};
    (void)state;
    uint64_t begun_us = clock_steady_us();
    pace_init(&pace, MIB);
    for (int i = 0; i < 4; i++) {
        assert_int_equal(pace_add(&pace, MIB / 64, &error), STORE_OK);
    }
    assert_true(clock_steady_us() - begun_us >= 61500);
    assert_int_equal(pace.done, MIB / 16);
}

/* The clock has stood still for the pace since long ago: what is late is not waited for. */
static void time_that_passed_before_counts(void **state)
{
    struct pace pace;
    struct store_error error = {0};
    (void)state;
    pace_init(&pace, MIB);
    pace.begun_us -= UINT64_C(3600) * 1000000; /* an hour has room for 3,600 MiB */
    assert_int_equal(pace_add(&pace, UINT64_C(3599) * MIB, &error), STORE_OK);
}

static void once_stopped_nothing_is_waited_for(void **state)
{
    struct pace pace;
    struct store_error error = {0};
    (void)state;
    pace_init(&pace, 1);
    pace_stop(&pace);
    assert_int_equal(pace_add(&pace, (uint64_t)1 << 60, &error), STORE_STOPPED);
    assert_string_equal(error.text, "the daemon is stopping");
}

static void *add_a_lot(void *argument)
{
    struct store_error error = {0};
    struct pace *pace = argument;
    return pace_add(pace, (uint64_t)1 << 60, &error) == STORE_STOPPED ? argument : NULL;
}

/* At a byte a second it would wait until long after us. */
static void who_waits_is_woken_to_stop(void **state)
{
    struct pace pace;
    pthread_t thread;
    void *result = NULL;
    (void)state;
    pace_init(&pace, 1);
    assert_int_equal(pthread_create(&thread, NULL, add_a_lot, &pace), 0);
    while (pace.done == 0) {
        (void)sched_yield();
    }
    pace_stop(&pace);
    assert_int_equal(pthread_join(thread, &result), 0);
    assert_ptr_equal(result, &pace);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(without_a_limit_bytes_are_only_counted),
        cmocka_unit_test(bytes_take_the_time_that_the_rate_gives_them),
        cmocka_unit_test(time_that_passed_before_counts),
        cmocka_unit_test(once_stopped_nothing_is_waited_for),
        cmocka_unit_test(who_waits_is_woken_to_stop),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
