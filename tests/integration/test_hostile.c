/*
 * Hostile input over the real socket: each has an error that names the member, nothing is changed,
 * and a second peer is served meanwhile. Lines that cannot be parsed are in test_wire_rpc.c, lines
 * without end in test_wire_order.c, members of the wrong kind in test_bad_input.c.
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
    PARAMS = -32602,
    LIMIT = -32003,
    MILLION = 1000000
};

/* --- large texts, on the heap --- */

/* Each number below `count`, of 4 hexadecimal digits at least, between `before` and `behind`, with
 * commas between. */
static char *listed(const char *before, unsigned count, const char *behind)
{
    char *text = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&text, &size);
    assert_non_null(stream);
    for (unsigned i = 0; i < count; i++) {
        assert_true(fprintf(stream, "%s%s%04x%s", i > 0 ? "," : "", before, i, behind) > 0);
    }
    assert_int_equal(fclose(stream), 0);
    return text;
}

static char *repeat(const char *piece, size_t times)
{
    size_t size = strlen(piece);
    char *text = malloc(times * size + 1);
    assert_non_null(text);
    for (size_t i = 0; i < times; i++) {
        memcpy(text + i * size, piece, size);
    }
    text[times * size] = '\0';
    return text;
}

/* --- the second peer --- */

static void assert_others_are_served(const struct service *service)
{
    struct peer other;
    peer_open(&other, service->daemon.socket);
    (void)ask(&other, "item.file", "{'id': 'gull/1', 'tags': ['fog'], 'text': 'Fog at dawn.'}");
    assert_string_equal(string(ask(&other, "item.show", "{'id': 'gull/1'}"), "id"), "gull/1");
    peer_close(&other);
}

/* The request is refused with the code, for that member, and another peer is served before its
 * answer is read. Only what that one filed has changed. */
static void assert_harmless(struct service *service, const char *method, const char *params,
                            int code, const char *field)
{
    struct peer *peer = &service->peer;
    json_int_t tags = whole(ask(peer, "daemon.state", "{}"), "tags");
    unsigned id = peer_request(peer, method, "%s", params);
    assert_others_are_served(service);
    assert_error(peer_error(peer, id), code, field);
    assert_true(whole(ask(peer, "daemon.state", "{}"), "tags") <= tags + 1); /* "fog" */
    assert_int_equal(ask_seq(peer), 1);
}

/* The same, with params of a beginning, something large, and an end; frees the large. */
static void assert_large_is_harmless(struct service *service, const char *method,
                                     const char *before, char *large, const char *behind, int code,
                                     const char *field)
{
    char *params = NULL;
    assert_true(asprintf(&params, "%s%s%s", before, large, behind) > 0);
    assert_harmless(service, method, params, code, field);
    free(params);
    free(large);
}

/* --- large lists --- */

/* 7 bytes each: a line of less than 8 MiB. */
static void a_million_tags_in_one_item_are_refused(void **state)
{
    assert_large_is_harmless(*state, "item.file", "{'id': 'a', 'tags': [",
                             listed("'", MILLION, "'"), "]}", LIMIT, "/tags");
}

static void a_list_of_names_is_limited_wherever_it_stands(void **state)
{
    static const struct {
        const char *method;
        const char *before;
        const char *field;
    } CASES[] = {
        {"item.file", "{'id': 'a', 'tags': [], 'prompted': [", "/prompted"},
        {"item.file", "{'id': 'a', 'tags': [], 'declined': [", "/declined"},
        {"item.gaps", "{'tags': [", "/tags"},
        {"item.rule", "{'id': 'gull/1', 'belongs': [", "/belongs"},
        {"item.rule", "{'id': 'gull/1', 'not': [", "/not"},
        {"item.check", "{'id': 'gull/1', 'tags': [", "/tags"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        assert_large_is_harmless(*state, CASES[i].method, CASES[i].before, listed("'", 100001, "'"),
                                 "]}", LIMIT, CASES[i].field);
    }
}

static void fields_of_too_many_words_are_to_blame_themselves(void **state)
{
    static const char BEFORE[] = "{'fields': {'lamp': [";
    assert_large_is_harmless(*state, "item.file", "{'id': 'a', 'tags': [], 'fields': {'lamp': [",
                             listed("'", 30000, "'"), "]}}", LIMIT, "/fields");
    assert_large_is_harmless(*state, "item.gaps", BEFORE, listed("'", 30000, "'"), "]}}", LIMIT,
                             "/fields");
}

/* --- keys --- */

static void an_object_of_very_many_members_is_refused_by_its_first(void **state)
{
    assert_large_is_harmless(*state, "item.show", "{", listed("'lamp", 400000, "': 1"), "}", PARAMS,
                             "/lamp0000");
}

static void a_name_of_megabytes_is_refused_and_cut_in_the_answer(void **state)
{
    struct service *service = *state;
    char *name = repeat("\xC3\xA9", 2 * MILLION);
    unsigned id = peer_request(&service->peer, "item.show", "{'%s': 1}", name);
    assert_others_are_served(service);
    const json_t *error = peer_error(&service->peer, id);
    assert_int_equal(whole(error, "code"), PARAMS);
    assert_true(strlen(string(error, "message")) < 1024);
    assert_true(strlen(string(json_object_get(error, "data"), "field")) < 1024);
    free(name);
}

/* --- characters --- */

/* Marks that turn the direction of writing, and characters without a width, are no control
 * characters (general category Cf, not Cc): they make another name, and come back as they are. */
static void what_is_not_seen_makes_another_tag(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char TAGS[] = "['f\\u200bog', 'fog', '\\u202egof\\u202c', '\\u2066fog\\u2069']";
    (void)ask(peer, "item.file", "{'id': '\\u202ea', 'tags': %s, 'text': 'f\\u00adog'}", TAGS);
    const json_t *shown = ask(peer, "item.show", "{'id': '\\u202ea'}");
    assert_json(json_object_get(shown, "tags"), /* by their bytes */
                "['fog', 'f\\u200bog', '\\u202egof\\u202c', '\\u2066fog\\u2069']");
    assert_json(json_object_get(shown, "text"), "'f\\u00adog'");
    assert_int_equal(whole(ask(peer, "tag.show", "{'tag': 'fog'}"), "count"), 1);
    assert_error(ask_refused(peer, "item.show", "{'id': 'a'}"), -32001, "/id");
}

/* An id, a tag, a tagger that is no NFC: e and an accent, the sign for ohm, marks out of order. */
static void what_is_not_normalised_is_refused_wherever_it_is_a_name(void **state)
{
    static const struct {
        const char *method;
        const char *params;
        const char *field;
    } CASES[] = {
        {"item.file", "{'id': 'a', 'tags': [], 'tagger': 'e\\u0301'}", "/tagger"},
        {"item.file", "{'id': 'a', 'tags': ['fog'], 'prompted': ['\\u2126']}", "/prompted/0"},
        {"item.file", "{'id': 'a', 'tags': ['q\\u0301\\u0323']}", "/tags/0"},
        {"item.rule", "{'id': 'gull/1', 'belongs': ['fog'], 'editor': '\\u2126'}", "/editor"},
        {"item.check", "{'id': 'gull/1', 'tags': ['fog', 'e\\u0301']}", "/tags/1"},
        {"desk.worklist", "{'tag': '\\u212b'}", "/tag"},
        {"desk.completeness", "{'tag': '\\u212b'}", "/tag"},
        {"tag.list", "{'after': 'e\\u0301'}", "/after"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        assert_harmless(*state, CASES[i].method, CASES[i].params, PARAMS, CASES[i].field);
    }
}

/* --- words --- */

/* Taken, since each is a text; none of it is a word that could be learned, but one. */
static void overlong_words_are_filed_and_teach_nothing(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    static const char *const PIECES[] = {"f", "\xCC\x81", "\xE2\x80\x8D", "\xE1\x84\x80",
                                         "a\xE2\x80\x99"};
    for (size_t i = 0; i < sizeof PIECES / sizeof PIECES[0]; i++) {
        char *text = repeat(PIECES[i], MILLION / strlen(PIECES[i]));
        unsigned id =
            peer_request(peer, "item.file", "{'id': '%zu', 'tags': ['x'], 'text': '%s'}", i, text);
        assert_others_are_served(service);
        assert_string_equal(string(peer_result(peer, id), "was"), "new");
        (void)ask(peer, "item.gaps", "{'text': '%s'}", text);
        free(text);
    }
    wait_until_learned(peer);
    assert_int_equal(whole(ask(peer, "daemon.state", "{}"), "words"), 3); /* fog, at, dawn */
}

/* --- numbers --- */

static void numbers_as_large_as_they_may_be_come_back_the_same(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char FIELDS[] = "{'a': 9223372036854775807, 'b': -9223372036854775808, "
                                 "'c': 1.7976931348623157e308, 'd': 5e-324, 'e': 0.1}";
    (void)ask(peer, "item.file", "{'id': 'a', 'tags': [], 'fields': %s}", FIELDS);
    assert_json(json_object_get(ask(peer, "item.show", "{'id': 'a'}"), "fields"), FIELDS);
}

static void numbers_beyond_what_a_member_takes_name_it(void **state)
{
    static const struct {
        const char *method;
        const char *params;
        const char *field;
    } CASES[] = {
        {"item.list", "{'since': 1e308}", "/since"},
        {"item.list", "{'most': 9223372036854775807}", "/most"},
        {"item.gaps", "{'floor': 1e308}", "/floor"},
        {"item.gaps", "{'most': -9223372036854775808}", "/most"},
        {"tag.list", "{'most': 1e0}", "/most"},
        {"desk.sample", "{'most': 9223372036854775807}", "/most"},
        {"desk.sample", "{'seed': -1}", "/seed"},
        {"desk.worklist", "{'floor': -5e-324}", "/floor"},
        {"desk.standing", "{'window': -1}", "/window"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        assert_harmless(*state, CASES[i].method, CASES[i].params, PARAMS, CASES[i].field);
    }
}

/* --- many at once --- */

/* A peer that pipelines nothing but what cannot be taken gets an answer to each, and another is
 * served in between. */
static void a_flood_of_hostile_lines_holds_nobody_up(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    static const char *const LINES[] = {"{\"id\":\"\\ud800\"}\n", "{\"a\":1,\"a\":2}\n",
                                        "{\"id\":1e999}\n", "\xFF\xFE\n", "[]\n"};
    enum {
        ROUNDS = 1000,
        KINDS = sizeof LINES / sizeof LINES[0]
    };
    for (size_t i = 0; i < ROUNDS * (size_t)KINDS; i++) {
        peer_send(peer, LINES[i % KINDS], strlen(LINES[i % KINDS]));
    }
    assert_others_are_served(service);
    for (size_t i = 0; i < ROUNDS * (size_t)KINDS; i++) {
        assert_error(json_object_get(peer_answer(peer), "error"), i % KINDS == 4 ? -32600 : -32700,
                     "");
    }
    assert_int_equal(ask_seq(peer), 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_million_tags_in_one_item_are_refused),
        TEST(a_list_of_names_is_limited_wherever_it_stands),
        TEST(fields_of_too_many_words_are_to_blame_themselves),
        TEST(an_object_of_very_many_members_is_refused_by_its_first),
        TEST(a_name_of_megabytes_is_refused_and_cut_in_the_answer),
        TEST(what_is_not_seen_makes_another_tag),
        TEST(what_is_not_normalised_is_refused_wherever_it_is_a_name),
        TEST(overlong_words_are_filed_and_teach_nothing),
        TEST(numbers_as_large_as_they_may_be_come_back_the_same),
        TEST(numbers_beyond_what_a_member_takes_name_it),
        TEST(a_flood_of_hostile_lines_holds_nobody_up),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
