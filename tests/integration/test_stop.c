/*
 * Stopping in good order, and reading the options again.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

/* --- stopping -------------------------------------------------------------------------------- */

static void sigterm_and_sigint_end_the_daemon_well(void **state)
{
    struct service *service = *state;
    static const int SIGNALS[] = {SIGTERM, SIGINT};
    for (size_t i = 0; i < 2; i++) {
        child_signal(&service->daemon.child, SIGNALS[i]);
        assert_int_equal(child_wait(&service->daemon.child), 0);
        assert_null(peer_line(&service->peer)); /* a peer that waited was let go */
        assert_int_equal(access(service->daemon.socket, F_OK), -1);
        service_restart(service);
    }
    assert_true(undertagd_said(&service->daemon, "undertagd: stopped"));
}

static void what_was_learned_needs_no_learning_after_a_stop(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 1, 200, 16);
    wait_until_learned(&service->peer);
    static const char QUESTION[] = "{'text': 'fog', 'floor': 0}";
    char *before = strdup(text_of(&service->peer, ask(&service->peer, "item.gaps", QUESTION)));
    assert_non_null(before);
    service_stop_and_start(service);
    assert_true(undertagd_said(&service->daemon, "200 changes, 0 to learn"));
    const json_t *after = ask(&service->peer, "item.gaps", QUESTION);
    assert_string_equal(text_of(&service->peer, after), before);
    free(before);
}

/* Filings with short ids from 1 on, in one piece. */
static void send_filings(struct peer *peer, unsigned count)
{
    char *lines = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&lines, &size);
    assert_non_null(stream);
    for (unsigned i = 1; i <= count; i++) {
        assert_true(fprintf(stream,
                            "{\"jsonrpc\":\"2.0\",\"id\":%u,\"method\":\"item.file\","
                            "\"params\":{\"id\":\"%u\",\"tags\":[\"fog\"]}}\n",
                            i, i) > 0);
    }
    assert_int_equal(fclose(stream), 0);
    peer_send(peer, lines, size);
    free(lines);
}

/* Reads the answers from `first` on until the daemon closes: first those that were filed, then
 * those that were refused since it stops. Returns the last one that was filed. */
static unsigned read_answers(struct peer *peer, unsigned first, unsigned *ret_answered)
{
    unsigned filed = first - 1;
    unsigned answered = first - 1;
    const char *line = NULL;
    while ((line = peer_line(peer))) {
        json_t *answer = json_loads(line, 0, NULL);
        const json_t *error = json_object_get(answer, "error");
        assert_int_equal(whole(answer, "id"), ++answered);
        if (error) {
            assert_error(error, -32006, "");
        } else {
            assert_int_equal(filed, answered - 1); /* none behind one that was refused */
            assert_int_equal(whole(json_object_get(answer, "result"), "seq"), answered);
            filed = answered;
        }
        json_decref(answer);
    }
    *ret_answered = answered;
    return filed;
}

/*
 * What the daemon has read is answered. 200 filings fit into one piece of the socket (32 KiB) and
 * so into one reading; once the first is answered all have been read.
 */
static void what_was_under_way_is_answered_before_the_end(void **state)
{
    struct service *service = *state;
    enum {
        FILINGS = 200
    };
    unsigned answered = 0;
    send_filings(&service->peer, FILINGS);
    assert_int_equal(whole(peer_result(&service->peer, 1), "seq"), 1);
    child_signal(&service->daemon.child, SIGTERM);
    unsigned filed = read_answers(&service->peer, 2, &answered);
    assert_int_equal(answered, FILINGS);
    assert_int_equal(child_wait(&service->daemon.child), 0);
    service_restart(service);
    assert_int_equal(ask_seq(&service->peer), filed); /* what was refused was not done */
    wait_until_learned(&service->peer);
}

/* Of a longer feed the rest is not read any more; nothing is filed that was not acknowledged. */
static void a_feed_that_is_cut_off_knows_what_was_filed(void **state)
{
    struct service *service = *state;
    unsigned answered = 0;
    send_filings(&service->peer, 3000);
    assert_int_equal(whole(peer_result(&service->peer, 1), "seq"), 1);
    child_signal(&service->daemon.child, SIGTERM);
    unsigned filed = read_answers(&service->peer, 2, &answered);
    assert_int_equal(child_wait(&service->daemon.child), 0);
    service_restart(service);
    assert_int_equal(ask_seq(&service->peer), filed);
    wait_until_learned(&service->peer);
}

static int set_up_short_drain(void **state)
{
    *state = service_new("drain_ms=50", NULL, NULL);
    return 0;
}

static void a_peer_that_never_reads_does_not_keep_the_daemon_from_stopping(void **state)
{
    struct service *service = *state;
    enum {
        SIZE = 500000
    };
    char *text = malloc(SIZE + 1);
    assert_non_null(text);
    memset(text, 'f', SIZE);
    text[SIZE] = '\0';
    (void)ask(&service->peer, "item.file", "{'id': 'a', 'text': '%s', 'tags': []}", text);
    free(text);
    struct peer deaf;
    peer_open(&deaf, service->daemon.socket);
    for (unsigned i = 0; i < 10; i++) {
        (void)peer_request(&deaf, "item.show", "{'id': 'a'}");
    }
    while (!peer_has_something(&deaf)) { /* the first answer is on its way, and stays there */
        (void)ask(&service->peer, "daemon.state", "{}");
    }
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    peer_close(&deaf);
}

/* --- reading the options again --------------------------------------------------------------- */

static int set_up_options(void **state)
{
    struct service *service = calloc(1, sizeof *service);
    static char path[UNDERTAGD_PATH_BYTES];
    assert_non_null(service);
    undertagd_make(&service->daemon);
    undertagd_write(&service->daemon, "options", "text_limit = 1KiB\n");
    undertagd_path(&service->daemon, "options", path);
    service->daemon.config = path;
    undertagd_start(&service->daemon);
    peer_open(&service->peer, service->daemon.socket);
    *state = service;
    return 0;
}

static void reload(struct service *service, const char *options, const char *said)
{
    undertagd_write(&service->daemon, "options", options);
    child_signal(&service->daemon.child, SIGHUP);
    undertagd_wait_for(&service->daemon, said);
}

static json_int_t limit(struct peer *peer, const char *name)
{
    return whole(json_object_get(ask(peer, "daemon.state", "{}"), "limits"), name);
}

static void sighup_takes_the_options_that_can_be_taken(void **state)
{
    struct service *service = *state;
    static const char LONG[] = "{'id': 'a', 'text': '%01500d', 'tags': []}";
    assert_error(ask_refused(&service->peer, "item.file", LONG, 0), -32003, "/text");
    reload(service, "text_limit = 2KiB\n", "options were read again");
    assert_string_equal(string(ask(&service->peer, "item.file", LONG, 0), "was"), "new");
    assert_int_equal(limit(&service->peer, "text_limit"), 2048);
}

static void an_option_that_takes_a_restart_is_named(void **state)
{
    struct service *service = *state;
    reload(service, "text_limit = 2KiB\nline_limit = 1MiB\n", "line_limit takes a restart");
    assert_int_equal(limit(&service->peer, "text_limit"), 2048);
    assert_int_equal(limit(&service->peer, "line_limit"), 8 * 1024 * 1024);
}

static void options_with_an_error_leave_all_as_it_was(void **state)
{
    struct service *service = *state;
    reload(service, "text_limit = 2KiB\nlamps = 3\n", "the options stay as they are");
    assert_true(undertagd_said(&service->daemon, "line 2"));
    assert_int_equal(limit(&service->peer, "text_limit"), 1024);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)
#define TEST_OF_OPTIONS(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, set_up_options, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(sigterm_and_sigint_end_the_daemon_well),
        TEST(what_was_learned_needs_no_learning_after_a_stop),
        TEST(what_was_under_way_is_answered_before_the_end),
        TEST(a_feed_that_is_cut_off_knows_what_was_filed),
        cmocka_unit_test_setup_teardown(
            a_peer_that_never_reads_does_not_keep_the_daemon_from_stopping, set_up_short_drain,
            service_tear_down),
        TEST_OF_OPTIONS(sighup_takes_the_options_that_can_be_taken),
        TEST_OF_OPTIONS(an_option_that_takes_a_restart_is_named),
        TEST_OF_OPTIONS(options_with_an_error_leave_all_as_it_was),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
