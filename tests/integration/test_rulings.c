/*
 * item.rule over the wire: what is seen of a ruling and when, what is refused, that a tag ruled out
 * is never proposed again, and that rulings, checks and second taggings survive kill -9, once.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <string.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

/* log/1 has fog and gale (seq 1), log/2 has bell, lamp and wreck (seq 2). */
static struct service *with_two_items(const char *setting)
{
    struct service *service = service_new(setting, NULL, NULL);
    (void)ask(&service->peer, "item.file",
              "{'id': 'log/1', 'title': 'Night watch', 'tagger': 'm.quill', "
              "'tags': ['fog', 'gale']}");
    (void)ask(&service->peer, "item.file", "{'id': 'log/2', 'tags': ['bell', 'lamp', 'wreck']}");
    return service;
}

static int set_up(void **state)
{
    *state = with_two_items(NULL);
    return 0;
}

static int set_up_small_limit(void **state)
{
    *state = with_two_items("tags_limit=3");
    return 0;
}

static const json_t *show(struct peer *peer)
{
    return ask(peer, "item.show", "{'id': 'log/1'}");
}

/* --- what is seen of a ruling --- */

static void a_ruling_is_answered_with_its_seq_and_seen_at_once(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "item.rule",
                    "{'id': 'log/1', 'belongs': ['lamp', 'bell'], 'not': ['gale'], "
                    "'editor': 'e.ditor'}"),
                "{'seq': 3}");
    assert_members(show(peer), "{'seq': 3, 'tags': ['bell', 'fog', 'lamp'], "
                               "'filed': ['fog', 'gale'], 'belongs': ['bell', 'lamp'], "
                               "'not': ['gale'], 'checked': null, 'second': [], "
                               "'title': 'Night watch', 'tagger': 'm.quill'}");
}

static void one_list_is_enough_and_an_empty_one_says_nothing(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell']}");
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': [], 'not': ['fog']}");
    assert_members(show(peer), "{'tags': ['bell', 'gale'], 'belongs': ['bell'], 'not': ['fog']}");
}

static void a_tag_named_twice_is_ruled_once(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell', 'bell']}");
    assert_members(show(peer), "{'belongs': ['bell']}");
    assert_members(ask(peer, "tag.show", "{'tag': 'bell'}"),
                   "{'count': 2, 'rulings': {'belongs': 1, 'not': 0}}");
}

static void the_latest_word_counts(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell'], 'not': ['gale']}");
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['gale'], 'not': ['bell']}");
    assert_members(show(peer), "{'tags': ['fog', 'gale'], 'belongs': ['gale'], 'not': ['bell']}");
    assert_members(ask(peer, "tag.show", "{'tag': 'bell'}"),
                   "{'count': 1, 'rulings': {'belongs': 0, 'not': 1}}");
}

static void a_filing_that_gives_a_tag_ruled_out_lifts_that(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'not': ['bell', 'gale']}");
    assert_json(ask(peer, "item.file", "{'id': 'log/1', 'tags': ['fog', 'bell']}"),
                "{'seq': 4, 'was': 'revised'}");
    assert_members(show(peer), "{'tags': ['bell', 'fog'], 'belongs': [], 'not': ['gale']}");
}

static void a_filing_that_declines_a_tag_ruled_in_lifts_that(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell', 'lamp']}");
    (void)ask(peer, "item.file", "{'id': 'log/1', 'tags': ['fog'], 'declined': ['bell']}");
    assert_members(show(peer), "{'tags': ['fog', 'lamp'], 'belongs': ['lamp'], 'not': []}");
}

static void the_same_filing_has_its_own_seq_and_leaves_the_rulings(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell'], 'not': ['gale']}");
    const char *before = text_of(peer, show(peer));
    assert_json(
        ask(peer, "item.file", "{'id': 'log/1', 'title': 'Night watch', 'tags': ['gale', 'fog']}"),
        "{'seq': 1, 'was': 'same'}");
    assert_string_equal(text_of(peer, show(peer)), before);
    assert_int_equal(ask_seq(peer), 3);
}

static void a_ruled_item_is_listed_as_changed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['bell']}");
    assert_json(ask(peer, "item.list", "{}"),
                "{'items': [{'id': 'log/2', 'seq': 2, 'withdrawn': false}, "
                "{'id': 'log/1', 'seq': 3, 'withdrawn': false}], 'next': 3}");
}

/* --- what is refused --- */

/* A request with the error that it must get. */
struct refused {
    const char *params;
    int code;
    const char *field;
};

static void assert_all_refused(struct peer *peer, const struct refused *cases, size_t count)
{
    const char *before = text_of(peer, show(peer));
    json_int_t seq = ask_seq(peer);
    for (size_t i = 0; i < count; i++) {
        assert_error(ask_refused(peer, "item.rule", "%s", cases[i].params), cases[i].code,
                     cases[i].field);
    }
    assert_string_equal(text_of(peer, show(peer)), before);
    assert_int_equal(ask_seq(peer), seq);
}

static void what_is_no_ruling_is_refused(void **state)
{
    static const struct refused CASES[] = {
        {"{}", -32602, "/id"},
        {"{'id': 7, 'belongs': ['fog']}", -32602, "/id"},
        {"{'id': '', 'belongs': ['fog']}", -32602, "/id"},
        {"{'id': 'log/1'}", -32602, "/belongs"},
        {"{'id': 'log/1', 'belongs': [], 'not': []}", -32602, "/belongs"},
        {"{'id': 'log/1', 'belongs': 'fog'}", -32602, "/belongs"},
        {"{'id': 'log/1', 'not': {'fog': true}}", -32602, "/not"},
        {"{'id': 'log/1', 'belongs': ['fog', 7]}", -32602, "/belongs/1"},
        {"{'id': 'log/1', 'belongs': ['fog'], 'not': ['']}", -32602, "/not/0"},
        {"{'id': 'log/1', 'belongs': ['fog'], 'editor': ''}", -32602, "/editor"},
        {"{'id': 'log/1', 'belongs': ['fog'], 'editor': null}", -32602, "/editor"},
        {"{'id': 'log/1', 'belongs': ['fog'], 'tags': []}", -32602, "/tags"},
        {"{'id': 'log/1', 'belongs': ['fog'], 'a/b': 1}", -32602, "/a~1b"},
    };
    assert_all_refused(&((struct service *)*state)->peer, CASES, sizeof CASES / sizeof CASES[0]);
}

static void a_tag_in_both_lists_is_refused(void **state)
{
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'belongs': ['fog', 'bell'], 'not': ['wreck', 'bell']}", -32602, "/not/1"},
        {"{'id': 'log/1', 'belongs': ['mermaid'], 'not': ['mermaid']}", -32602, "/not/0"},
    };
    assert_all_refused(&((struct service *)*state)->peer, CASES, sizeof CASES / sizeof CASES[0]);
}

/* The place is that in the list as it was sent. */
static void an_unknown_tag_is_not_found_and_never_opened(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'belongs': ['wreck', 'bell', 'mermaid']}", -32001, "/belongs/2"},
        {"{'id': 'log/1', 'belongs': ['wreck'], 'not': ['mermaid', 'bell']}", -32001, "/not/0"},
        {"{'id': 'log/1', 'not': ['Fog']}", -32001, "/not/0"},
    };
    assert_all_refused(peer, CASES, sizeof CASES / sizeof CASES[0]);
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'mermaid'}"), -32001, "/tag");
    assert_members(ask(peer, "tag.show", "{'tag': 'wreck'}"),
                   "{'count': 1, 'rulings': {'belongs': 0, 'not': 0}}");
}

static void an_unknown_item_is_not_found(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct refused CASES[] = {
        {"{'id': 'log/9', 'belongs': ['fog']}", -32001, "/id"},
        {"{'id': 'log/2', 'belongs': ['fog']}", -32001, "/id"},
    };
    (void)ask(peer, "item.withdraw", "{'id': 'log/2'}");
    assert_all_refused(peer, CASES, sizeof CASES / sizeof CASES[0]);
}

static void more_tags_than_an_item_may_have_are_refused(void **state)
{
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'belongs': ['fog', 'gale', 'bell', 'lamp']}", -32003, "/belongs"},
        {"{'id': 'log/1', 'not': ['fog', 'gale', 'bell', 'lamp']}", -32003, "/not"},
    };
    assert_all_refused(&((struct service *)*state)->peer, CASES, sizeof CASES / sizeof CASES[0]);
}

/* --- proposals --- */

enum {
    ENTRIES = 150,
    WORDS = 16
};

/* A daemon that has learned the invented logbook, and an entry whose words speak for fog. */
static int set_up_logbook(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 1, ENTRIES, WORDS);
    (void)ask(&service->peer, "item.file",
              "{'id': 'x', 'text': 'dense fog, haze, the horn all night', 'tags': ['lamp']}");
    wait_until_learned(&service->peer);
    *state = service;
    return 0;
}

static bool proposes(struct peer *peer, const char *tag)
{
    size_t i = 0;
    const json_t *gap = NULL;
    const json_t *gaps =
        json_object_get(ask(peer, "item.gaps", "{'id': 'x', 'floor': 0, 'most': 1000}"), "gaps");
    assert_true(json_array_size(gaps) > 0);
    json_array_foreach(gaps, i, gap)
    {
        if (strcmp(string(gap, "tag"), tag) == 0) {
            return true;
        }
    }
    return false;
}

static bool lists_gap(struct peer *peer, const char *tag)
{
    size_t i = 0;
    const json_t *item = NULL;
    json_array_foreach(
        json_object_get(ask(peer, "desk.worklist", "{'tag': '%s', 'floor': 0, 'most': 1000}", tag),
                        "items"),
        i, item)
    {
        if (strcmp(string(item, "id"), "x") == 0) {
            return true;
        }
    }
    return false;
}

static void a_tag_ruled_out_is_never_proposed_again(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    assert_true(proposes(peer, "fog"));
    assert_true(lists_gap(peer, "fog"));
    (void)ask(peer, "item.rule", "{'id': 'x', 'not': ['fog']}");
    assert_false(proposes(peer, "fog")); /* at once, */
    wait_until_learned(peer);
    assert_false(proposes(peer, "fog"));
    assert_false(lists_gap(peer, "fog"));
    logbook_file(peer, ENTRIES + 1, ENTRIES, WORDS); /* after the model has moved on, */
    (void)ask(peer, "item.file", "{'id': 'x', 'text': 'dense fog and haze', 'tags': ['birds']}");
    wait_until_learned(peer);
    assert_false(proposes(peer, "fog")); /* and the item with it, */
    service_stop_and_start(service);
    assert_false(proposes(peer, "fog")); /* after a restart, */
    assert_false(lists_gap(peer, "fog"));
    service->daemon.settings[0] = "title_weight=2";
    service_stop_and_start(service);
    wait_until_learned(peer);
    assert_false(proposes(peer, "fog")); /* and when all is learned anew. */
    assert_false(lists_gap(peer, "fog"));
    assert_true(proposes(peer, "wreck"));
}

static void a_tag_ruled_in_is_proposed_no_more(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    (void)ask(peer, "item.rule", "{'id': 'x', 'belongs': ['fog']}");
    assert_false(proposes(peer, "fog"));
    wait_until_learned(peer);
    service_stop_and_start(service);
    assert_false(proposes(peer, "fog"));
    assert_false(lists_gap(peer, "fog"));
}

static void a_tag_whose_ruling_was_lifted_is_proposed_again_when_it_is_taken_off(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'x', 'not': ['fog']}");
    (void)ask(peer, "item.file", "{'id': 'x', 'text': 'dense fog, horn', 'tags': ['fog']}");
    (void)ask(peer, "item.file", "{'id': 'x', 'text': 'dense fog, horn', 'tags': ['lamp']}");
    wait_until_learned(peer);
    assert_true(proposes(peer, "fog"));
}

/* --- kill -9 --------------------------------------------------------------------------------- */

enum {
    KILLED_ITEMS = 120,
    SAYINGS = 3 * KILLED_ITEMS, /* of each item a ruling, a check and a second tagging */
    KILLED_WORDS = 200,
    WINDOW = 32
};

/* The k-th of what is said, from 0; all get a seq of their own. */
static unsigned say(struct peer *peer, unsigned k)
{
    unsigned item = 1 + k / 3;
    switch (k % 3) {
    case 0:
        return peer_request(peer, "item.rule",
                            "{'id': 'entry %u', 'belongs': ['wreck'], 'not': ['fog']}", item);
    case 1:
        return peer_request(peer, "item.check",
                            "{'id': 'entry %u', 'tags': ['lamp', 'wreck'], 'drawn': '%s'}", item,
                            item % 2 ? "random" : "picked");
    default:
        return peer_request(peer, "item.file",
                            "{'id': 'entry %u', 'independent': true, 'tagger': 'o.reed', "
                            "'tags': ['lamp', 'birds']}",
                            item);
    }
}

/* Says it from the k-th on until it is killed, with more under way than was answered: at least
 * `least` are acknowledged. Returns how many the daemon has when it is back. */
static unsigned say_until_killed(struct service *service, unsigned k, unsigned least)
{
    struct peer feed;
    unsigned ids[SAYINGS];
    unsigned sent = k;
    unsigned answered = k;
    peer_open(&feed, service->daemon.socket);
    feed.may_be_cut = true;
    while (answered < k + least) {
        if (sent < SAYINGS && sent - answered < WINDOW) {
            ids[sent] = say(&feed, sent);
            sent++;
        } else {
            (void)peer_result(&feed, ids[answered++]);
        }
    }
    undertagd_kill(&service->daemon);
    while (peer_line(&feed)) {
        answered++;
    }
    peer_close(&feed);
    service_restart(service);
    unsigned there = (unsigned)ask_seq(&service->peer) - KILLED_ITEMS;
    assert_in_range(there, answered, sent);
    return there;
}

/* The first `said` are there, in items and counts, and none twice. */
static void assert_said(struct peer *peer, unsigned said)
{
    unsigned rulings = (said + 2) / 3;
    unsigned checks = (said + 1) / 3;
    unsigned seconds = said / 3;
    for (unsigned item = 1; item <= KILLED_ITEMS; item++) {
        const json_t *shown = ask(peer, "item.show", "{'id': 'entry %u'}", item);
        assert_json(json_object_get(shown, "belongs"), item <= rulings ? "['wreck']" : "[]");
        assert_json(json_object_get(shown, "not"), item <= rulings ? "['fog']" : "[]");
        assert_int_equal(json_is_object(json_object_get(shown, "checked")), item <= checks);
        assert_int_equal(json_array_size(json_object_get(shown, "second")), item <= seconds);
    }
    assert_int_equal(
        whole(json_object_get(ask(peer, "tag.show", "{'tag': 'wreck'}"), "rulings"), "belongs"),
        rulings);
    const json_t *desk = ask(peer, "desk.completeness", "{}");
    const json_t *counted = json_object_get(desk, "checks");
    assert_int_equal(whole(counted, "random") + whole(counted, "picked"), checks);
    assert_int_equal(whole(counted, "picked"), checks / 2);
    const json_t *second = json_object_get(desk, "second");
    assert_int_equal(json_is_null(second) ? 0 : whole(second, "items"), seconds);
}

/* Both daemons have learned the same, once: their answers are equal to the last digit. */
static void assert_same_answers(struct peer *one, struct peer *other)
{
    static const char *const QUESTIONS[][2] = {
        {"desk.standing", "{}"},
        {"desk.completeness", "{'most': 100}"},
        {"tag.list", "{'order': 'missing'}"},
        {"item.gaps", "{'text': 'dense fog on the reef', 'floor': 0, 'why': true}"},
        {"item.gaps", "{'id': 'entry 1', 'floor': 0, 'why': true}"},
        {"item.gaps", "{'id': 'entry 120', 'floor': 0, 'why': true}"},
    };
    wait_until_learned(one);
    wait_until_learned(other);
    for (size_t i = 0; i < sizeof QUESTIONS / sizeof QUESTIONS[0]; i++) {
        assert_string_equal(text_of(one, ask(one, QUESTIONS[i][0], "%s", QUESTIONS[i][1])),
                            text_of(other, ask(other, QUESTIONS[i][0], "%s", QUESTIONS[i][1])));
    }
}

/* Rulings say whether chances hold: some of those shown were confirmed. */
static void assert_rated(struct peer *peer)
{
    size_t i = 0;
    const json_t *row = NULL;
    json_int_t confirmed = 0;
    const json_t *standing = ask(peer, "desk.standing", "{}");
    json_array_foreach(json_object_get(standing, "reliability"), i, row)
    {
        assert_true(whole(row, "confirmed") <= whole(row, "shown"));
        confirmed += whole(row, "confirmed");
    }
    assert_true(confirmed > 0);
}

/* Learning may be behind, and what was learned is stored all the time. */
static int set_up_backlog(void **state)
{
    struct service *service = service_new("visible_within_ms=60000", "flush_every_ms=10", NULL);
    logbook_file(&service->peer, 1, KILLED_ITEMS, KILLED_WORDS);
    *state = service;
    return 0;
}

static void what_people_said_survives_kill_9_once(void **state)
{
    struct service *service = *state;
    static const unsigned MOMENTS[] = {1, 2, 30, 70, 3, 150};
    unsigned said = 0;
    for (size_t i = 0; i < sizeof MOMENTS / sizeof MOMENTS[0]; i++) {
        unsigned room = SAYINGS - said;
        said = say_until_killed(service, said, MOMENTS[i] < room ? MOMENTS[i] : room);
        assert_said(&service->peer, said);
    }
    void *never_died = NULL;
    assert_int_equal(set_up_backlog(&never_died), 0);
    struct peer *reference = &((struct service *)never_died)->peer;
    for (unsigned k = 0; k < said; k++) {
        (void)peer_result(reference, say(reference, k));
    }
    assert_same_answers(&service->peer, reference);
    assert_rated(reference);
    assert_int_equal(service_tear_down(&never_died), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, service_tear_down)
#define TEST_OF_LOGBOOK(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, set_up_logbook, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_ruling_is_answered_with_its_seq_and_seen_at_once),
        TEST(one_list_is_enough_and_an_empty_one_says_nothing),
        TEST(a_tag_named_twice_is_ruled_once),
        TEST(the_latest_word_counts),
        TEST(a_filing_that_gives_a_tag_ruled_out_lifts_that),
        TEST(a_filing_that_declines_a_tag_ruled_in_lifts_that),
        TEST(the_same_filing_has_its_own_seq_and_leaves_the_rulings),
        TEST(a_ruled_item_is_listed_as_changed),
        TEST(what_is_no_ruling_is_refused),
        TEST(a_tag_in_both_lists_is_refused),
        TEST(an_unknown_tag_is_not_found_and_never_opened),
        TEST(an_unknown_item_is_not_found),
        cmocka_unit_test_setup_teardown(more_tags_than_an_item_may_have_are_refused,
                                        set_up_small_limit, service_tear_down),
        TEST_OF_LOGBOOK(a_tag_ruled_out_is_never_proposed_again),
        TEST_OF_LOGBOOK(a_tag_ruled_in_is_proposed_no_more),
        TEST_OF_LOGBOOK(a_tag_whose_ruling_was_lifted_is_proposed_again_when_it_is_taken_off),
        cmocka_unit_test_setup_teardown(what_people_said_survives_kill_9_once, set_up_backlog,
                                        service_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
