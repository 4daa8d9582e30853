/*
 * Filing a stream: against a small daemon in a thread that keeps what it was sent.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/feed.h"
#include "tests/unit/fake_daemon.h"

struct fixture {
    struct fake_daemon fake;
    struct wire *wire;
    struct feed *feed;
    struct failure failure;
    /* what the daemon does, and has */
    json_t *stored;    /* id -> version */
    size_t full_at[4]; /* requests that find the store full, from 1; 0: none */
    bool always_full;
    size_t closes_at;    /* the request that finds it gone */
    size_t closes_after; /* the same, once that request is answered */
    size_t forbids_at;
    size_t refuses_at; /* the request that it does not like */
    char asked[256];   /* the methods that came, separated by spaces */
    /* what the feed told */
    char refused[1024];
    size_t acknowledged;
    size_t waits;
    unsigned waited_ms;
};

static void note_method(struct fixture *fixture, const char *method)
{
    size_t used = strlen(fixture->asked);
    (void)snprintf(fixture->asked + used, sizeof fixture->asked - used, "%s%s", used ? " " : "",
                   method); /* of a long stream, the first */
}

/* Keeps the item; an id that is no text is refused. */
static bool keep(struct fake_daemon *fake, json_t *request, FILE *out)
{
    struct fixture *fixture = fake->user;
    const json_t *params = json_object_get(request, "params");
    const char *id = json_string_value(json_object_get(params, "id"));
    if (fixture->closes_at == fake->requests) {
        return false;
    }
    note_method(fixture, json_string_value(json_object_get(request, "method")));
    if (fixture->refuses_at == fake->requests) {
        fake_daemon_answer(request, out,
                           "\"error\":{\"code\":-32002,\"message\":\"No such tag.\"}");
        return true;
    }
    if (fixture->forbids_at == fake->requests) {
        fake_daemon_answer(request, out, "\"error\":{\"code\":-32004,\"message\":\"Not you.\"}");
        return true;
    }
    bool full = fixture->always_full;
    for (size_t i = 0; i < sizeof fixture->full_at / sizeof fixture->full_at[0]; i++) {
        full = full || fixture->full_at[i] == fake->requests;
    }
    if (full) {
        fake_daemon_answer(request, out, "\"error\":{\"code\":-32005,\"message\":\"Disk full.\"}");
    } else if (!id) {
        fake_daemon_answer(request, out,
                           "\"error\":{\"code\":-32602,\"message\":\"An id is a text.\","
                           "\"data\":{\"field\":\"/id\"}}");
    } else {
        json_t *version = json_object_get(params, "version");
        const json_t *before = json_object_get(fixture->stored, id);
        const char *was = !before ? "new" : json_equal(before, version) ? "same" : "revised";
        (void)json_object_set(fixture->stored, id, version);
        fake_daemon_answer(request, out, "\"result\":{\"seq\":1,\"was\":\"%s\"}", was);
    }
    return fixture->closes_after != fake->requests;
}

static void tell_refused(void *user, const char *source, uint64_t line, const char *reason)
{
    struct fixture *fixture = user;
    size_t used = strlen(fixture->refused);
    (void)snprintf(fixture->refused + used, sizeof fixture->refused - used, "%s:%llu: %s\n", source,
                   (unsigned long long)line, reason);
}

static void tell_acknowledged(void *user, const struct wire_answer *answer)
{
    struct fixture *fixture = user;
    fixture->acknowledged += answer->result ? 1 : 0;
}

static void tell_moved(void *user, const struct feed_counts *counts)
{
    const struct fixture *fixture = user;
    assert_int_equal(fixture->acknowledged, feed_acknowledged(counts));
}

static void tell_waiting(void *user, const char *reason, unsigned wait_ms)
{
    struct fixture *fixture = user;
    assert_string_equal(reason, "Disk full");
    fixture->waits++;
    fixture->waited_ms += wait_ms;
}

static int set_up(void **state)
{
    static struct fixture fixture;
    const struct feed_settings settings = {.window_lines = 8,
                                           .window_bytes = 1000,
                                           .line_limit_bytes = 5000,
                                           .first_wait_ms = 1,
                                           .tries = 3,
                                           .turn_ms = 1000};
    const struct feed_hooks hooks = {.user = &fixture,
                                     .refused = tell_refused,
                                     .acknowledged = tell_acknowledged,
                                     .moved = tell_moved,
                                     .waiting = tell_waiting};
    fixture = (struct fixture){.fake = {.handle = keep, .user = &fixture}, .stored = json_object()};
    *state = &fixture;
    return fixture.stored && !fake_daemon_start(&fixture.fake) &&
                   !wire_open(fixture.fake.path, &fixture.wire, &fixture.failure) &&
                   !feed_new(fixture.wire, &settings, &hooks, &fixture.feed, &fixture.failure)
               ? 0
               : -1;
}

/* Ends the connection and the daemon, so that what it kept may be read. */
static struct feed_counts finish(struct fixture *fixture)
{
    struct feed_counts counts = feed_counts(fixture->feed);
    feed_free(fixture->feed);
    wire_free(fixture->wire);
    fake_daemon_stop(&fixture->fake);
    fixture->feed = NULL;
    return counts;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    if (fixture->feed) {
        (void)finish(fixture);
    }
    json_decref(fixture->stored);
    return 0;
}

/* Files the text as a file of that name would be. */
static int file_text(struct fixture *fixture, const char *text)
{
    FILE *file = tmpfile();
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fflush(file), 0);
    rewind(file);
    int code = feed_file(fixture->feed, fileno(file), "log.jsonl", &fixture->failure);
    assert_int_equal(fclose(file), 0);
    return code ? code : feed_finish(fixture->feed, &fixture->failure);
}

/* Lines with ids 0 to count - 1 and the given version; the caller frees them. */
static char *many_lines(int count, int version)
{
    char *text = NULL;
    size_t length = 0;
    FILE *stream = open_memstream(&text, &length);
    assert_non_null(stream);
    for (int i = 0; i < count; i++) {
        (void)fprintf(stream, "{\"id\":\"%d\",\"version\":%d}\n", i, version);
    }
    assert_int_equal(fclose(stream), 0);
    return text;
}

static void every_line_is_counted_by_what_it_was(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(file_text(fixture, "{\"id\":\"a\",\"version\":1}\n"
                                        "{\"id\":\"a\",\"version\":1}\n"
                                        "{\"id\":\"a\",\"version\":2}\n"
                                        "{\"id\":\"b\",\"version\":1}"),
                     0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.fresh, 2);
    assert_int_equal(counts.same, 1);
    assert_int_equal(counts.revised, 1);
    assert_int_equal(counts.refused, 0);
    assert_int_equal(counts.unanswered, 0);
    assert_int_equal(counts.bytes, 3 * 23 + 22);
}

static void a_refused_line_is_named_and_the_others_go_on(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(file_text(fixture, "\xEF\xBB\xBF{\"id\":\"a\"}\n"
                                        "\n"
                                        "{\"id\":3}\r\n"
                                        "[1]\n"
                                        "{\"id\":\"x\",\"id\":\"y\"}\n"
                                        "{\"id\":\"b\"}\n"),
                     0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.fresh, 2);
    assert_int_equal(counts.refused, 3);
    assert_non_null(strstr(fixture->refused, "log.jsonl:3: An id is a text (/id)\n"));
    assert_non_null(strstr(fixture->refused, "log.jsonl:4: an item is a JSON object\n"));
    assert_non_null(strstr(fixture->refused, "log.jsonl:5: this is not JSON: duplicate"));
}

static void a_line_over_the_limit_is_refused_without_being_sent(void **state)
{
    struct fixture *fixture = *state;
    char text[6000];
    memset(text, 'x', sizeof text);
    strcpy(text + sizeof text - 20, "\n{\"id\":\"after\"}\n");
    assert_int_equal(file_text(fixture, text), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.refused, 1);
    assert_int_equal(counts.fresh, 1);
    assert_int_equal(fixture->fake.requests, 1);
}

static void a_line_longer_than_the_window_is_let_through(void **state)
{
    struct fixture *fixture = *state;
    char text[4000];
    int length =
        snprintf(text, sizeof text, "{\"id\":\"a\",\"text\":\"%3000s\"}\n{\"id\":\"b\"}\n", "fog");
    assert_in_range(length, 3000, sizeof text - 1);
    assert_int_equal(file_text(fixture, text), 0);
    assert_int_equal(finish(fixture).fresh, 2);
}

static void a_stream_many_times_the_window_arrives_whole(void **state)
{
    struct fixture *fixture = *state;
    char *text = many_lines(5000, 1);
    assert_int_equal(file_text(fixture, text), 0);
    free(text);
    assert_int_equal(finish(fixture).fresh, 5000);
    assert_int_equal(json_object_size(fixture->stored), 5000);
    assert_int_equal(fixture->acknowledged, 5000);
}

static void a_line_the_store_cannot_take_is_tried_again(void **state)
{
    struct fixture *fixture = *state;
    char *text = many_lines(100, 1);
    fixture->full_at[0] = 20;
    fixture->full_at[1] = 22;
    fixture->full_at[2] = 60;
    assert_int_equal(file_text(fixture, text), 0);
    free(text);
    struct feed_counts counts = finish(fixture);
    /* each line counts once, as what it was when it first arrived */
    assert_int_equal(counts.fresh, 100);
    assert_int_equal(counts.same, 0);
    assert_int_equal(fixture->acknowledged, 100);
    assert_int_equal(json_object_size(fixture->stored), 100);
    assert_true(fixture->waits >= 2);
}

static void an_older_version_never_lands_on_a_newer_one(void **state)
{
    struct fixture *fixture = *state;
    fixture->full_at[0] = 1; /* the first version must wait while the second is taken */
    assert_int_equal(file_text(fixture, "{\"id\":\"a\",\"version\":1}\n"
                                        "{\"id\":\"a\",\"version\":2}\n"),
                     0);
    (void)finish(fixture);
    assert_int_equal(json_integer_value(json_object_get(fixture->stored, "a")), 2);
}

static void a_store_that_stays_full_ends_in_try_again(void **state)
{
    struct fixture *fixture = *state;
    fixture->always_full = true;
    assert_int_equal(file_text(fixture, "{\"id\":\"a\"}\n{\"id\":\"b\"}\n"), FAILURE_AGAIN);
    assert_string_equal(fixture->failure.message,
                        "the store does not take items now, after 3 tries: Disk full");
    struct feed_counts counts = finish(fixture);
    assert_int_equal(feed_acknowledged(&counts), 0);
    assert_int_equal(fixture->waits, 2);
    assert_int_equal(fixture->waited_ms, 1 + 2); /* each wait is twice the one before */
}

static void a_daemon_that_goes_away_leaves_a_true_count(void **state)
{
    struct fixture *fixture = *state;
    char *text = many_lines(100, 1);
    fixture->closes_at = 51;
    assert_int_equal(file_text(fixture, text), FAILURE_UNREACHABLE);
    free(text);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(feed_acknowledged(&counts), 50);
    assert_in_range(counts.unanswered, 1, 8);
}

static void a_daemon_that_goes_away_after_the_last_answer_does_no_harm(void **state)
{
    struct fixture *fixture = *state;
    fixture->closes_after = 2;
    assert_int_equal(file_text(fixture, "{\"id\":\"a\"}\n{\"id\":\"b\"}\n"), 0);
    assert_int_equal(finish(fixture).fresh, 2);
}

static void what_is_not_allowed_stops_the_stream(void **state)
{
    struct fixture *fixture = *state;
    char *text = many_lines(100, 1);
    fixture->forbids_at = 11;
    assert_int_equal(file_text(fixture, text), FAILURE_FORBIDDEN);
    free(text);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(feed_acknowledged(&counts), 10);
}

/* --- lines of several requests --- */

#define RULED_AND_CHECKED                                                                          \
    "{\"id\":\"a\",\"then\":["                                                                     \
    "{\"method\":\"item.rule\",\"params\":{\"not\":[\"fog\"]}},"                                   \
    "{\"method\":\"item.check\",\"params\":{\"tags\":[\"ice\"]}}]}\n"

static void a_line_with_calls_counts_once_as_its_filing_does(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(file_text(fixture, RULED_AND_CHECKED "{\"id\":\"b\"}\n"), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.fresh, 2);
    assert_int_equal(counts.revised + counts.same + counts.refused, 0);
    assert_int_equal(counts.bytes, sizeof RULED_AND_CHECKED - 1 + 11);
    assert_int_equal(fixture->acknowledged, 2);
    assert_string_equal(fixture->asked, "item.file item.rule item.check item.file");
}

static void many_lines_with_calls_arrive_whole(void **state)
{
    struct fixture *fixture = *state;
    char text[40 * sizeof RULED_AND_CHECKED] = "";
    for (int i = 0; i < 40; i++) {
        (void)strcat(text, RULED_AND_CHECKED);
    }
    assert_int_equal(file_text(fixture, text), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(feed_acknowledged(&counts), 40);
    assert_int_equal(fixture->fake.requests, 3 * 40);
}

static void a_line_is_refused_where_one_of_its_calls_is(void **state)
{
    struct fixture *fixture = *state;
    fixture->refuses_at = 3;
    assert_int_equal(file_text(fixture, "{\"id\":\"b\"}\n" RULED_AND_CHECKED), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.fresh, 1);
    assert_int_equal(counts.refused, 1);
    assert_string_equal(fixture->refused, "log.jsonl:2: then[0] (item.rule): No such tag\n");
}

static void a_line_whose_calls_cannot_be_made_is_refused_before_any_is(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(file_text(fixture, "{\"id\":\"a\",\"then\":{}}\n"), 0);
    assert_int_equal(finish(fixture).refused, 1);
    assert_string_equal(fixture->refused, "log.jsonl:1: then is not a list\n");
    assert_int_equal(fixture->fake.requests, 0);
}

static void a_line_is_gone_on_with_at_the_call_that_the_store_could_not_take(void **state)
{
    struct fixture *fixture = *state;
    fixture->full_at[0] = 2;
    assert_int_equal(file_text(fixture, RULED_AND_CHECKED "{\"id\":\"b\"}\n"), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.fresh, 2);
    assert_int_equal(fixture->waits, 1);
    assert_string_equal(fixture->asked, "item.file item.rule item.check item.file "
                                        "item.rule item.check item.file");
}

/* Without its filing nothing can be ruled on the item. */
static void what_is_refused_behind_a_call_that_was_not_taken_is_asked_again(void **state)
{
    struct fixture *fixture = *state;
    fixture->full_at[0] = 1;
    fixture->refuses_at = 2;
    assert_int_equal(file_text(fixture, RULED_AND_CHECKED), 0);
    struct feed_counts counts = finish(fixture);
    assert_int_equal(counts.refused, 0);
    assert_int_equal(feed_acknowledged(&counts), 1);
    assert_string_equal(fixture->refused, "");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(every_line_is_counted_by_what_it_was, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_refused_line_is_named_and_the_others_go_on, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_line_over_the_limit_is_refused_without_being_sent, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_line_longer_than_the_window_is_let_through, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_stream_many_times_the_window_arrives_whole, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_line_the_store_cannot_take_is_tried_again, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(an_older_version_never_lands_on_a_newer_one, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_store_that_stays_full_ends_in_try_again, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_daemon_that_goes_away_leaves_a_true_count, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_daemon_that_goes_away_after_the_last_answer_does_no_harm,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(what_is_not_allowed_stops_the_stream, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_line_with_calls_counts_once_as_its_filing_does, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(many_lines_with_calls_arrive_whole, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_line_is_refused_where_one_of_its_calls_is, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_line_whose_calls_cannot_be_made_is_refused_before_any_is,
                                        set_up, tear_down),
        cmocka_unit_test_setup_teardown(
            a_line_is_gone_on_with_at_the_call_that_the_store_could_not_take, set_up, tear_down),
        cmocka_unit_test_setup_teardown(
            what_is_refused_behind_a_call_that_was_not_taken_is_asked_again, set_up, tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
