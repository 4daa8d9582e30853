/*
 * Items: filed, revised, shown, listed and withdrawn.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "tests/integration/service.h"

static const json_t *file(struct peer *peer, const char *params)
{
    return ask(peer, "item.file", "%s", params);
}

static const json_t *show(struct peer *peer, const char *id)
{
    return ask(peer, "item.show", "{'id': '%s'}", id);
}

static const json_t *member(const json_t *object, const char *name)
{
    return json_object_get(object, name);
}

/* --- filing ---------------------------------------------------------------------------------- */

static void an_item_is_new_at_first(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_json(file(peer, "{'id': 'a', 'tags': ['fog']}"), "{'seq': 1, 'was': 'new'}");
    assert_json(file(peer, "{'id': 'b', 'tags': []}"), "{'seq': 2, 'was': 'new'}");
}

static void an_item_that_is_filed_again_with_other_words_is_revised(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer, "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}");
    assert_json(file(peer, "{'id': 'a', 'text': 'thin fog', 'tags': ['fog']}"),
                "{'seq': 2, 'was': 'revised'}");
    assert_string_equal(string(show(peer, "a"), "text"), "thin fog");
}

static void each_member_that_says_what_an_item_is_makes_a_revision(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const REVISIONS[] = {
        "{'id': 'a', 'tags': ['fog', 'bell']}",
        "{'id': 'a', 'tags': ['fog']}",
        "{'id': 'a', 'tags': ['fog'], 'title': 'night'}",
        "{'id': 'a', 'tags': ['fog'], 'text': 'night'}",
        "{'id': 'a', 'tags': ['fog'], 'fields': {'desk': 'north'}}",
        "{'id': 'a', 'tags': ['fog'], 'fields': {'desk': ['north']}}",
        "{'id': 'a', 'tags': ['fog'], 'language': 'en'}",
        "{'id': 'a', 'tags': ['fog'], 'prompted': ['fog']}",
        "{'id': 'a', 'tags': ['fog'], 'declined': ['bell']}",
    };
    (void)file(peer, "{'id': 'a', 'tags': []}");
    for (size_t i = 0; i < sizeof REVISIONS / sizeof REVISIONS[0]; i++) {
        const json_t *answer = file(peer, REVISIONS[i]);
        assert_string_equal(string(answer, "was"), "revised");
        assert_int_equal(whole(answer, "seq"), i + 2);
    }
}

static void what_is_filed_again_unchanged_is_the_same(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const SAME[] = {
        "{'id': 'a', 'tags': ['fog', 'bell'], 'text': 'dense', 'fields': {'n': 1, 'b': true}}",
        "{'tags': ['bell', 'fog', 'bell'], 'text': 'dense', 'fields': {'b': true, 'n': 1}, "
        "'id': 'a'}",
        "{'id': 'a', 'tags': ['fog', 'bell'], 'text': 'dense', 'fields': {'n': 1, 'b': true}, "
        "'title': '', 'prompted': [], 'declined': []}",
        "{'id': 'a', 'tags': ['fog', 'bell'], 'text': 'dense', 'fields': {'n': 1, 'b': true}, "
        "'tagger': 'keeper 3', 'filed_at': '1911-03-09T18:30:00Z'}",
    };
    (void)file(peer, "{'id': 'before', 'tags': []}");
    (void)file(peer, SAME[0]);
    (void)file(peer, "{'id': 'after', 'tags': []}");
    for (size_t i = 0; i < sizeof SAME / sizeof SAME[0]; i++) {
        assert_json(file(peer, SAME[i]), "{'seq': 2, 'was': 'same'}");
    }
    assert_int_equal(ask_seq(peer), 3);
    assert_json(member(show(peer, "a"), "tagger"), "null");
}

/* --- showing --------------------------------------------------------------------------------- */

static void an_item_is_shown_as_it_was_filed(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer,
               "{'id': 'log/1911-03-09', 'title': 'A night of fog', 'text': 'Bell at two.\\n', "
               "'tags': ['fog', 'bell'], 'fields': {'desk': 'harbour', 'year': 1911, "
               "'checked': false, 'boats': ['Tern', 'Gull'], 'height': 4.25}, 'language': 'en-GB', "
               "'tagger': 'keeper 3', 'filed_at': '1911-03-09T18:30:00Z', 'prompted': ['bell']}");
    const json_t *item = show(peer, "log/1911-03-09");
    const char *stored_at = string(item, "stored_at");
    assert_memory_equal(stored_at, "20", 2); /* a time of today, in UTC */
    assert_int_equal(stored_at[strlen(stored_at) - 1], 'Z');
    assert_members(item,
                   "{'id': 'log/1911-03-09', 'seq': 1, 'title': 'A night of fog', "
                   "'text': 'Bell at two.\\n', 'tags': ['bell', 'fog'], 'filed': ['bell', 'fog'], "
                   "'fields': {'desk': 'harbour', 'year': 1911, 'checked': false, "
                   "'boats': ['Tern', 'Gull'], 'height': 4.25}, 'language': 'en-GB', "
                   "'tagger': 'keeper 3', 'filed_at': '1911-03-09T18:30:00Z', "
                   "'prompted': ['bell'], 'declined': [], 'belongs': [], 'not': [], "
                   "'checked': null}");
}

static void what_was_not_given_is_shown_as_empty(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer, "{'id': 'a', 'tags': []}");
    const json_t *item = show(peer, "a");
    assert_json(member(item, "title"), "''");
    assert_json(member(item, "text"), "''");
    assert_json(member(item, "fields"), "{}");
    assert_json(member(item, "language"), "null");
    assert_json(member(item, "filed_at"), "null");
    assert_json(member(item, "tags"), "[]");
}

static void a_text_of_many_scripts_comes_back_byte_for_byte(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char TEXT[] = "n\xC3\xA9"
                               "buleuse e\xCC\x81 \xE7\x81\xAF\xE5\x8F\xB0 \xF0\x9F\x9A\xA2 "
                               "\xD9\x85\xD9\x86\xD8\xA7\xD8\xB1\xD8\xA9 \x7F\xC2\x85";
    (void)ask(peer, "item.file", "{'id': 'a', 'text': '%s', 'tags': ['\xE7\x81\xAF']}", TEXT);
    assert_string_equal(string(show(peer, "a"), "text"), TEXT);
    assert_json(member(show(peer, "a"), "tags"), "['\xE7\x81\xAF']");
}

static void an_item_that_is_not_there_is_not_found(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const METHODS[] = {"item.show", "item.gaps", "item.withdraw"};
    for (size_t i = 0; i < sizeof METHODS / sizeof METHODS[0]; i++) {
        assert_error(ask_refused(peer, METHODS[i], "{'id': 'none'}"), -32001, "/id");
    }
    assert_int_equal(ask_seq(peer), 0);
}

/* --- withdrawing ----------------------------------------------------------------------------- */

static void a_withdrawn_item_is_gone_from_every_answer(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer, "{'id': 'a', 'tags': ['fog']}");
    assert_json(ask(peer, "item.withdraw", "{'id': 'a'}"), "{'seq': 2}");
    assert_error(ask_refused(peer, "item.show", "{'id': 'a'}"), -32001, "/id");
    assert_error(ask_refused(peer, "item.gaps", "{'id': 'a'}"), -32001, "/id");
    assert_error(ask_refused(peer, "item.withdraw", "{'id': 'a'}"), -32001, "/id");
    assert_int_equal(whole(ask(peer, "tag.show", "{'tag': 'fog'}"), "count"), 0);
    assert_int_equal(whole(ask(peer, "daemon.state", "{}"), "items"), 0);
}

static void a_withdrawn_item_that_is_filed_again_is_new(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer, "{'id': 'a', 'tags': ['fog']}");
    (void)ask(peer, "item.withdraw", "{'id': 'a'}");
    assert_json(file(peer, "{'id': 'a', 'tags': ['fog']}"), "{'seq': 3, 'was': 'new'}");
}

/* --- listing --------------------------------------------------------------------------------- */

static void changed_items_are_listed_once_with_their_last_change(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    (void)file(peer, "{'id': 'a', 'tags': []}");
    (void)file(peer, "{'id': 'b', 'tags': []}");
    (void)file(peer, "{'id': 'c', 'tags': []}");
    (void)file(peer, "{'id': 'a', 'tags': ['fog']}");
    (void)ask(peer, "item.withdraw", "{'id': 'b'}");
    assert_json(ask(peer, "item.list", "{}"),
                "{'items': [{'id': 'c', 'seq': 3, 'withdrawn': false}, "
                "{'id': 'a', 'seq': 4, 'withdrawn': false}, "
                "{'id': 'b', 'seq': 5, 'withdrawn': true}], 'next': 5}");
    assert_json(ask(peer, "item.list", "{'since': 4}"),
                "{'items': [{'id': 'b', 'seq': 5, 'withdrawn': true}], 'next': 5}");
    assert_json(ask(peer, "item.list", "{'since': 5}"), "{'items': [], 'next': 5}");
}

static void a_list_goes_on_where_its_page_ended(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    for (unsigned i = 1; i <= 7; i++) {
        (void)ask(peer, "item.file", "{'id': '%u', 'tags': []}", i);
    }
    json_int_t since = 0;
    unsigned seen = 0;
    for (unsigned pages = 0; pages < 3; pages++) {
        const json_t *page = ask(peer, "item.list", "{'since': %lld, 'most': 3}", (long long)since);
        size_t i = 0;
        const json_t *item = NULL;
        json_array_foreach(member(page, "items"), i, item)
        {
            assert_int_equal(whole(item, "seq"), ++seen);
        }
        since = whole(page, "next");
    }
    assert_int_equal(seen, 7);
    assert_int_equal(since, 7);
}

/* --- lasting --------------------------------------------------------------------------------- */

static void items_are_there_after_a_restart(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    (void)file(peer, "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}");
    (void)file(peer, "{'id': 'b', 'tags': ['bell']}");
    (void)ask(peer, "item.withdraw", "{'id': 'b'}");
    json_t *before = json_deep_copy(show(peer, "a"));
    service_stop_and_start(service);
    assert_true(json_equal(show(peer, "a"), before));
    json_decref(before);
    assert_json(file(peer, "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}"),
                "{'seq': 1, 'was': 'same'}");
    assert_json(file(peer, "{'id': 'c', 'tags': []}"), "{'seq': 4, 'was': 'new'}");
}

static void a_daemon_that_only_restarts_has_nothing_to_learn(void **state)
{
    struct service *service = *state;
    (void)file(&service->peer, "{'id': 'a', 'text': 'dense fog', 'tags': ['fog']}");
    wait_until_learned(&service->peer);
    service_stop_and_start(service);
    assert_int_equal(ask_learned(&service->peer), 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(an_item_is_new_at_first),
        TEST(an_item_that_is_filed_again_with_other_words_is_revised),
        TEST(each_member_that_says_what_an_item_is_makes_a_revision),
        TEST(what_is_filed_again_unchanged_is_the_same),
        TEST(an_item_is_shown_as_it_was_filed),
        TEST(what_was_not_given_is_shown_as_empty),
        TEST(a_text_of_many_scripts_comes_back_byte_for_byte),
        TEST(an_item_that_is_not_there_is_not_found),
        TEST(a_withdrawn_item_is_gone_from_every_answer),
        TEST(a_withdrawn_item_that_is_filed_again_is_new),
        TEST(changed_items_are_listed_once_with_their_last_change),
        TEST(a_list_goes_on_where_its_page_ended),
        TEST(items_are_there_after_a_restart),
        TEST(a_daemon_that_only_restarts_has_nothing_to_learn),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
