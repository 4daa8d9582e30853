/* The desk over the wire: the worklist, how complete the tags are, how good the proposals. */
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

enum {
    ENTRIES = 400,
    WORDS = 16
};

/* Items are scored again in idle time, until all are less than an eighth of the changes behind. */
static bool are_all_scored(struct peer *peer)
{
    static const char ALL[] = "{'floor': 0, 'most': 1000}";
    const json_t *page = ask(peer, "desk.worklist", ALL);
    size_t i = 0;
    const json_t *entry = NULL;
    json_array_foreach(json_object_get(page, "items"), i, entry)
    {
        if (whole(entry, "scored_seq") < ENTRIES - ENTRIES / 8) {
            return false;
        }
    }
    return i > 0 && json_equal(page, ask(peer, "desk.worklist", ALL));
}

/* A daemon that has learned the invented logbook; what the tests ask leaves it as it is. */
static int set_up_logbook(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 1, ENTRIES, WORDS);
    wait_until_learned(&service->peer);
    for (int waited_ms = 0; !are_all_scored(&service->peer); waited_ms++) {
        assert_true(waited_ms < PATIENCE_MS);
        (void)poll(NULL, 0, 1); /* between two questions: scoring needs the core */
    }
    *state = service;
    return 0;
}

static void assert_near(double value, double expected)
{
    if (!(fabs(value - expected) <= 1e-9 * fmax(1.0, fabs(expected)))) {
        fail_msg("%.17g is not %.17g", value, expected);
    }
}

static const json_t *member(const json_t *object, const char *name)
{
    const json_t *value = json_object_get(object, name);
    assert_non_null(value);
    return value;
}

/* --- desk.worklist --------------------------------------------------------------------------- */

static void assert_entry(struct peer *peer, const json_t *entry, double floor)
{
    const json_t *item = ask(peer, "item.show", "{'id': '%s'}", string(entry, "id"));
    const json_t *gaps = member(entry, "gaps");
    double last = 1.0;
    double sum = 0.0;
    size_t i = 0;
    const json_t *gap = NULL;
    assert_int_equal(json_object_size(entry), 6);
    assert_string_equal(string(entry, "title"), string(item, "title"));
    assert_true(json_array_size(gaps) > 0);
    json_array_foreach(gaps, i, gap)
    {
        double chance = number(gap, "chance");
        assert_true(chance >= floor && chance > 0.0 && chance <= last);
        assert_null(strstr(text_of(peer, member(item, "tags")), string(gap, "tag")));
        last = chance;
        sum += chance;
    }
    assert_near(number(entry, "expected"), sum);
    assert_in_range(whole(entry, "scored_seq"), 1, ENTRIES);
}

/* A list with everything from a floor on. */
static const json_t *list_from(struct peer *peer, double floor)
{
    const json_t *page = ask(peer, "desk.worklist", "{'floor': %g, 'most': 1000}", floor);
    assert_null(json_object_get(page, "next"));
    return member(page, "items");
}

static void entries_come_by_falling_promise_with_the_running_sum(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *items = list_from(peer, 0.2);
    double last = HUGE_VAL;
    double sum = 0.0;
    size_t i = 0;
    const json_t *entry = NULL;
    assert_true(json_array_size(items) > 20);
    json_array_foreach(items, i, entry)
    {
        assert_entry(peer, entry, 0.2);
        assert_true(number(entry, "expected") <= last + 1e-9);
        last = number(entry, "expected");
        sum += last;
        assert_near(number(entry, "running"), sum);
    }
}

static void a_page_says_how_far_it_reaches(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *page = ask(peer, "desk.worklist", "{'most': 3}");
    assert_int_equal(whole(page, "learned"), ENTRIES);
    assert_int_equal(whole(page, "kept"), ENTRIES);
    const json_t *last = json_array_get(member(page, "items"), 2);
    assert_string_equal(string(page, "next"), string(last, "id"));
    page = ask(peer, "desk.worklist", "{'floor': 0}");
    assert_int_equal(json_array_size(member(page, "items")), 50);
}

static void pages_join_up_to_the_whole_list(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *whole_list = list_from(peer, 0.2);
    const json_t *page = ask(peer, "desk.worklist", "{'most': 7}");
    size_t met = 0;
    for (;;) {
        size_t i = 0;
        const json_t *entry = NULL;
        json_array_foreach(member(page, "items"), i, entry)
        {
            const json_t *expected = json_array_get(whole_list, met++);
            assert_true(json_equal(member(entry, "id"), member(expected, "id")));
            assert_true(json_equal(member(entry, "gaps"), member(expected, "gaps")));
            assert_near(number(entry, "running"), number(expected, "running"));
        }
        if (!json_object_get(page, "next")) {
            break;
        }
        assert_int_equal(json_array_size(member(page, "items")), 7);
        page = ask(peer, "desk.worklist", "{'most': 7, 'after': '%s'}", string(page, "next"));
    }
    assert_int_equal(met, json_array_size(whole_list));
}

/* The same items and chances as in the whole list, and no other tag. */
static void one_tag_may_be_asked_about(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = list_from(peer, 0.2);
    const json_t *items =
        member(ask(peer, "desk.worklist", "{'tag': 'fog', 'most': 1000}"), "items");
    size_t with_fog = 0;
    size_t i = 0;
    const json_t *entry = NULL;
    json_array_foreach(all, i, entry)
    {
        with_fog += strstr(text_of(peer, member(entry, "gaps")), "\"fog\"") != NULL;
    }
    assert_true(with_fog > 0 && with_fog < json_array_size(all));
    assert_int_equal(json_array_size(items), with_fog);
    json_array_foreach(items, i, entry)
    {
        const json_t *gaps = member(entry, "gaps");
        assert_int_equal(json_array_size(gaps), 1);
        assert_string_equal(string(json_array_get(gaps, 0), "tag"), "fog");
        assert_near(number(entry, "expected"), number(json_array_get(gaps, 0), "chance"));
    }
}

static size_t count_gaps(const json_t *items, double floor)
{
    size_t count = 0;
    size_t i = 0;
    size_t j = 0;
    const json_t *entry = NULL;
    const json_t *gap = NULL;
    json_array_foreach(items, i, entry)
    {
        json_array_foreach(member(entry, "gaps"), j, gap)
        {
            count += number(gap, "chance") >= floor;
        }
    }
    return count;
}

static void gaps_below_the_floor_are_left_out(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const double FLOORS[] = {0.05, 0.2, 0.5, 0.8, 1.0};
    const json_t *all = list_from(peer, 0.0);
    for (size_t i = 0; i < sizeof FLOORS / sizeof FLOORS[0]; i++) {
        const json_t *items = list_from(peer, FLOORS[i]);
        assert_true(count_gaps(items, 0.0) < count_gaps(all, 0.0));
        assert_int_equal(count_gaps(items, 0.0), count_gaps(all, FLOORS[i]));
    }
}

/* --- desk.completeness ----------------------------------------------------------------------- */

/* share is given / (given + missing), within its interval. */
static void assert_share(const json_t *of)
{
    double given = (double)whole(of, "given");
    double missing = number(of, "missing");
    assert_true(missing >= 0.0);
    assert_non_null(strstr("curve checks both", string(of, "from")));
    assert_near(number(of, "share"), given / (given + missing));
    assert_true(number(of, "low") <= number(of, "share"));
    assert_true(number(of, "share") <= number(of, "high"));
}

/* Of 400 entries those with a number that 3 divides have one tag, the others two: 133 + 2 x 267. */
static void the_shares_add_up(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *desk = ask(peer, "desk.completeness", "{}");
    const json_t *overall = member(desk, "overall");
    const json_t *bands = member(desk, "bands");
    double missing = 0.0;
    size_t i = 0;
    const json_t *tag = NULL;
    assert_int_equal(whole(overall, "given"), 667);
    assert_share(overall);
    assert_int_equal(json_object_size(bands), 3);
    /* No tag is there 1,000 times, or less than 30 times. */
    assert_members(member(bands, "head"), "{'share': null, 'low': null, 'high': null}");
    assert_members(member(bands, "tail"), "{'share': null, 'low': null, 'high': null}");
    assert_json(member(bands, "torso"), text_of(peer, overall));
    assert_int_equal(json_array_size(member(desk, "tags")), 8);
    json_array_foreach(member(desk, "tags"), i, tag)
    {
        assert_share(tag);
        assert_int_equal(json_object_size(tag), 7);
        missing += number(tag, "missing");
        if (i > 0) {
            const json_t *before = json_array_get(member(desk, "tags"), i - 1);
            assert_true(number(before, "missing") >= number(tag, "missing"));
        }
    }
    assert_near(number(overall, "missing"), missing);
}

static void without_checks_all_is_from_the_curve(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *desk = ask(peer, "desk.completeness", "{}");
    assert_string_equal(string(member(desk, "overall"), "from"), "curve");
    assert_members(desk, "{'checks': {'random': 0, 'picked': 0}, 'second': null, "
                         "'wrong': {'share': null, 'low': null, 'high': null, 'wrong': 0, "
                         "'seen': 0}, "
                         "'curve': {'a': 0.55, 'b': 1.5, 'fitted': false, 'trials': 0.0}}");
    assert_int_equal(whole(desk, "learned"), ENTRIES);
}

static void one_tag_is_shown_as_it_stands_in_the_list(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = ask(peer, "desk.completeness", "{}");
    size_t i = 0;
    const json_t *tag = NULL;
    json_array_foreach(member(all, "tags"), i, tag)
    {
        const json_t *one = ask(peer, "desk.completeness", "{'tag': '%s'}", string(tag, "tag"));
        assert_int_equal(json_array_size(member(one, "tags")), 1);
        assert_true(json_equal(json_array_get(member(one, "tags"), 0), tag));
        assert_true(json_equal(member(one, "overall"), member(all, "overall")));
        const json_t *shown = ask(peer, "tag.show", "{'tag': '%s'}", string(tag, "tag"));
        assert_int_equal(whole(shown, "count"), whole(tag, "given"));
        assert_near(number(shown, "missing"), number(tag, "missing"));
    }
    const json_t *two = member(ask(peer, "desk.completeness", "{'most': 2}"), "tags");
    assert_int_equal(json_array_size(two), 2); /* those that lose most */
    assert_true(json_equal(json_array_get(two, 1), json_array_get(member(all, "tags"), 1)));
}

/* --- desk.standing --------------------------------------------------------------------------- */

static const char *const FIGURES[] = {"P@1",   "P@3",      "P@5",      "nDCG@5",
                                      "PSP@1", "PSP@3",    "PSP@5",    "PSnDCG@5",
                                      "R@10",  "true P@1", "true P@3", "true P@5"};

enum {
    FIGURE_COUNT = sizeof FIGURES / sizeof FIGURES[0]
};

/* All figures by name, each with so many members. */
static void assert_figures(const json_t *figures, size_t members)
{
    assert_int_equal(json_object_size(figures), FIGURE_COUNT);
    for (size_t i = 0; i < FIGURE_COUNT; i++) {
        assert_int_equal(json_object_size(member(figures, FIGURES[i])), members);
    }
}

static void the_standing_has_all_figures_of_all_bands(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const FILLED[] = {"all", "torso", "tail"};
    const json_t *standing = ask(peer, "desk.standing", "{}");
    const json_t *bands = member(standing, "bands");
    assert_int_equal(json_object_size(standing), 5);
    assert_int_equal(whole(standing, "items"), ENTRIES);
    assert_int_equal(whole(standing, "learned"), ENTRIES);
    assert_int_equal(json_object_size(bands), 4);
    for (size_t i = 0; i < sizeof FILLED / sizeof FILLED[0]; i++) {
        assert_figures(member(member(bands, FILLED[i]), "with"), 2);
        assert_figures(member(member(bands, FILLED[i]), "without"), 2);
        assert_figures(member(member(bands, FILLED[i]), "gain"), 6);
    }
    const json_t *head = member(bands, "head"); /* no tag is there 1,000 times */
    assert_figures(member(head, "with"), 2);
    assert_json(member(member(head, "with"), "P@1"), "{'value': null, 'error': null}");
    assert_members(head, "{'without': null, 'gain': null}");
}

static int set_up_no_shadow(void **state)
{
    *state = service_new("shadow=off", NULL, NULL);
    return 0;
}

static void without_a_second_learner_there_is_nothing_to_compare_with(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    logbook_file(peer, 1, 70, WORDS);
    wait_until_learned(peer);
    const json_t *standing = ask(peer, "desk.standing", "{}");
    assert_members(member(member(standing, "bands"), "all"), "{'without': null, 'gain': null}");
    assert_figures(member(member(member(standing, "bands"), "all"), "with"), 2);
    assert_members(json_array_get(member(standing, "history"), 0), "{'without': null}");
}

static double figure(const json_t *standing, const char *learner, const char *name)
{
    const json_t *band = member(member(standing, "bands"), "all");
    return number(member(member(band, learner), name), "value");
}

static void figures_agree_with_each_other(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *standing = ask(peer, "desk.standing", "{}");
    for (size_t i = 0; i < FIGURE_COUNT; i++) {
        double with = figure(standing, "with", FIGURES[i]);
        double without = figure(standing, "without", FIGURES[i]);
        const json_t *gain =
            member(member(member(member(standing, "bands"), "all"), "gain"), FIGURES[i]);
        assert_true(with > 0.0 && without > 0.0);
        assert_near(number(gain, "value"), with / without - 1.0);
        assert_true(number(gain, "low") <= number(gain, "value"));
        assert_true(number(gain, "high") >= number(gain, "value"));
        assert_true(number(gain, "p") > 0.0 && number(gain, "p") <= 1.0);
    }
    /* An item has two tags at most, so five places hold two hits at most. */
    assert_true(figure(standing, "with", "P@5") <= 0.4);
    assert_true(figure(standing, "with", "P@1") >= figure(standing, "with", "P@3"));
    assert_true(figure(standing, "with", "true P@5") > figure(standing, "with", "P@5"));
}

static void a_window_larger_than_all_covers_all(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *all = ask(peer, "desk.standing", "{'window': 0}");
    const json_t *large = ask(peer, "desk.standing", "{'window': 1000000000}");
    const json_t *small = ask(peer, "desk.standing", "{'window': 64}");
    assert_int_equal(whole(all, "items"), ENTRIES);
    assert_int_equal(whole(large, "items"), ENTRIES);
    for (size_t i = 0; i < FIGURE_COUNT; i++) {
        assert_near(figure(large, "with", FIGURES[i]), figure(all, "with", FIGURES[i]));
        assert_near(figure(large, "without", FIGURES[i]), figure(all, "without", FIGURES[i]));
    }
    assert_in_range(whole(small, "items"), 64, 127); /* whole blocks of 64 */
    assert_true(json_equal(member(small, "history"), member(all, "history")));
}

static void history_goes_through_all_items(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *history = member(ask(peer, "desk.standing", "{}"), "history");
    json_int_t items = 0;
    size_t i = 0;
    const json_t *point = NULL;
    json_array_foreach(history, i, point)
    {
        assert_int_equal(json_object_size(point), 3);
        assert_int_equal(json_object_size(member(point, "with")), FIGURE_COUNT);
        assert_int_equal(json_object_size(member(point, "without")), FIGURE_COUNT);
        items += whole(point, "items");
    }
    assert_true(i > 1);
    assert_int_equal(items, ENTRIES);
    /* It learns: the last stretch is better than the first one. */
    assert_true(number(member(json_array_get(history, i - 2), "with"), "P@1") >
                number(member(json_array_get(history, 0), "with"), "P@1"));
}

static void without_rulings_no_chance_was_put_to_the_test(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *rows = member(ask(peer, "desk.standing", "{}"), "reliability");
    size_t i = 0;
    const json_t *row = NULL;
    json_array_foreach(rows, i, row)
    {
        assert_near(number(row, "from"), (double)i / 10.0);
        assert_near(number(row, "to"), (double)(i + 1) / 10.0);
        assert_members(row, "{'shown': 0, 'mean_chance': null, 'confirmed': 0}");
    }
    assert_int_equal(i, 10);
}

/* --- desk.sample ----------------------------------------------------------------------------- */

static const json_t *sample(struct peer *peer, const char *params)
{
    const json_t *answer = ask(peer, "desk.sample", "%s", params);
    assert_int_equal(json_object_size(answer), 1);
    return member(answer, "items");
}

static void a_sample_is_as_large_as_is_wanted_and_the_same_for_the_same_seed(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    assert_int_equal(json_array_size(sample(peer, "{'most': 1}")), 1);
    assert_int_equal(json_array_size(sample(peer, "{'most': 1000}")), ENTRIES);
    json_t *drawn = json_deep_copy(sample(peer, "{'seed': 1911}"));
    assert_int_equal(json_array_size(drawn), 20);
    assert_false(json_equal(sample(peer, "{'seed': 1912}"), drawn));
    assert_false(json_equal(sample(peer, "{}"), sample(peer, "{}")));
    service_stop_and_start(service);
    assert_true(json_equal(sample(peer, "{'seed': 1911}"), drawn));
    json_decref(drawn);
}

/* --- what is refused ------------------------------------------------------------------------- */

static void what_the_desk_cannot_answer_is_refused(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct {
        const char *method;
        const char *params;
        int code;
        const char *field;
    } CASES[] = {
        {"desk.worklist", "{'tag': 'mermaid'}", -32001, "/tag"},
        {"desk.worklist", "{'after': 'entry 0'}", -32001, "/after"},
        {"desk.worklist", "{'most': 0}", -32602, "/most"},
        {"desk.worklist", "{'most': 1001}", -32602, "/most"},
        {"desk.worklist", "{'floor': 1.5}", -32602, "/floor"},
        {"desk.worklist", "{'tags': ['fog']}", -32602, "/tags"},
        {"desk.completeness", "{'tag': 'mermaid'}", -32001, "/tag"},
        {"desk.completeness", "{'most': 0}", -32602, "/most"},
        {"desk.completeness", "{'floor': 0}", -32602, "/floor"},
        {"desk.standing", "{'window': -1}", -32602, "/window"},
        {"desk.standing", "{'tag': 'fog'}", -32602, "/tag"},
        {"desk.sample", "{'most': 1001}", -32602, "/most"},
        {"desk.sample", "{'seed': -1}", -32602, "/seed"},
        {"desk.sample", "{'tag': 'fog'}", -32602, "/tag"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        assert_error(ask_refused(peer, CASES[i].method, "%s", CASES[i].params), CASES[i].code,
                     CASES[i].field);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(entries_come_by_falling_promise_with_the_running_sum),
        cmocka_unit_test(a_page_says_how_far_it_reaches),
        cmocka_unit_test(pages_join_up_to_the_whole_list),
        cmocka_unit_test(one_tag_may_be_asked_about),
        cmocka_unit_test(gaps_below_the_floor_are_left_out),
        cmocka_unit_test(the_shares_add_up),
        cmocka_unit_test(without_checks_all_is_from_the_curve),
        cmocka_unit_test(one_tag_is_shown_as_it_stands_in_the_list),
        cmocka_unit_test(the_standing_has_all_figures_of_all_bands),
        cmocka_unit_test(figures_agree_with_each_other),
        cmocka_unit_test(a_window_larger_than_all_covers_all),
        cmocka_unit_test(history_goes_through_all_items),
        cmocka_unit_test(without_rulings_no_chance_was_put_to_the_test),
        cmocka_unit_test(a_sample_is_as_large_as_is_wanted_and_the_same_for_the_same_seed),
        cmocka_unit_test(what_the_desk_cannot_answer_is_refused),
        cmocka_unit_test_setup_teardown(without_a_second_learner_there_is_nothing_to_compare_with,
                                        set_up_no_shadow, service_tear_down),
    };
    return cmocka_run_group_tests(tests, set_up_logbook, service_tear_down);
}
