/*
 * Many requests at once: what is pipelined is answered in order, whoever reads slowly loses nothing
 * and holds nobody up, and whoever goes away harms nobody.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/service.h"

enum {
    MIB = 1024 * 1024,
    LARGE_BYTES = 100 * 1024
};

/* --- the order of answers -------------------------------------------------------------------- */

static void pipelined_requests_are_answered_in_order(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    enum {
        ROUNDS = 300
    };
    for (unsigned i = 0; i < ROUNDS; i++) { /* fast ones and slow ones, good ones and bad ones */
        (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'tags': ['fog']}", i);
        (void)peer_request(peer, "item.show", "{'id': 'entry %u'}", i);
        (void)peer_request(peer, "item.gaps", "{'text': 'fog', 'why': 1}");
    }
    for (unsigned i = 0; i < ROUNDS; i++) {
        assert_int_equal(whole(peer_result(peer, 3 * i + 1), "seq"), i + 1);
        assert_int_equal(whole(peer_result(peer, 3 * i + 2), "seq"), i + 1);
        assert_error(peer_error(peer, 3 * i + 3), -32602, "/why");
    }
}

static void a_read_behind_a_change_sees_it(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    for (unsigned i = 1; i <= 50; i++) {
        (void)peer_request(peer, "item.file", "{'id': 'a', 'title': 'night %u', 'tags': []}", i);
        unsigned show = peer_request(peer, "item.show", "{'id': 'a'}");
        char title[32];
        (void)snprintf(title, sizeof title, "night %u", i);
        (void)peer_result(peer, show - 1);
        assert_string_equal(string(peer_result(peer, show), "title"), title);
    }
}

static void a_change_behind_a_read_is_not_seen_by_it(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.file", "{'id': 'a', 'title': 'night 0', 'tags': []}");
    for (unsigned i = 1; i <= 50; i++) {
        unsigned show = peer_request(peer, "item.show", "{'id': 'a'}");
        (void)peer_request(peer, "item.file", "{'id': 'a', 'title': 'night %u', 'tags': []}", i);
        char title[32];
        (void)snprintf(title, sizeof title, "night %u", i - 1);
        assert_string_equal(string(peer_result(peer, show), "title"), title);
        (void)peer_result(peer, show + 1);
    }
}

static void a_batch_runs_in_order_and_takes_one_line(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    unsigned before = peer_request(peer, "item.list", "{}");
    peer_say(peer, "[{'jsonrpc': '2.0', 'id': 'x', 'method': 'item.file', "
                   "'params': {'id': 'a', 'tags': ['fog']}}, "
                   "{'jsonrpc': '2.0', 'id': 'y', 'method': 'item.show', 'params': {'id': 'a'}}, "
                   "{'jsonrpc': '2.0', 'id': 'z', 'method': 'item.withdraw', "
                   "'params': {'id': 'a'}}, "
                   "{'jsonrpc': '2.0', 'id': 'u', 'method': 'item.show', 'params': {'id': 'a'}}]");
    unsigned after = peer_request(peer, "item.list", "{}");
    assert_int_equal(whole(peer_result(peer, before), "next"), 0);
    const json_t *answers = peer_answer(peer);
    assert_int_equal(json_array_size(answers), 4);
    for (size_t i = 0; i < 4; i++) {
        assert_string_equal(string(json_array_get(answers, i), "id"),
                            ((const char *const[]){"x", "y", "z", "u"})[i]);
    }
    assert_int_equal(whole(json_object_get(json_array_get(answers, 1), "result"), "seq"), 1);
    assert_int_equal(whole(json_object_get(json_array_get(answers, 3), "error"), "code"), -32001);
    assert_int_equal(whole(peer_result(peer, after), "next"), 2);
}

static void a_batch_goes_on_behind_an_error(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    peer_say(peer, "[{'jsonrpc': '2.0', 'id': 1, 'method': 'item.file', "
                   "'params': {'id': 'a', 'tags': []}}, "
                   "{'jsonrpc': '2.0', 'id': 2, 'method': 'item.file', 'params': {'id': 'b'}}, "
                   "{'jsonrpc': '2.0', 'id': 3, 'method': 'item.file', "
                   "'params': {'id': 'c', 'tags': []}}]");
    const json_t *answers = peer_answer(peer);
    assert_int_equal(whole(json_object_get(json_array_get(answers, 0), "result"), "seq"), 1);
    assert_error(json_object_get(json_array_get(answers, 1), "error"), -32602, "/tags");
    assert_int_equal(whole(json_object_get(json_array_get(answers, 2), "result"), "seq"), 2);
}

/* --- many at once ---------------------------------------------------------------------------- */

static void ten_clients_at_once_are_each_answered_in_order(void **state)
{
    struct service *service = *state;
    enum {
        CLIENTS = 10,
        ITEMS = 100
    };
    struct peer peers[CLIENTS];
    for (unsigned c = 0; c < CLIENTS; c++) {
        peer_open(&peers[c], service->daemon.socket);
    }
    for (unsigned i = 0; i < ITEMS; i++) {
        for (unsigned c = 0; c < CLIENTS; c++) {
            (void)peer_request(&peers[c], "item.file", "{'id': '%u of %u', 'tags': ['c%u']}", i, c,
                               c);
        }
    }
    bool seen[CLIENTS * ITEMS + 1] = {false};
    for (unsigned c = 0; c < CLIENTS; c++) {
        json_int_t last = 0;
        for (unsigned i = 0; i < ITEMS; i++) {
            json_int_t seq = whole(peer_result(&peers[c], i + 1), "seq");
            assert_in_range(seq, last + 1, CLIENTS * ITEMS);
            assert_false(seen[seq]); /* no number is given twice */
            seen[seq] = true;
            last = seq;
        }
        peer_close(&peers[c]);
    }
    assert_int_equal(ask_seq(&service->peer), CLIENTS * ITEMS);
    assert_int_equal(whole(ask(&service->peer, "tag.show", "{'tag': 'c7'}"), "count"), ITEMS);
}

/* --- slow readers ---------------------------------------------------------------------------- */

/* An item with a text of LARGE_BYTES. */
static void file_large_item(struct peer *peer)
{
    char *text = malloc(LARGE_BYTES + 1);
    assert_non_null(text);
    memset(text, 'f', LARGE_BYTES);
    text[LARGE_BYTES] = '\0';
    (void)ask(peer, "item.file", "{'id': 'large', 'text': '%s', 'tags': []}", text);
    free(text);
}

/* Many requests for the large item in one piece: single ones would each take up a socket's room
 * that is far larger than themselves. Ids from 1. */
static void ask_for_large_item(struct peer *peer, unsigned times)
{
    char *lines = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&lines, &size);
    assert_non_null(stream);
    for (unsigned i = 1; i <= times; i++) {
        assert_true(fprintf(stream,
                            "{\"jsonrpc\":\"2.0\",\"id\":%u,\"method\":\"item.show\","
                            "\"params\":{\"id\":\"large\"}}\n",
                            i) > 0);
    }
    assert_int_equal(fclose(stream), 0);
    peer_send(peer, lines, size);
    free(lines);
}

static void a_slow_reader_loses_nothing_and_holds_nobody_up(void **state)
{
    struct service *service = *state;
    enum {
        REQUESTS = 500 /* for 50 MB of answers, more than is held for anybody */
    };
    struct peer slow;
    file_large_item(&service->peer);
    peer_open(&slow, service->daemon.socket);
    ask_for_large_item(&slow, REQUESTS);
    for (unsigned i = 0; i < 100; i++) { /* the others are served meanwhile */
        (void)ask(&service->peer, "item.file", "{'id': 'entry %u', 'tags': []}", i);
    }
    for (unsigned i = 1; i <= REQUESTS; i++) {
        char start[64];
        (void)snprintf(start, sizeof start, "{\"jsonrpc\":\"2.0\",\"id\":%u,\"result\":", i);
        const char *line = peer_line(&slow);
        assert_non_null(line);
        assert_memory_equal(line, start, strlen(start));
        assert_true(strlen(line) > LARGE_BYTES);
    }
    peer_close(&slow);
}

static void a_mebibyte_of_answers_is_accepted_before_reading_stops(void **state)
{
    struct service *service = *state;
    struct peer slow;
    file_large_item(&service->peer);
    peer_open(&slow, service->daemon.socket);
    for (unsigned i = 0; i < 11; i++) { /* 1.07 MiB of answers, which nobody reads */
        (void)peer_request(&slow, "item.show", "{'id': 'large'}");
    }
    (void)peer_request(&slow, "item.file", "{'id': 'last', 'tags': []}");
    wait_until_state(&service->peer, "seq", 2); /* it was got to although nothing was read */
    for (unsigned i = 1; i <= 11; i++) {
        (void)peer_result(&slow, i);
    }
    assert_int_equal(whole(peer_result(&slow, 12), "seq"), 2);
    peer_close(&slow);
}

/* --- long lines ------------------------------------------------------------------------------ */

static void send_blanks(struct peer *peer, size_t size)
{
    char *blanks = malloc(size);
    assert_non_null(blanks);
    memset(blanks, ' ', size);
    peer_send(peer, blanks, size);
    free(blanks);
}

static void a_line_over_the_limit_gets_one_error_and_the_connection_lives_on(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    unsigned before = peer_request(peer, "item.list", "{}");
    send_blanks(peer, (size_t)20 * MIB); /* line_limit is 8 MiB */
    send_blanks(peer, 7);
    peer_send(peer, "\n", 1);
    unsigned after = peer_request(peer, "item.list", "{}");
    (void)peer_result(peer, before);
    const json_t *answer = peer_answer(peer);
    assert_json(json_object_get(answer, "id"), "null");
    assert_error(json_object_get(answer, "error"), -32003, "");
    (void)peer_result(peer, after);
}

static void a_line_of_just_the_limit_is_taken(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char REQUEST[] = "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.list\"}\n";
    const size_t size = sizeof REQUEST - 2; /* its end does not count */
    send_blanks(peer, (size_t)8 * MIB - size);
    peer_send(peer, REQUEST, sizeof REQUEST - 1);
    (void)peer_result(peer, 1);
    send_blanks(peer, (size_t)8 * MIB - size + 1);
    peer_send(peer, REQUEST, sizeof REQUEST - 1);
    assert_error(json_object_get(peer_answer(peer), "error"), -32003, "");
}

/* --- leaving --------------------------------------------------------------------------------- */

static void a_peer_that_has_said_its_last_still_gets_its_answers(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    for (unsigned i = 0; i < 200; i++) {
        (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'tags': []}", i);
    }
    peer_end_saying(peer);
    for (unsigned i = 0; i < 200; i++) {
        assert_int_equal(whole(peer_result(peer, i + 1), "seq"), i + 1);
    }
    assert_null(peer_line(peer));
}

static void a_line_without_its_end_is_not_done(void **state)
{
    struct service *service = *state;
    struct peer other;
    peer_open(&other, service->daemon.socket);
    static const char CUT[] = "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.file\","
                              "\"params\":{\"id\":\"a\",\"tags\":[]}}";
    peer_send(&other, CUT, sizeof CUT - 1);
    peer_end_saying(&other);
    assert_null(peer_line(&other));
    peer_close(&other);
    assert_int_equal(ask_seq(&service->peer), 0);
}

static void a_peer_that_goes_away_in_the_middle_harms_nobody(void **state)
{
    struct service *service = *state;
    file_large_item(&service->peer);
    for (unsigned i = 0; i < 20; i++) {
        struct peer other;
        peer_open(&other, service->daemon.socket);
        for (unsigned k = 0; k < 20; k++) {
            (void)peer_request(&other, "item.file", "{'id': '%u of %u', 'tags': []}", k, i);
            (void)peer_request(&other, "item.show", "{'id': 'large'}");
            (void)peer_request(&other, "item.gaps", "{'id': 'large', 'why': true}");
        }
        peer_send(&other, "{\"jsonrpc\"", 10);
        if (i % 2) {
            (void)peer_line(&other);
        }
        peer_close(&other);
        (void)ask(&service->peer, "item.show", "{'id': 'large'}");
    }
    wait_until_state(&service->peer, "connections", 1);
}

/* --- the limit of connections ---------------------------------------------------------------- */

static int set_up_two_connections(void **state)
{
    *state = service_new("connections=2", NULL, NULL);
    return 0;
}

static void a_connection_over_the_limit_is_told_so_and_closed(void **state)
{
    struct service *service = *state;
    struct peer second;
    struct peer third;
    peer_open(&second, service->daemon.socket);
    (void)ask(&second, "item.list", "{}");
    peer_open(&third, service->daemon.socket);
    const json_t *answer = peer_answer(&third);
    assert_json(json_object_get(answer, "id"), "null");
    assert_error(json_object_get(answer, "error"), -32003, "");
    assert_null(peer_line(&third));
    peer_close(&third);
    (void)ask(&second, "item.list", "{}");
    peer_close(&second);
}

static void a_place_that_has_become_free_is_given_again(void **state)
{
    struct service *service = *state;
    for (unsigned i = 0; i < 20; i++) {
        struct peer second;
        peer_open(&second, service->daemon.socket);
        (void)ask(&second, "item.list", "{}");
        peer_close(&second);
        wait_until_state(&service->peer, "connections", 1);
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)
#define TEST_OF_TWO(name)                                                                          \
    cmocka_unit_test_setup_teardown(name, set_up_two_connections, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(pipelined_requests_are_answered_in_order),
        TEST(a_read_behind_a_change_sees_it),
        TEST(a_change_behind_a_read_is_not_seen_by_it),
        TEST(a_batch_runs_in_order_and_takes_one_line),
        TEST(a_batch_goes_on_behind_an_error),
        TEST(ten_clients_at_once_are_each_answered_in_order),
        TEST(a_slow_reader_loses_nothing_and_holds_nobody_up),
        TEST(a_mebibyte_of_answers_is_accepted_before_reading_stops),
        TEST(a_line_over_the_limit_gets_one_error_and_the_connection_lives_on),
        TEST(a_line_of_just_the_limit_is_taken),
        TEST(a_peer_that_has_said_its_last_still_gets_its_answers),
        TEST(a_line_without_its_end_is_not_done),
        TEST(a_peer_that_goes_away_in_the_middle_harms_nobody),
        TEST_OF_TWO(a_connection_over_the_limit_is_told_so_and_closed),
        TEST_OF_TWO(a_place_that_has_become_free_is_given_again),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
