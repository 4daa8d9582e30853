/*
 * The watchdog, with a socket of the test's in the place of the manager's, and threads that the
 * test moves. The loop is turned once for each look.
 */
#include "daemon/watchdog.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

struct watched {
    char home[FIXTURE_PATH_BYTES];
    uv_loop_t loop;
    struct heartbeat heartbeat;
    struct watchdog watchdog;
    int manager; /* a socket, where messages come */
};

static int setup(void **state)
{
    struct watched *watched = calloc(1, sizeof *watched);
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    assert_non_null(watched);
    home_make(watched->home);
    char path[FIXTURE_PATH_BYTES + 16];
    (void)snprintf(path, sizeof path, "%s/notify", watched->home);
    assert_true(strlen(path) < sizeof address.sun_path);
    memcpy(address.sun_path, path, strlen(path) + 1);
    watched->manager = socket(AF_UNIX, SOCK_DGRAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
    assert_true(watched->manager >= 0);
    assert_int_equal(bind(watched->manager, (struct sockaddr *)&address, sizeof address), 0);
    assert_int_equal(setenv("NOTIFY_SOCKET", address.sun_path, 1), 0);
    assert_int_equal(setenv("WATCHDOG_USEC", "4000", 1), 0); /* a look every 2 ms */
    assert_int_equal(unsetenv("WATCHDOG_PID"), 0);
    assert_int_equal(uv_loop_init(&watched->loop), 0);
    *state = watched;
    return 0;
}

static int teardown(void **state)
{
    struct watched *watched = *state;
    watchdog_close(&watched->watchdog);
    assert_int_equal(uv_run(&watched->loop, UV_RUN_DEFAULT), 0);
    assert_int_equal(uv_loop_close(&watched->loop), 0);
    assert_int_equal(close(watched->manager), 0);
    home_remove(watched->home);
    free(watched);
    return 0;
}

static void start(struct watched *watched)
{
    watchdog_start(&watched->watchdog, &watched->loop, &watched->heartbeat);
}

/* Has it look once; says whether the manager was told something. */
static bool is_told(struct watched *watched)
{
    char message[64] = "";
    (void)uv_run(&watched->loop, UV_RUN_ONCE);
    ssize_t size = recv(watched->manager, message, sizeof message - 1, 0);
    if (size > 0) {
        assert_string_equal(message, "WATCHDOG=1"); /* sd_notify(3) */
    }
    return size > 0;
}

static void the_manager_is_told_again_and_again(void **state)
{
    struct watched *watched = *state;
    start(watched);
    for (int i = 0; i < 3; i++) {
        assert_true(is_told(watched));
    }
}

static void the_manager_is_not_told_while_a_thread_stands_still(void **state)
{
    struct watched *watched = *state;
    start(watched);
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    assert_true(is_told(watched)); /* it may just have begun */
    assert_false(is_told(watched));
    assert_false(is_told(watched));
    heartbeat_work(&watched->heartbeat, HEART_TRAINER);
    assert_true(is_told(watched));
}

static void a_manager_that_does_not_want_to_know_is_not_told(void **state)
{
    struct watched *watched = *state;
    assert_int_equal(unsetenv("WATCHDOG_USEC"), 0);
    start(watched);
    assert_int_equal(uv_run(&watched->loop, UV_RUN_DEFAULT), 0); /* nothing is to come */
    assert_false(is_told(watched));
}

/* sd_watchdog_enabled(3): WATCHDOG_PID names the process that is meant. */
static void a_watchdog_for_another_process_is_not_ours(void **state)
{
    struct watched *watched = *state;
    assert_int_equal(setenv("WATCHDOG_PID", "1", 1), 0);
    start(watched);
    assert_int_equal(uv_run(&watched->loop, UV_RUN_DEFAULT), 0);
    assert_false(is_told(watched));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_manager_is_told_again_and_again),
        TEST(the_manager_is_not_told_while_a_thread_stands_still),
        TEST(a_manager_that_does_not_want_to_know_is_not_told),
        TEST(a_watchdog_for_another_process_is_not_ours),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
