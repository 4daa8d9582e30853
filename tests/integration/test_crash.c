/*
 * kill -9 in the middle of a feed. What was acknowledged must be there afterwards; and once all is
 * learned again, the model must be that of a daemon that never died, to the last bit that can be
 * asked for.
 *
 * The feed is a fixed sequence in which change k gets seq k, so that the seq that a daemon comes
 * back with says exactly which changes it has: all that were acknowledged, and perhaps a few whose
 * acknowledgement was lost.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    BLOCK = 8, /* changes: five items are new, two are revised or filed again, one withdrawn */
    BLOCK_ITEMS = 5,
    WINDOW = 64, /* changes under way */
    SHORT_WORDS = 16,
    LONG_WORDS = 3000, /* learning them takes longer than storing them */
    TEXT_BYTES = 12 * LONG_WORDS + 1
};

/* --- the sequence ---------------------------------------------------------------------------- */

struct change {
    unsigned item;
    bool withdrawn;
};

static struct change change_of(unsigned k)
{
    unsigned block = (k - 1) / BLOCK;
    unsigned at = (k - 1) % BLOCK;
    unsigned third = block * BLOCK_ITEMS + 2;
    if (at < BLOCK_ITEMS) {
        return (struct change){.item = block * BLOCK_ITEMS + at};
    }
    if (at == 5) {
        return (struct change){.item = block * BLOCK_ITEMS}; /* revised */
    }
    if (at == 6) { /* the one that was withdrawn in the block before, if any */
        return (struct change){.item = block > 0 ? third - BLOCK_ITEMS : third};
    }
    return (struct change){.item = third, .withdrawn = true};
}

struct feed {
    struct peer peer;
    size_t words;          /* of a text */
    unsigned before;       /* the last change that others sent */
    unsigned sent;         /* the last change sent, */
    unsigned acknowledged; /* and answered */
};

static void feed_open(struct feed *feed, const struct service *service, size_t words,
                      unsigned before)
{
    *feed = (struct feed){.words = words, .before = before, .sent = before, .acknowledged = before};
    peer_open(&feed->peer, service->daemon.socket);
    feed->peer.may_be_cut = true;
}

static void feed_send(struct feed *feed)
{
    static char text[TEXT_BYTES];
    char tags[LOGBOOK_TAGS_BYTES];
    unsigned k = ++feed->sent;
    struct change change = change_of(k);
    if (change.withdrawn) {
        (void)peer_request(&feed->peer, "item.withdraw", "{'id': 'item %u'}", change.item);
        return;
    }
    logbook_tags(k, tags);
    logbook_text(k, feed->words, text, sizeof text);
    (void)peer_request(&feed->peer, "item.file", "{'id': 'item %u', 'text': '%s', 'tags': %s}",
                       change.item, text, tags);
}

static void feed_take(struct feed *feed)
{
    unsigned k = feed->acknowledged + 1;
    assert_int_equal(whole(peer_result(&feed->peer, k - feed->before), "seq"), k);
    feed->acknowledged = k;
}

/* Sends change after change until `k` is acknowledged, with more under way. */
static void feed_until(struct feed *feed, unsigned k)
{
    while (feed->acknowledged < k) {
        if (feed->sent - feed->acknowledged < WINDOW) {
            feed_send(feed);
        } else {
            feed_take(feed);
        }
    }
}

/* Sends no change beyond `k`, and waits for its acknowledgement. */
static void feed_up_to(struct feed *feed, unsigned k)
{
    while (feed->acknowledged < k) {
        if (feed->sent < k && feed->sent - feed->acknowledged < WINDOW) {
            feed_send(feed);
        } else {
            feed_take(feed);
        }
    }
}

/* Acknowledgements that had been sent before the daemon was killed count as well. */
static void feed_close_after_kill(struct feed *feed)
{
    const char *line = NULL;
    while ((line = peer_line(&feed->peer))) {
        assert_non_null(strstr(line, "\"result\""));
        feed->acknowledged++;
    }
    peer_close(&feed->peer);
}

/* --- what must be there ---------------------------------------------------------------------- */

/* The change that an item has after the first `seq` changes; 0: the item is not there yet. */
static unsigned last_change_of(unsigned item, unsigned seq)
{
    for (unsigned k = seq; k > 0; k--) {
        if (change_of(k).item == item) {
            return k;
        }
    }
    return 0;
}

static unsigned count_items(unsigned seq)
{
    unsigned count = 0;
    while (last_change_of(count, seq) > 0) {
        count++;
    }
    return count;
}

static void assert_content(struct peer *peer, unsigned k, size_t words)
{
    static char text[TEXT_BYTES];
    char tags[LOGBOOK_TAGS_BYTES];
    struct change change = change_of(k);
    if (change.withdrawn) {
        assert_error(ask_refused(peer, "item.show", "{'id': 'item %u'}", change.item), -32001,
                     "/id");
        return;
    }
    logbook_text(k, words, text, sizeof text);
    logbook_tags(k, tags);
    const json_t *item = ask(peer, "item.show", "{'id': 'item %u'}", change.item);
    assert_int_equal(whole(item, "seq"), k);
    assert_string_equal(string(item, "text"), text);
    assert_int_equal(json_array_size(json_object_get(item, "tags")), strchr(tags, ',') ? 2 : 1);
}

/* The store holds the first `seq` changes, neither more nor less. */
static void assert_changes(struct peer *peer, unsigned seq, size_t words)
{
    unsigned items = count_items(seq);
    const json_t *list = ask(peer, "item.list", "{'most': 10000}");
    assert_int_equal(json_array_size(json_object_get(list, "items")), items);
    assert_int_equal(whole(list, "next"), seq);
    for (unsigned item = 0; item < items; item++) {
        assert_content(peer, last_change_of(item, seq), words);
    }
}

/* --- nothing acknowledged is lost ------------------------------------------------------------ */

static void every_acknowledged_change_survives_kill_9(void **state)
{
    struct service *service = *state;
    static const unsigned MOMENTS[] = {1, 2, 40, 150, 3};
    unsigned seq = 0;
    for (size_t i = 0; i < sizeof MOMENTS / sizeof MOMENTS[0]; i++) {
        struct feed feed;
        feed_open(&feed, service, SHORT_WORDS, seq);
        feed_until(&feed, seq + MOMENTS[i]);
        undertagd_kill(&service->daemon);
        feed_close_after_kill(&feed);
        service_restart(service);
        seq = (unsigned)ask_seq(&service->peer);
        assert_in_range(seq, feed.acknowledged, feed.sent);
        assert_changes(&service->peer, seq, SHORT_WORDS);
    }
}

static void what_was_acknowledged_alone_survives_kill_9(void **state)
{
    struct service *service = *state;
    for (unsigned i = 1; i <= 5; i++) {
        (void)ask(&service->peer, "item.file", "{'id': 'a', 'title': 'night %u', 'tags': []}", i);
        undertagd_kill(&service->daemon);
        service_restart(service);
        const json_t *item = ask(&service->peer, "item.show", "{'id': 'a'}");
        char title[16];
        (void)snprintf(title, sizeof title, "night %u", i);
        assert_string_equal(string(item, "title"), title);
        assert_int_equal(whole(item, "seq"), i);
    }
}

/* --- nothing learned is lost ----------------------------------------------------------------- */

/* Learning may be a minute behind, and what was learned is stored all the time. */
static int set_up_backlog(void **state)
{
    *state = service_new("visible_within_ms=60000", "flush_every_ms=10", NULL);
    return 0;
}

/*
 * Feeds until the daemon is killed with a backlog of two blocks at least, which hold revisions and
 * withdrawals. Returns the seq that it came back with.
 */
static unsigned kill_with_backlog(struct service *service, unsigned before, unsigned least)
{
    enum {
        LEAST_BACKLOG = 2 * BLOCK,
        MOST_CHANGES = 4000 /* a feed that long with no backlog is none */
    };
    struct feed feed;
    feed_open(&feed, service, LONG_WORDS, before);
    json_int_t backlog = 0;
    for (unsigned k = before + least; backlog < LEAST_BACKLOG; k += BLOCK) {
        assert_true(k < MOST_CHANGES);
        feed_until(&feed, k);
        const json_t *now = ask(&service->peer, "daemon.state", "{}");
        backlog = whole(now, "seq") - whole(now, "learned");
    }
    undertagd_kill(&service->daemon);
    feed_close_after_kill(&feed);
    service_restart(service);
    unsigned seq = (unsigned)ask_seq(&service->peer);
    assert_in_range(seq, feed.acknowledged, feed.sent);
    return seq;
}

/* How many changes the daemon said it had to learn when it started last. */
static unsigned to_learn_at_start(const struct service *service)
{
    FILE *log = fopen(service->daemon.log, "re");
    char line[1024];
    unsigned to_learn = 0;
    assert_non_null(log);
    while (fgets(line, sizeof line, log)) {
        const char *changes = strstr(line, " changes, ");
        if (strstr(line, "ready: ") && changes) {
            to_learn = (unsigned)strtoul(changes + strlen(" changes, "), NULL, 10);
        }
    }
    (void)fclose(log); /* it was only read */
    return to_learn;
}

/* The answers of both daemons to a question are equal byte for byte. */
static void assert_same_answer(struct peer *one, struct peer *other, const char *params)
{
    struct peer *peers[] = {one, other};
    char *lines[2];
    for (size_t i = 0; i < 2; i++) {
        peer_say(peers[i],
                 "{'jsonrpc': '2.0', 'id': 1, 'method': 'item.gaps', "
                 "'params': {%s, 'floor': 0, 'most': 1000, 'why': true}}",
                 params);
        const char *line = peer_line(peers[i]);
        assert_non_null(line);
        assert_non_null(strstr(line, "\"gaps\":[{"));
        lines[i] = strdup(line);
        assert_non_null(lines[i]);
    }
    assert_string_equal(lines[0], lines[1]);
    free(lines[0]);
    free(lines[1]);
}

static void assert_same_model(struct peer *one, struct peer *other, unsigned seq)
{
    unsigned items = count_items(seq);
    wait_until_learned(one);
    wait_until_learned(other);
    assert_int_equal(ask_learned(one), seq);
    assert_int_equal(ask_learned(other), seq);
    for (unsigned item = 0; item < items; item++) {
        char params[64];
        (void)snprintf(params, sizeof params, "'id': 'item %u'", item);
        if (!change_of(last_change_of(item, seq)).withdrawn) {
            assert_same_answer(one, other, params);
        }
    }
    for (unsigned i = 0; i < 50; i++) { /* and drafts of words that it has seen and has not */
        char text[12 * SHORT_WORDS + 1];
        char params[sizeof text + 32];
        logbook_text(1000000 + i, SHORT_WORDS, text, sizeof text);
        (void)snprintf(params, sizeof params, "'text': '%s'", text);
        assert_same_answer(one, other, params);
    }
}

static void a_model_learned_again_is_that_of_a_daemon_that_never_died(void **state)
{
    struct service *service = *state;
    unsigned seq = 0;
    for (unsigned round = 0; round < 3; round++) {
        seq = kill_with_backlog(service, seq, 20 + 13 * round);
        unsigned to_learn = to_learn_at_start(service);
        assert_true(to_learn >= BLOCK); /* the kill did land with a backlog */
        wait_until_learned(&service->peer);
    }
    assert_changes(&service->peer, seq, LONG_WORDS);
    void *never_died = NULL;
    assert_int_equal(set_up_backlog(&never_died), 0);
    struct service *reference = never_died;
    struct feed feed;
    feed_open(&feed, reference, LONG_WORDS, 0);
    feed_up_to(&feed, seq);
    assert_same_model(&service->peer, &reference->peer, seq);
    struct feed more; /* what does not show in answers shows in what is learned from here */
    feed_open(&more, service, LONG_WORDS, seq);
    feed_up_to(&more, seq + 3 * BLOCK);
    feed_up_to(&feed, seq + 3 * BLOCK);
    assert_same_model(&service->peer, &reference->peer, seq + 3 * BLOCK);
    peer_close(&feed.peer);
    peer_close(&more.peer);
    assert_int_equal(service_tear_down(&never_died), 0);
}

static void answers_come_while_the_backlog_is_learned(void **state)
{
    struct service *service = *state;
    unsigned seq = kill_with_backlog(service, 0, 40);
    const json_t *answer = ask(&service->peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}");
    assert_in_range(whole(answer, "learned"), 0, seq); /* told at once, and how far it reaches */
    (void)ask(&service->peer, "item.file", "{'id': 'late', 'tags': ['fog']}");
    assert_int_equal(whole(ask(&service->peer, "item.show", "{'id': 'late'}"), "seq"), seq + 1);
    wait_until_learned(&service->peer);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)
#define TEST_OF_BACKLOG(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, set_up_backlog, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_acknowledged_change_survives_kill_9),
        TEST(what_was_acknowledged_alone_survives_kill_9),
        TEST_OF_BACKLOG(a_model_learned_again_is_that_of_a_daemon_that_never_died),
        TEST_OF_BACKLOG(answers_come_while_the_backlog_is_learned),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
