/*
 * undertag snapshot, against the daemon, as a script and as a person at a terminal runs it.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <pty.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/integration/logbook.h"
#include "tests/integration/program.h"
#include "tests/integration/snapshots.h"

static struct program_run run;

static int set_up(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 0, 30, 12);
    *state = service;
    return 0;
}

#define RUN(service, ...)                                                                          \
    program_run("undertag",                                                                        \
                (const char *const[]){"--socket", (service)->daemon.socket, __VA_ARGS__, NULL},    \
                "", &run)

static void one_is_written_and_shown(void **state)
{
    struct service *service = *state;
    char expected[512];
    RUN(service, "snapshot", "write", "--name", "spring", "--items", "--rate", "64MiB");
    assert_int_equal(run.exit_code, 0);
    int length = snprintf(expected, sizeof expected,
                          "snapshot      spring\nof change     30\nsize          ");
    assert_memory_equal(run.output, expected, (size_t)length);
    (void)snprintf(expected, sizeof expected, "folder        %s\n",
                   snapshots_path(service, "spring"));
    assert_non_null(strstr(run.output, expected));
    assert_true(snapshots_have(service, "spring/items.jsonl"));
}

static void those_that_are_there_are_listed(void **state)
{
    struct service *service = *state;
    RUN(service, "snapshot", "list");
    assert_string_equal(run.output, "There are no snapshots yet.\n");
    RUN(service, "snapshot", "write", "--name", "spring");
    RUN(service, "snapshot", "list");
    assert_int_equal(run.exit_code, 0);
    assert_non_null(strstr(run.output, "spring      30  "));
    assert_non_null(strstr(run.output, "  latest; named, stays\n"));
}

static void a_name_that_is_none_ends_in_65_and_one_sentence(void **state)
{
    struct service *service = *state;
    RUN(service, "snapshot", "write", "--name", "../spring");
    assert_int_equal(run.exit_code, 65);
    assert_string_equal(run.output, "");
    assert_memory_equal(run.error, "undertag: A snapshot's name has 1 to 64 letters", 47);
}

static void another_while_one_is_written_ends_in_75(void **state)
{
    struct service *service = *state;
    struct peer writer;
    snapshots_fill(service);
    unsigned id = snapshots_begin_slow(service, &writer, "spring");
    RUN(service, "snapshot", "write");
    assert_int_equal(run.exit_code, 75);
    (void)peer_result(&writer, id);
    peer_close(&writer);
}

/* --- at a terminal ------------------------------------------------------------------------------
 */

/* What the program writes to a terminal until it ends; the caller frees it. */
static char *run_at_terminal(const struct service *service)
{
    enum {
        OUTPUT_BYTES = 64 * 1024
    };
    char program[CHILD_PATH_BYTES];
    struct child child;
    int master = -1;
    int terminal = -1;
    size_t used = 0;
    ssize_t count = 1;
    struct winsize size = {.ws_row = 24, .ws_col = 80};
    char *output = calloc(1, OUTPUT_BYTES);
    assert_non_null(output);
    child_program("undertag", program);
    assert_int_equal(openpty(&master, &terminal, NULL, NULL, &size), 0);
    const char *const argv[] = {program,    "--socket", service->daemon.socket,
                                "snapshot", "write",    "--name",
                                "spring",   "--rate",   "1MiB",
                                NULL};
    child_start(&child, argv, (const char *const[]){"TERM=xterm", "LC_ALL=C.UTF-8", NULL}, terminal,
                terminal, terminal);
    assert_int_equal(close(terminal), 0);
    while (count > 0) { /* at the end the terminal is gone: EIO */
        struct pollfd ready = {.fd = master, .events = POLLIN};
        assert_true(poll(&ready, 1, PATIENCE_MS) > 0);
        count = read(master, output + used, OUTPUT_BYTES - 1 - used);
        used += count > 0 ? (size_t)count : 0;
        assert_true(used < OUTPUT_BYTES - 1);
    }
    assert_int_equal(close(master), 0);
    assert_int_equal(child_wait(&child), 0);
    return output;
}

static void at_a_terminal_a_bar_grows_and_goes_before_the_answer(void **state)
{
    struct service *service = *state;
    snapshots_fill(service);
    char *output = run_at_terminal(service);
    char *end = strstr(output, "\r\033[K");
    assert_non_null(strstr(output, "\u2588")); /* of the bar */
    assert_non_null(strstr(output, " %   "));
    assert_non_null(strstr(output, "B a second")); /* MB, or kB on a busy machine */
    assert_non_null(end);
    char *answer = strstr(output, "snapshot");
    assert_non_null(answer);
    assert_true(answer > end);
    assert_null(strstr(answer, "\033[K"));
    free(output);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(one_is_written_and_shown),
        TEST(those_that_are_there_are_listed),
        TEST(a_name_that_is_none_ends_in_65_and_one_sentence),
        TEST(another_while_one_is_written_ends_in_75),
        TEST(at_a_terminal_a_bar_grows_and_goes_before_the_answer),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
