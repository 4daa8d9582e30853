/*
 * tag.show and tag.list.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "tests/integration/service.h"

/* Items of which 5 have "fog", 3 "bell", 1 "lamp", and 3 "anchor" that was only taken from
 * proposals. */
static int set_up_tagged(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    static const char *const TAGS[] = {
        "'tags': ['fog', 'bell']",
        "'tags': ['fog', 'bell', 'lamp']",
        "'tags': ['fog', 'bell']",
        "'tags': ['fog', 'anchor'], 'prompted': ['anchor']",
        "'tags': ['fog', 'anchor'], 'prompted': ['anchor']",
        "'tags': ['anchor'], 'prompted': ['anchor']",
    };
    for (unsigned i = 0; i < sizeof TAGS / sizeof TAGS[0]; i++) {
        (void)ask(&service->peer, "item.file", "{'id': '%u', %s}", i, TAGS[i]);
    }
    *state = service;
    return 0;
}

static const json_t *show(struct peer *peer, const char *tag)
{
    return ask(peer, "tag.show", "{'tag': '%s'}", tag);
}

/* The names of a page, each with a space behind it. */
static const char *names_of(struct peer *peer, const json_t *page)
{
    char names[256] = "";
    size_t used = 0;
    size_t i = 0;
    const json_t *tag = NULL;
    json_array_foreach(json_object_get(page, "tags"), i, tag)
    {
        int length = snprintf(names + used, sizeof names - used, "%s ", string(tag, "tag"));
        assert_in_range(length, 1, sizeof names - used - 1);
        used += (size_t)length;
    }
    return keep_text(peer, names);
}

/* --- tag.show -------------------------------------------------------------------------------- */

static void a_tag_shows_its_counts(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_members(show(peer, "fog"),
                   "{'tag': 'fog', 'count': 5, 'unprompted': 5, 'opened_seq': 1, 'state': 'open', "
                   "'label': null, 'broader': null, 'aliases': [], "
                   "'rulings': {'belongs': 0, 'not': 0}}");
    assert_members(show(peer, "lamp"), "{'count': 1, 'unprompted': 1, 'opened_seq': 2}");
    assert_members(show(peer, "anchor"), "{'count': 3, 'unprompted': 0, 'opened_seq': 4}");
}

/*
 * Jain, Prabhu, Varma, KDD 2016: p = 1 / (1 + C (N_l + B)^-A), C = (ln N - 1)(B + 1)^A, with A =
 * .55 and B = 1.5; ln N - 1 is taken as 1 at least. Of 6 items: ln 6 - 1 = .79, so 1; C = 2.5^.55.
 * fog, 5 times: p = 1 / (1 + (2.5 / 6.5)^.55) = 1 / (1 + .5913) = .628. Missing are (N_l - 1/2)
 * (1 - p) / p, as a tag that is known has been given once at least (completeness.h).
 */
static void a_tag_shows_its_propensity_by_the_curve(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *tag = show(peer, "fog");
    const json_t *propensity = json_object_get(tag, "propensity");
    double p = number(propensity, "p");
    assert_true(fabs(p - 1.0 / (1.0 + pow(2.5 / 6.5, 0.55))) < 1e-9);
    assert_true(number(propensity, "low") <= p && p <= number(propensity, "high"));
    assert_true(number(propensity, "low") < number(propensity, "high"));
    assert_string_equal(string(propensity, "from"), "curve");
    double missing = 4.5 * (1.0 - p) / p;
    assert_true(fabs(number(tag, "missing") - missing) < 1e-9);
    assert_true(fabs(number(tag, "expected_true") - (5.0 + missing)) < 1e-9);
}

/* A pair that an editor was asked about is known: p = 1. */
static void what_was_prompted_misses_nothing(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *tag = show(peer, "anchor");
    assert_true(fabs(number(tag, "missing")) < 1e-9);
    assert_true(fabs(number(tag, "expected_true") - 3.0) < 1e-9);
}

static void counts_follow_revisions_and_withdrawals_at_once(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)ask(peer, "item.file", "{'id': '0', 'tags': ['bell']}"); /* without fog */
    assert_int_equal(whole(show(peer, "fog"), "count"), 4);
    assert_int_equal(whole(show(peer, "bell"), "count"), 3);
    (void)ask(peer, "item.withdraw", "{'id': '1'}");
    assert_int_equal(whole(show(peer, "fog"), "count"), 3);
    assert_int_equal(whole(show(peer, "lamp"), "count"), 0);
    (void)ask(peer, "item.file", "{'id': '5', 'tags': ['anchor']}"); /* of its own accord now */
    assert_members(show(peer, "anchor"), "{'count': 3, 'unprompted': 1}");
}

static void a_tag_that_is_not_there_is_not_found(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'Fog'}"), -32001, "/tag");
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'fo'}"), -32001, "/tag");
}

/* --- tag.list -------------------------------------------------------------------------------- */

static void tags_are_listed_by_name(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    const json_t *page = ask(peer, "tag.list", "{}");
    assert_string_equal(names_of(peer, page), "anchor bell fog lamp ");
    assert_null(json_object_get(page, "next"));
    assert_members(json_array_get(json_object_get(page, "tags"), 2),
                   "{'tag': 'fog', 'count': 5, 'state': 'open'}");
    assert_true(number(json_array_get(json_object_get(page, "tags"), 2), "missing") > 0.0);
    assert_string_equal(names_of(peer, ask(peer, "tag.list", "{'order': 'name'}")),
                        "anchor bell fog lamp ");
}

/* Equal counts keep the order in which the tags were opened: bell before anchor. */
static void tags_are_listed_by_count(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_string_equal(names_of(peer, ask(peer, "tag.list", "{'order': 'count'}")),
                        "fog bell anchor lamp ");
}

/* N (1/p - 1) = N (2.5 / (N + 1.5))^.55: fog 5 x .591 = 2.96, bell 3 x .724 = 2.17, lamp 1, anchor
 * none. */
static void tags_are_listed_by_what_is_missing(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_string_equal(names_of(peer, ask(peer, "tag.list", "{'order': 'missing'}")),
                        "fog bell lamp anchor ");
}

static void each_order_goes_on_where_its_page_ended(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const ORDERS[] = {"name", "count", "missing"};
    for (size_t i = 0; i < sizeof ORDERS / sizeof ORDERS[0]; i++) {
        const json_t *all =
            json_object_get(ask(peer, "tag.list", "{'order': '%s'}", ORDERS[i]), "tags");
        const json_t *page = ask(peer, "tag.list", "{'order': '%s', 'most': 3}", ORDERS[i]);
        const json_t *tags = json_object_get(page, "tags");
        assert_int_equal(json_array_size(tags), 3);
        for (size_t k = 0; k < 3; k++) {
            assert_true(json_equal(json_array_get(tags, k), json_array_get(all, k)));
        }
        page = ask(peer, "tag.list", "{'order': '%s', 'after': '%s'}", ORDERS[i],
                   string(page, "next"));
        tags = json_object_get(page, "tags");
        assert_int_equal(json_array_size(tags), 1);
        assert_true(json_equal(json_array_get(tags, 0), json_array_get(all, 3)));
        assert_null(json_object_get(page, "next"));
    }
}

static void a_page_of_just_all_has_no_next(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_null(json_object_get(ask(peer, "tag.list", "{'most': 4}"), "next"));
}

static void by_name_a_page_may_begin_behind_a_name_that_is_no_tag(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_string_equal(names_of(peer, ask(peer, "tag.list", "{'after': 'c'}")), "fog lamp ");
    assert_string_equal(names_of(peer, ask(peer, "tag.list", "{'after': 'zebra'}")), "");
}

/* Where a tag stands by its number cannot be told of one that is not there. */
static void by_number_a_page_begins_behind_a_tag_that_is_there(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_error(ask_refused(peer, "tag.list", "{'order': 'count', 'after': 'c'}"), -32001,
                 "/after");
}

static void the_tags_are_there_after_a_restart(void **state)
{
    struct service *service = *state;
    json_t *before = json_deep_copy(ask(&service->peer, "tag.list", "{'order': 'missing'}"));
    service_stop_and_start(service);
    assert_true(json_equal(ask(&service->peer, "tag.list", "{'order': 'missing'}"), before));
    json_decref(before);
}

static void an_empty_vocabulary_has_an_empty_list(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(ask(peer, "tag.list", "{}"), "{'tags': []}");
    assert_json(ask(peer, "tag.list", "{'order': 'missing'}"), "{'tags': []}");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up_tagged, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_tag_shows_its_counts),
        TEST(a_tag_shows_its_propensity_by_the_curve),
        TEST(what_was_prompted_misses_nothing),
        TEST(counts_follow_revisions_and_withdrawals_at_once),
        TEST(a_tag_that_is_not_there_is_not_found),
        TEST(tags_are_listed_by_name),
        TEST(tags_are_listed_by_count),
        TEST(tags_are_listed_by_what_is_missing),
        TEST(each_order_goes_on_where_its_page_ended),
        TEST(a_page_of_just_all_has_no_next),
        TEST(by_name_a_page_may_begin_behind_a_name_that_is_no_tag),
        TEST(by_number_a_page_begins_behind_a_tag_that_is_there),
        TEST(the_tags_are_there_after_a_restart),
        cmocka_unit_test_setup_teardown(an_empty_vocabulary_has_an_empty_list, service_set_up,
                                        service_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
