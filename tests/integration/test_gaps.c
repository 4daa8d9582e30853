/*
 * item.gaps over the wire, on a daemon that has learned the invented logbook.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <poll.h>
#include <string.h>
#include <time.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    ENTRIES = 400,
    WORDS = 16
};

/* One daemon for all: what these tests file themselves leaves the rest as it is. */
static int set_up_logbook(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 1, ENTRIES, WORDS);
    wait_until_learned(&service->peer);
    *state = service;
    return 0;
}

static const json_t *gaps_of(const json_t *answer)
{
    const json_t *gaps = json_object_get(answer, "gaps");
    assert_true(json_is_array(gaps));
    return gaps;
}

/* The gap of a tag; NULL where it is not proposed. */
static const json_t *find(const json_t *answer, const char *tag)
{
    size_t i = 0;
    const json_t *gap = NULL;
    json_array_foreach(gaps_of(answer), i, gap)
    {
        if (strcmp(string(gap, "tag"), tag) == 0) {
            return gap;
        }
    }
    return NULL;
}

static void assert_near(double value, double expected)
{
    if (!(fabs(value - expected) < 1e-9)) {
        fail_msg("%.17g is not %.17g", value, expected);
    }
}

/* --- what is proposed ------------------------------------------------------------------------ */

static void the_tag_that_the_words_speak_for_comes_first(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const CASES[][2] = {
        {"haze and a dense fog, the horn all night", "fog"},
        {"gulls and terns, a flock on the nest", "birds"},
        {"The pilot left the QUAY for the buoy", "harbour"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        const json_t *answer = ask(peer, "item.gaps", "{'text': '%s'}", CASES[i][0]);
        assert_string_equal(string(json_array_get(gaps_of(answer), 0), "tag"), CASES[i][1]);
    }
}

static void a_title_speaks_as_the_text_does(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *answer = ask(peer, "item.gaps", "{'title': 'dense fog, horn, haze'}");
    assert_string_equal(string(json_array_get(gaps_of(answer), 0), "tag"), "fog");
}

static void gaps_fall_by_chance_and_have_figures_that_make_sense(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *answer =
        ask(peer, "item.gaps", "{'text': 'dense fog, gulls on the nest', 'floor': 0}");
    double last = 1.0;
    double sum = 0.0;
    size_t i = 0;
    const json_t *gap = NULL;
    json_array_foreach(gaps_of(answer), i, gap)
    {
        assert_true(number(gap, "chance") >= 0.0 && number(gap, "chance") <= last);
        assert_true(number(gap, "score") > -100.0 && number(gap, "score") < 100.0);
        assert_int_equal(json_object_size(gap), 3);
        last = number(gap, "chance");
        sum += last;
    }
    assert_int_equal(i, 8); /* of all tags, so their chances add up to what is expected */
    assert_true(number(answer, "expected") > 0.0);
    assert_near(number(answer, "expected"), sum);
    assert_int_equal(whole(answer, "learned"), ask_seq(peer));
    assert_true(json_is_boolean(json_object_get(answer, "early")));
    assert_int_equal(json_object_size(answer), 4);
}

static void a_draft_without_words_gets_an_answer(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const DRAFTS[] = {"{'floor': 0}", "{'text': '', 'floor': 0}",
                                         "{'text': 'xyzzy', 'floor': 0}",
                                         "{'text': '...!', 'floor': 0}"};
    for (size_t i = 0; i < sizeof DRAFTS / sizeof DRAFTS[0]; i++) {
        const json_t *answer = ask(peer, "item.gaps", "%s", DRAFTS[i]);
        assert_int_equal(json_array_size(gaps_of(answer)), 8);
        assert_true(number(answer, "expected") > 0.0);
    }
}

/* --- what is not proposed -------------------------------------------------------------------- */

static void what_a_draft_has_is_not_proposed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *answer =
        ask(peer, "item.gaps", "{'text': 'dense fog, horn', 'tags': ['fog'], 'floor': 0}");
    assert_null(find(answer, "fog"));
    assert_int_equal(json_array_size(gaps_of(answer)), 7);
}

static void what_an_item_has_is_not_proposed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.file", "{'id': 'x', 'text': 'dense fog, horn', 'tags': ['fog']}");
    const json_t *answer = ask(peer, "item.gaps", "{'id': 'x', 'floor': 0}");
    assert_null(find(answer, "fog"));
    assert_int_equal(json_array_size(gaps_of(answer)), 7);
    (void)ask(peer, "item.withdraw", "{'id': 'x'}");
}

static void what_was_declined_is_not_proposed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.file",
              "{'id': 'x', 'text': 'dense fog, horn', 'tags': [], 'declined': ['fog']}");
    assert_null(find(ask(peer, "item.gaps", "{'id': 'x', 'floor': 0}"), "fog"));
    (void)ask(peer, "item.file", "{'id': 'x', 'text': 'dense fog, horn', 'tags': []}");
    assert_non_null(find(ask(peer, "item.gaps", "{'id': 'x', 'floor': 0}"), "fog"));
    (void)ask(peer, "item.withdraw", "{'id': 'x'}");
}

static void an_unknown_tag_of_a_draft_is_passed_over_and_not_opened(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    json_int_t seq = ask_seq(peer);
    const json_t *answer =
        ask(peer, "item.gaps", "{'text': 'dense fog', 'tags': ['mermaids'], 'floor': 0}");
    assert_int_equal(json_array_size(gaps_of(answer)), 8);
    assert_int_equal(ask_seq(peer), seq);
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'mermaids'}"), -32001, "/tag");
}

/* P(missing | not given) = (1 - p)q / (1 - pq) is less than q for every p above 0. */
static void a_tag_is_less_likely_missing_where_an_editor_has_looked(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *untagged = ask(peer, "item.gaps", "{'text': 'dense fog, horn', 'floor': 0}");
    const json_t *tagged =
        ask(peer, "item.gaps", "{'text': 'dense fog, horn', 'tags': ['birds'], 'floor': 0}");
    double q = number(find(untagged, "fog"), "chance");
    double p = number(json_object_get(ask(peer, "tag.show", "{'tag': 'fog'}"), "propensity"), "p");
    double missing = number(find(tagged, "fog"), "chance");
    /* Bayes' rule, then in view of the item's other tags: by how much is test_agreement's. */
    assert_true(p > 0.0 && p < 1.0 && missing > 0.0 && missing < q);
    assert_true(fabs(missing - (1.0 - p) * q / (1.0 - p * q)) < 0.1);
}

/* --- most, floor, why ------------------------------------------------------------------------ */

static void no_more_than_most_are_shown(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = gaps_of(ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}"));
    const json_t *three =
        gaps_of(ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 0, 'most': 3}"));
    assert_int_equal(json_array_size(three), 3);
    for (size_t i = 0; i < 3; i++) {
        assert_true(json_equal(json_array_get(three, i), json_array_get(all, i)));
    }
}

static void nothing_below_the_floor_is_shown(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = gaps_of(ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}"));
    for (size_t shown = 0; shown < json_array_size(all); shown++) {
        double chance = number(json_array_get(all, shown), "chance");
        const json_t *above =
            gaps_of(ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': %.17g}", chance));
        assert_true(json_array_size(above) > shown); /* the least chance shown is shown */
        double last = number(json_array_get(above, json_array_size(above) - 1), "chance");
        assert_true(last >= chance);
    }
    assert_int_equal(
        json_array_size(gaps_of(ask(peer, "item.gaps", "{'text': 'xyzzy', 'floor': 1}"))), 0);
}

static void expected_does_not_depend_on_what_is_shown(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 0}");
    const json_t *one = ask(peer, "item.gaps", "{'text': 'dense fog', 'floor': 1, 'most': 1}");
    assert_near(number(all, "expected"), number(one, "expected"));
}

static void the_words_behind_a_gap_are_those_of_the_text(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char TEXT[] = "The HORN blew; Dense haze, said the parson.";
    const json_t *answer = ask(peer, "item.gaps", "{'text': '%s', 'why': true, 'floor': 0}", TEXT);
    const json_t *words = json_object_get(find(answer, "fog"), "words");
    assert_in_range(json_array_size(words), 2, 8);
    double sum = 0.0;
    double last = 1.0;
    size_t i = 0;
    const json_t *word = NULL;
    json_array_foreach(words, i, word)
    {
        double share = json_number_value(json_array_get(word, 1));
        assert_non_null(strstr(TEXT, json_string_value(json_array_get(word, 0))));
        assert_true(share > 0.0 && share <= last);
        last = share;
        sum += share;
    }
    assert_true(sum <= 1.0 + 1e-9);
    assert_null(json_object_get(
        find(ask(peer, "item.gaps", "{'text': '%s', 'floor': 0}", TEXT), "fog"), "words"));
}

/* Having learned the item, the model takes what it lacks for less likely, which is not held against
 * the item itself: its gaps are as likely as they were just before it was filed. */
static void an_item_s_own_share_is_taken_out_of_its_chances(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char MEMBERS[] = "'text': 'dense fog on the quay', 'tags': ['lamp'], "
                                  "'fields': {'desk': 'north'}";
    const json_t *draft = ask(peer, "item.gaps", "{%s, 'floor': 0}", MEMBERS);
    double before = number(find(draft, "fog"), "chance");
    double score = number(find(draft, "fog"), "score");
    (void)ask(peer, "item.file", "{'id': 'x', %s}", MEMBERS);
    wait_until_learned(peer);
    const json_t *item = ask(peer, "item.gaps", "{'id': 'x', 'floor': 0}");
    assert_true(number(find(item, "fog"), "score") < score);
    assert_true(fabs(number(find(item, "fog"), "chance") - before) < 0.05);
    (void)ask(peer, "item.withdraw", "{'id': 'x'}");
    wait_until_learned(peer);
}

static void an_id_and_a_draft_are_not_asked_about_together(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const DRAFTS[] = {"'title': 'x'", "'text': 'x'", "'fields': {}",
                                         "'tags': []", "'language': 'en'"};
    for (size_t i = 0; i < sizeof DRAFTS / sizeof DRAFTS[0]; i++) {
        assert_error(ask_refused(peer, "item.gaps", "{'id': 'entry 1', %s}", DRAFTS[i]), -32602,
                     "/id");
    }
}

static void asking_changes_nothing(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    json_int_t seq = ask_seq(peer);
    const char *first = text_of(peer, ask(peer, "item.gaps", "{'text': 'gulls', 'floor': 0}"));
    for (unsigned i = 0; i < 20; i++) {
        (void)ask(peer, "item.gaps", "{'text': 'new words number %u', 'floor': 0}", i);
    }
    assert_string_equal(text_of(peer, ask(peer, "item.gaps", "{'text': 'gulls', 'floor': 0}")),
                        first);
    assert_int_equal(ask_seq(peer), seq);
}

/* --- what is seen when ----------------------------------------------------------------------- */

enum {
    VISIBLE_WITHIN_MS = 50,
    LARGE_WORDS = 4000, /* so that learning takes longer than storing */
    LARGE_ENTRIES = 300
};

static int set_up_promise(void **state)
{
    *state = service_new("visible_within_ms=50", NULL, NULL);
    return 0;
}

static int64_t now_ms(void)
{
    struct timespec now;
    assert_int_equal(clock_gettime(CLOCK_MONOTONIC, &now), 0);
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

/* Takes the acknowledgements that have come, with the time at which each was seen. */
static void note_acknowledged(struct peer *feed, unsigned sent, json_int_t *seq, int64_t *seen_ms)
{
    while (*seq < sent && peer_has_something(feed)) {
        (void)peer_result(feed, (unsigned)*seq + 1);
        seen_ms[++*seq] = now_ms();
    }
}

/*
 * The promise is one of time, so the test must look at the clock: whenever a change was seen to be
 * acknowledged VISIBLE_WITHIN_MS ago, an answer to a question sent now reflects it.
 */
static void what_was_acknowledged_is_learned_within_the_promised_time(void **state)
{
    struct service *service = *state;
    struct peer feed;
    static char text[12 * LARGE_WORDS + 1];
    static int64_t seen_ms[LARGE_ENTRIES + 1];
    json_int_t seq = 0;
    json_int_t due = 0;
    unsigned sent = 0;
    unsigned behind = 0;
    peer_open(&feed, service->daemon.socket);
    while (due < LARGE_ENTRIES) {
        char tags[LOGBOOK_TAGS_BYTES];
        if (sent < LARGE_ENTRIES) {
            logbook_tags(++sent, tags);
            logbook_text(sent, LARGE_WORDS, text, sizeof text);
            (void)peer_request(&feed, "item.file", "{'id': '%u', 'text': '%s', 'tags': %s}", sent,
                               text, tags);
        } else if (due == seq || seen_ms[due + 1] + VISIBLE_WITHIN_MS > now_ms()) {
            (void)poll(NULL, 0, 5); /* until the clock has moved on */
        }
        note_acknowledged(&feed, sent, &seq, seen_ms);
        while (due < seq && seen_ms[due + 1] + VISIBLE_WITHIN_MS <= now_ms()) {
            due++;
        }
        json_int_t learned =
            whole(ask(&service->peer, "item.gaps", "{'text': 'fog', 'most': 1}"), "learned");
        assert_true(learned >= due);
        behind += learned < seq;
    }
    /* The trainer was behind now and then: there was something to keep. Slowed down, who asks is as
     * slow, and it may always be done. */
    assert_true(behind > 0 || undertagd_is_slowed());
    peer_close(&feed);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_tag_that_the_words_speak_for_comes_first),
        cmocka_unit_test(a_title_speaks_as_the_text_does),
        cmocka_unit_test(gaps_fall_by_chance_and_have_figures_that_make_sense),
        cmocka_unit_test(a_draft_without_words_gets_an_answer),
        cmocka_unit_test(what_a_draft_has_is_not_proposed),
        cmocka_unit_test(what_an_item_has_is_not_proposed),
        cmocka_unit_test(what_was_declined_is_not_proposed),
        cmocka_unit_test(an_unknown_tag_of_a_draft_is_passed_over_and_not_opened),
        cmocka_unit_test(a_tag_is_less_likely_missing_where_an_editor_has_looked),
        cmocka_unit_test(no_more_than_most_are_shown),
        cmocka_unit_test(nothing_below_the_floor_is_shown),
        cmocka_unit_test(expected_does_not_depend_on_what_is_shown),
        cmocka_unit_test(the_words_behind_a_gap_are_those_of_the_text),
        cmocka_unit_test(an_item_s_own_share_is_taken_out_of_its_chances),
        cmocka_unit_test(an_id_and_a_draft_are_not_asked_about_together),
        cmocka_unit_test(asking_changes_nothing),
    };
    const struct CMUnitTest promise[] = {
        cmocka_unit_test_setup_teardown(what_was_acknowledged_is_learned_within_the_promised_time,
                                        set_up_promise, service_tear_down),
    };
    int failed = cmocka_run_group_tests(tests, set_up_logbook, service_tear_down);
    return failed + cmocka_run_group_tests(promise, NULL, NULL);
}
