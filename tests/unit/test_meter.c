/* Rates over the last ten seconds, with a clock that the test turns. */
#include "daemon/meter.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/near.h"

static void a_meter_that_has_seen_nothing_says_nothing(void **state)
{
    (void)state;
    const struct meter meter = {0};
    assert_near(meter_rate(&meter, 500, 1000), 0.0, 0.0);
}

static void the_rate_is_what_has_risen_over_the_time(void **state)
{
    (void)state;
    struct meter meter = {0};
    meter_sample(&meter, 100, 1000);
    /* 150 more in 2,500 ms: 60 a second */
    assert_near(meter_rate(&meter, 250, 3500), 60.0, 1e-12);
}

static void the_same_moment_has_no_rate(void **state)
{
    (void)state;
    struct meter meter = {0};
    meter_sample(&meter, 100, 1000);
    assert_near(meter_rate(&meter, 900, 1000), 0.0, 0.0);
}

static void the_rate_reaches_back_to_the_oldest_sample(void **state)
{
    (void)state;
    struct meter meter = {0};
    meter_sample(&meter, 0, 0);
    meter_sample(&meter, 10, 1000);
    meter_sample(&meter, 40, 2000);
    /* 40 in 2 s, and not the 30 of the last second */
    assert_near(meter_rate(&meter, 40, 2000), 20.0, 1e-12);
}

/* 1,000 a second for a minute, then 10 a second: with eleven samples, one a second, the oldest is
 * ten seconds old. */
static void what_is_older_than_ten_seconds_is_forgotten(void **state)
{
    (void)state;
    struct meter meter = {0};
    uint64_t total = 0;
    uint64_t now_ms = 0;
    for (int i = 0; i < 60; i++) {
        total += 1000;
        now_ms += 1000;
        meter_sample(&meter, total, now_ms);
    }
    assert_near(meter_rate(&meter, total, now_ms), 1000.0, 1e-9);
    for (int i = 0; i < 10; i++) {
        total += 10;
        now_ms += 1000;
        meter_sample(&meter, total, now_ms);
    }
    assert_near(meter_rate(&meter, total, now_ms), 10.0, 1e-12);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_meter_that_has_seen_nothing_says_nothing),
        cmocka_unit_test(the_rate_is_what_has_risen_over_the_time),
        cmocka_unit_test(the_same_moment_has_no_rate),
        cmocka_unit_test(the_rate_reaches_back_to_the_oldest_sample),
        cmocka_unit_test(what_is_older_than_ten_seconds_is_forgotten),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
