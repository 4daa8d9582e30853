/*
 * item.check and independent filings over the wire, what the desk concludes from them, and that it
 * concludes the same after a restart.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <poll.h>
#include <string.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

/* log/1 has bell and fog (seq 1), by m.quill; log/2 has lamp, quay and wreck (seq 2). */
static struct service *with_two_items(const char *setting)
{
    struct service *service = service_new(setting, NULL, NULL);
    (void)ask(&service->peer, "item.file",
              "{'id': 'log/1', 'title': 'Night watch', 'tagger': 'm.quill', "
              "'tags': ['bell', 'fog']}");
    (void)ask(&service->peer, "item.file", "{'id': 'log/2', 'tags': ['lamp', 'quay', 'wreck']}");
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

static int set_up_closed_vocabulary(void **state)
{
    *state = with_two_items("unknown_tags=open");
    struct service *service = *state;
    service->daemon.settings[0] = "unknown_tags=refuse";
    service_stop_and_start(service);
    return 0;
}

static const json_t *show(struct peer *peer)
{
    return ask(peer, "item.show", "{'id': 'log/1'}");
}

/* A request with the error that it must get. */
struct refused {
    const char *params;
    int code;
    const char *field;
};

static void assert_all_refused(struct peer *peer, const char *method, const struct refused *cases,
                               size_t count)
{
    const char *before = text_of(peer, show(peer));
    const char *tags = text_of(peer, ask(peer, "tag.list", "{}"));
    json_int_t seq = ask_seq(peer);
    for (size_t i = 0; i < count; i++) {
        assert_error(ask_refused(peer, method, "%s", cases[i].params), cases[i].code,
                     cases[i].field);
    }
    assert_string_equal(text_of(peer, show(peer)), before);
    assert_string_equal(text_of(peer, ask(peer, "tag.list", "{}")), tags);
    assert_int_equal(ask_seq(peer), seq);
}

#define ASSERT_ALL_REFUSED(peer, method, cases)                                                    \
    assert_all_refused(peer, method, cases, sizeof(cases) / sizeof(cases)[0])

/* --- item.check ------------------------------------------------------------------------------ */

static void a_check_tells_what_was_missed_and_what_was_extra(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "item.check",
                    "{'id': 'log/1', 'tags': ['wreck', 'fog', 'lamp'], 'drawn': 'random', "
                    "'checker': 'c.lerk'}"),
                "{'seq': 3, 'missed': ['lamp', 'wreck'], 'extra': ['bell']}");
}

static void the_complete_list_is_shown_at_once(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.check",
              "{'id': 'log/1', 'tags': ['wreck', 'fog'], 'drawn': 'random', 'checker': 'c.lerk'}");
    const json_t *item = show(peer);
    assert_members(item, "{'seq': 3, 'tags': ['fog', 'wreck'], 'filed': ['bell', 'fog'], "
                         "'belongs': [], 'not': []}");
    const json_t *checked = json_object_get(item, "checked");
    assert_members(checked, "{'tags': ['fog', 'wreck'], 'drawn': 'random', 'checker': 'c.lerk'}");
    assert_int_equal(json_object_size(checked), 5); /* and `at` and `uid` */
    const char *at = string(checked, "at");         /* a time of RFC 3339, in UTC */
    assert_int_equal(at[4], '-');
    assert_int_equal(at[10], 'T');
    assert_int_equal(at[strlen(at) - 1], 'Z');
    assert_json(ask(peer, "desk.sample", "{}"), "{'items': ['log/2']}"); /* the other one */
}

static void a_check_of_which_nothing_is_said_was_picked_by_nobody(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "item.check", "{'id': 'log/1', 'tags': []}"),
                "{'seq': 3, 'missed': [], 'extra': ['bell', 'fog']}");
    assert_members(show(peer), "{'tags': []}");
    assert_members(json_object_get(show(peer), "checked"),
                   "{'tags': [], 'drawn': 'picked', 'checker': null}");
}

static void a_check_lifts_what_it_contradicts_and_rulings_after_it_count(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['lamp'], 'not': ['fog', 'wreck']}");
    assert_members(ask(peer, "item.check", "{'id': 'log/1', 'tags': ['fog']}"),
                   "{'missed': ['fog'], 'extra': ['bell', 'lamp']}");
    assert_members(show(peer), "{'tags': ['fog'], 'belongs': [], 'not': ['wreck']}");
    (void)ask(peer, "item.rule", "{'id': 'log/1', 'belongs': ['wreck']}");
    assert_members(show(peer), "{'tags': ['fog', 'wreck'], 'belongs': ['wreck'], 'not': []}");
}

static void a_filing_after_a_check_adds(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.check", "{'id': 'log/1', 'tags': ['fog', 'lamp']}");
    assert_json(
        ask(peer, "item.file", "{'id': 'log/1', 'title': 'Night watch', 'tags': ['fog', 'bell']}"),
        "{'seq': 1, 'was': 'same'}");
    assert_members(show(peer), "{'tags': ['fog', 'lamp']}");
    (void)ask(peer, "item.file", "{'id': 'log/1', 'tags': ['fog', 'wreck']}");
    assert_members(show(peer), "{'tags': ['fog', 'lamp', 'wreck'], 'filed': ['fog', 'wreck']}");
}

static void what_is_no_check_is_refused(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct refused CASES[] = {
        {"{'tags': ['fog']}", -32602, "/id"},
        {"{'id': 'log/1'}", -32602, "/tags"},
        {"{'id': 'log/1', 'tags': 'fog'}", -32602, "/tags"},
        {"{'id': 'log/1', 'tags': null}", -32602, "/tags"},
        {"{'id': 'log/1', 'tags': ['fog', '']}", -32602, "/tags/1"},
        {"{'id': 'log/1', 'tags': [], 'drawn': 'often'}", -32602, "/drawn"},
        {"{'id': 'log/1', 'tags': [], 'drawn': true}", -32602, "/drawn"},
        {"{'id': 'log/1', 'tags': [], 'checker': ''}", -32602, "/checker"},
        {"{'id': 'log/1', 'tags': [], 'editor': 'e.ditor'}", -32602, "/editor"},
        {"{'id': 'log/1', 'tags': ['wreck', 'mermaid', 'fog']}", -32001, "/tags/1"},
        {"{'id': 'log/9', 'tags': ['fog']}", -32001, "/id"},
    };
    ASSERT_ALL_REFUSED(peer, "item.check", CASES);
    (void)ask(peer, "item.withdraw", "{'id': 'log/2'}");
    assert_error(ask_refused(peer, "item.check", "{'id': 'log/2', 'tags': []}"), -32001, "/id");
}

static void a_check_with_more_tags_than_an_item_may_have_is_refused(void **state)
{
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'tags': ['fog', 'bell', 'lamp', 'wreck']}", -32003, "/tags"},
    };
    ASSERT_ALL_REFUSED(&((struct service *)*state)->peer, "item.check", CASES);
}

/* --- independent filings --------------------------------------------------------------------- */

static void an_independent_filing_stands_beside_the_first(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "item.file",
                    "{'id': 'log/1', 'tags': ['wreck', 'fog', 'ferry'], 'independent': true, "
                    "'tagger': 'o.reed', 'filed_at': '1911-02-04T10:00:00+01:00', "
                    "'title': 'Another title', 'text': 'and a text'}"),
                "{'seq': 3, 'was': 'new'}");
    assert_members(show(peer), "{'seq': 3, 'tags': ['bell', 'fog'], 'filed': ['bell', 'fog'], "
                               "'title': 'Night watch', 'text': '', 'tagger': 'm.quill'}");
    const json_t *second = json_object_get(show(peer), "second");
    assert_int_equal(json_array_size(second), 1);
    assert_members(json_array_get(second, 0),
                   "{'tagger': 'o.reed', 'tags': ['ferry', 'fog', 'wreck'], "
                   "'filed_at': '1911-02-04T09:00:00Z'}");
    assert_members(ask(peer, "tag.show", "{'tag': 'ferry'}"),
                   "{'count': 0, 'unprompted': 0, 'opened_seq': 3}");
}

static void an_independent_filing_by_the_same_tagger_replaces_his_own(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char PARAMS[] = "{'id': 'log/1', 'independent': true, 'tagger': '%s', 'tags': %s}";
    assert_json(ask(peer, "item.file", PARAMS, "o.reed", "['fog', 'wreck']"),
                "{'seq': 3, 'was': 'new'}");
    assert_json(ask(peer, "item.file", PARAMS, "o.reed", "['wreck', 'fog', 'fog']"),
                "{'seq': 3, 'was': 'same'}");
    assert_json(ask(peer, "item.file", PARAMS, "o.reed", "['lamp']"),
                "{'seq': 4, 'was': 'revised'}");
    assert_json(ask(peer, "item.file", PARAMS, "p.inner", "['lamp']"), "{'seq': 5, 'was': 'new'}");
    const json_t *second = json_object_get(show(peer), "second");
    assert_int_equal(json_array_size(second), 2);
    assert_members(json_array_get(second, 0), "{'tagger': 'o.reed', 'tags': ['lamp']}");
    assert_members(json_array_get(second, 1), "{'tagger': 'p.inner', 'tags': ['lamp']}");
}

static void a_filing_that_is_said_not_to_be_independent_is_a_filing(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "item.file",
                    "{'id': 'log/1', 'tags': ['lamp'], 'tagger': 'o.reed', 'independent': false, "
                    "'prompted': ['lamp']}"),
                "{'seq': 3, 'was': 'revised'}");
    assert_members(show(peer), "{'tags': ['lamp'], 'second': []}");
}

static void what_is_no_independent_filing_is_refused(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog']}", -32602, "/tagger"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog'], 'tagger': ''}", -32602, "/tagger"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog'], 'tagger': 'm.quill'}", -32602,
         "/tagger"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['mermaid'], 'tagger': 'm.quill'}", -32602,
         "/tagger"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog'], 'tagger': 'o.reed', "
         "'prompted': ['fog']}",
         -32602, "/prompted"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog'], 'tagger': 'o.reed', "
         "'declined': []}",
         -32602, "/declined"},
        {"{'id': 'log/1', 'independent': true, 'tagger': 'o.reed'}", -32602, "/tags"},
        {"{'id': 'log/1', 'independent': 'yes', 'tags': ['fog'], 'tagger': 'o.reed'}", -32602,
         "/independent"},
        {"{'id': 'log/1', 'independent': true, 'tags': ['fog', 3], 'tagger': 'o.reed'}", -32602,
         "/tags/1"},
        {"{'id': 'log/1', 'independent': true, 'tags': [], 'tagger': 'o.reed', "
         "'filed_at': 'today'}",
         -32602, "/filed_at"},
        {"{'id': 'log/1', 'independent': true, 'tags': [], 'tagger': 'o.reed', 'second': 1}",
         -32602, "/second"},
        {"{'id': 'log/9', 'independent': true, 'tags': ['mermaid'], 'tagger': 'o.reed'}", -32001,
         "/id"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", CASES);
}

static void an_unknown_tag_is_refused_where_the_vocabulary_is_closed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct refused CASES[] = {
        {"{'id': 'log/1', 'independent': true, 'tags': ['wreck', 'mermaid'], 'tagger': 'o.reed'}",
         -32002, "/tags/1"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", CASES);
    (void)ask(peer, "item.file",
              "{'id': 'log/1', 'independent': true, 'tags': ['wreck'], 'tagger': 'o.reed'}");
}

/* --- what the desk concludes ----------------------------------------------------------------- */

static const json_t *member(const json_t *object, const char *name)
{
    const json_t *value = json_object_get(object, name);
    assert_non_null(value);
    return value;
}

static void assert_near(const json_t *object, const char *name, double expected)
{
    if (!(fabs(number(object, name) - expected) < 1e-4)) {
        fail_msg("%s: %.17g is not %.17g", name, number(object, name), expected);
    }
}

/* A third item, with fog, lamp and, from a proposal, ferry. */
static void file_third(struct peer *peer)
{
    (void)ask(peer, "item.file",
              "{'id': 'log/3', 'tags': ['ferry', 'fog', 'lamp'], 'prompted': ['ferry'], "
              "'tagger': 'm.quill'}");
}

/*
 * Of 2 + 3 tags on items checked at random one was taken off. Wilson's interval at 90 % (Wilson
 * 1927; NIST/SEMATECH e-Handbook 7.2.4.1) for 1 of 5, z = 1.6449, z2 = 2.7055: (.2 + z2/10 ± z
 * √(.2 x .8/5 + z2/100)) / (1 + z2/5) = (.47055 ± .39972) / 1.54111.
 */
static void checks_say_how_many_tags_are_wrong(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    file_third(peer);
    (void)ask(peer, "item.check", "{'id': 'log/1', 'tags': ['fog', 'lamp'], 'drawn': 'random'}");
    (void)ask(peer, "item.check",
              "{'id': 'log/2', 'tags': ['lamp', 'quay', 'wreck'], 'drawn': 'random'}");
    (void)ask(peer, "item.check", "{'id': 'log/3', 'tags': []}");
    const json_t *desk = ask(peer, "desk.completeness", "{}");
    assert_members(desk, "{'checks': {'random': 2, 'picked': 1}}");
    const json_t *wrong = member(desk, "wrong");
    assert_members(wrong, "{'wrong': 1, 'seen': 5}");
    assert_near(wrong, "share", 0.2);
    assert_near(wrong, "low", 0.04596);
    assert_near(wrong, "high", 0.56471);
}

/* fog was given and lamp missing on log/1, all three were given on log/2: 5 trials, and of a second
 * tagging with two tags 2 halves. What was picked is none. */
static void checks_at_random_and_second_taggings_are_trials_of_the_curve(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    file_third(peer);
    (void)ask(peer, "item.check", "{'id': 'log/3', 'tags': ['fog', 'bell']}");
    wait_until_learned(peer);
    assert_members(member(ask(peer, "desk.completeness", "{}"), "curve"),
                   "{'fitted': false, 'trials': 0.0}");
    (void)ask(peer, "item.check", "{'id': 'log/1', 'tags': ['fog', 'lamp'], 'drawn': 'random'}");
    (void)ask(peer, "item.check",
              "{'id': 'log/2', 'tags': ['lamp', 'quay', 'wreck'], 'drawn': 'random'}");
    (void)ask(peer, "item.file",
              "{'id': 'log/1', 'tags': ['fog', 'wreck'], 'independent': true, 'tagger': 'o.reed'}");
    wait_until_learned(peer);
    const json_t *desk = ask(peer, "desk.completeness", "{}");
    assert_members(member(desk, "curve"), "{'fitted': true, 'trials': 6.0}");
    assert_string_equal(string(member(desk, "overall"), "from"), "both");
}

/*
 * First, second, both: 2, 2, 1 on log/1; 3, 2, 2 on log/2; 2 (ferry was prompted), 2, 1 on log/3:
 * A = 7, B = 6, C = 4. Chapman (1951): 8 x 7/5 - 1 = 10.2; Seber's (1970) variance 8 x 7 x 3 x
 * 2/(25 x 6) = 2.24; nobody found 1.2 of them, and Chao's (1987) interval is 9 + 1.2 / and x r, r =
 * exp(1.6449 √ln(1 + 2.24/1.44)) = 4.9198. Rolling (1981) 8/13; Hooper (1965) 4/9.
 */
static void second_taggings_estimate_what_belongs(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char PARAMS[] =
        "{'id': '%s', 'independent': true, 'tagger': 'o.reed', 'tags': %s}";
    file_third(peer);
    (void)ask(peer, "item.file", PARAMS, "log/1", "['fog', 'wreck']");
    (void)ask(peer, "item.file", PARAMS, "log/2", "['lamp', 'quay']");
    (void)ask(peer, "item.file", PARAMS, "log/3", "['fog', 'ferry']");
    const json_t *second = member(ask(peer, "desk.completeness", "{}"), "second");
    const json_t *chapman = member(second, "chapman");
    assert_members(second, "{'items': 3, 'first': 7, 'second': 6, 'both': 4}");
    assert_near(chapman, "true", 10.2);
    assert_near(chapman, "low", 9.24391);
    assert_near(chapman, "high", 14.90376);
    assert_near(second, "found_share", 7.0 / 10.2);
    assert_near(second, "rolling", 8.0 / 13.0);
    assert_near(second, "hooper", 4.0 / 9.0);
}

/* --- after a restart ------------------------------------------------------------------------- */

enum {
    ENTRIES = 200,
    EXAMINED = 40,
    WORDS = 16
};

/* A logbook of which people have said something. */
static int set_up_examined(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    struct peer *peer = &service->peer;
    logbook_file(peer, 1, ENTRIES, WORDS);
    for (unsigned n = 1; n <= EXAMINED; n++) {
        (void)ask(peer, "item.rule", "{'id': 'entry %u', 'belongs': ['wreck'], 'not': ['fog']}", n);
        (void)ask(peer, "item.check",
                  "{'id': 'entry %u', 'tags': ['lamp', 'birds'], 'drawn': '%s'}", 2 * n,
                  n % 2 ? "random" : "picked");
        (void)ask(peer, "item.file",
                  "{'id': 'entry %u', 'independent': true, 'tagger': 'o.reed', "
                  "'tags': ['lamp', 'fog']}",
                  3 * n);
    }
    wait_until_learned(peer);
    *state = service;
    return 0;
}

/* All that is listed has been scored since the model last grew by an eighth, so it stays. */
static const json_t *wait_for_scored_worklist(struct peer *peer)
{
    json_int_t seq = ask_seq(peer);
    for (int waited_ms = 0; waited_ms < PATIENCE_MS; waited_ms++) {
        const json_t *items =
            member(ask(peer, "desk.worklist", "{'floor': 0, 'most': 1000}"), "items");
        bool is_scored = json_array_size(items) > 0;
        for (size_t i = 0; i < json_array_size(items); i++) {
            is_scored &= whole(json_array_get(items, i), "scored_seq") >= seq - seq / 8;
        }
        if (is_scored) {
            return items;
        }
        (void)poll(NULL, 0, 1); /* between two questions: scoring is done when nothing else is */
    }
    fail_msg("items were never scored again");
    return NULL;
}

static const json_t *find_entry(const json_t *items, const char *id)
{
    size_t i = 0;
    const json_t *entry = NULL;
    json_array_foreach(items, i, entry)
    {
        if (strcmp(string(entry, "id"), id) == 0) {
            return entry;
        }
    }
    fail_msg("%s is not listed", id);
    return NULL;
}

static void the_worklist_is_there_after_a_restart(void **state)
{
    struct service *service = *state;
    static const char *const MEMBERS[] = {"title", "gaps", "expected", "scored_seq"};
    json_t *before = json_deep_copy(wait_for_scored_worklist(&service->peer));
    service_stop_and_start(service);
    const json_t *after = wait_for_scored_worklist(&service->peer);
    size_t i = 0;
    const json_t *entry = NULL;
    json_array_foreach(before, i, entry)
    {
        const json_t *now = find_entry(after, string(entry, "id"));
        for (size_t k = 0; k < sizeof MEMBERS / sizeof MEMBERS[0]; k++) {
            assert_true(json_equal(member(now, MEMBERS[k]), member(entry, MEMBERS[k])));
        }
    }
    assert_true(i > ENTRIES / 2);
    json_decref(before);
}

static void the_desk_concludes_the_same_after_a_restart(void **state)
{
    struct service *service = *state;
    static const char *const QUESTIONS[][2] = {
        {"desk.standing", "{}"},
        {"desk.standing", "{'window': 0}"},
        {"desk.standing", "{'window': 100}"},
        {"desk.completeness", "{}"},
        {"desk.completeness", "{'tag': 'wreck'}"},
        {"tag.show", "{'tag': 'fog'}"},
        {"tag.show", "{'tag': 'wreck'}"},
        {"tag.show", "{'tag': 'lamp'}"},
        {"tag.list", "{'order': 'missing'}"},
        {"item.show", "{'id': 'entry 6'}"},
        {"item.gaps", "{'id': 'entry 100', 'floor': 0}"},
        {"item.gaps", "{'text': 'dense fog on the reef', 'floor': 0, 'why': true}"},
    };
    enum {
        COUNT = sizeof QUESTIONS / sizeof QUESTIONS[0]
    };
    json_t *before = json_array();
    for (size_t i = 0; i < COUNT; i++) {
        (void)json_array_append_new(
            before, json_deep_copy(ask(&service->peer, QUESTIONS[i][0], "%s", QUESTIONS[i][1])));
    }
    service_stop_and_start(service);
    for (size_t i = 0; i < COUNT; i++) {
        const json_t *now = ask(&service->peer, QUESTIONS[i][0], "%s", QUESTIONS[i][1]);
        if (!json_equal(now, json_array_get(before, i))) {
            fail_msg("%s %s: %s", QUESTIONS[i][0], QUESTIONS[i][1], text_of(&service->peer, now));
        }
    }
    json_decref(before);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, service_tear_down)
#define TEST_WITH(set_up_first, name)                                                              \
    cmocka_unit_test_setup_teardown(name, set_up_first, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_check_tells_what_was_missed_and_what_was_extra),
        TEST(the_complete_list_is_shown_at_once),
        TEST(a_check_of_which_nothing_is_said_was_picked_by_nobody),
        TEST(a_check_lifts_what_it_contradicts_and_rulings_after_it_count),
        TEST(a_filing_after_a_check_adds),
        TEST(what_is_no_check_is_refused),
        TEST_WITH(set_up_small_limit, a_check_with_more_tags_than_an_item_may_have_is_refused),
        TEST(an_independent_filing_stands_beside_the_first),
        TEST(an_independent_filing_by_the_same_tagger_replaces_his_own),
        TEST(a_filing_that_is_said_not_to_be_independent_is_a_filing),
        TEST(what_is_no_independent_filing_is_refused),
        TEST_WITH(set_up_closed_vocabulary,
                  an_unknown_tag_is_refused_where_the_vocabulary_is_closed),
        TEST(checks_say_how_many_tags_are_wrong),
        TEST(checks_at_random_and_second_taggings_are_trials_of_the_curve),
        TEST(second_taggings_estimate_what_belongs),
        TEST_WITH(set_up_examined, the_worklist_is_there_after_a_restart),
        TEST_WITH(set_up_examined, the_desk_concludes_the_same_after_a_restart),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
