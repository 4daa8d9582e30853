/*
 * Bad input: every member is checked before anything changes. Each case names the code and the
 * member to blame, and that nothing was changed is asked of daemon.state at the end.
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
    NOT_FOUND = -32001,
    VOCABULARY = -32002,
    LIMIT = -32003
};

struct bad {
    const char *params;
    const char *field;
};

/* All are refused with the code, and the store is as it was. */
static void assert_all_refused(struct peer *peer, const char *method, int code,
                               const struct bad *cases, size_t count)
{
    json_int_t seq = ask_seq(peer);
    json_int_t tags = whole(ask(peer, "daemon.state", "{}"), "tags");
    for (size_t i = 0; i < count; i++) {
        assert_error(ask_refused(peer, method, "%s", cases[i].params), code, cases[i].field);
    }
    assert_int_equal(ask_seq(peer), seq);
    assert_int_equal(whole(ask(peer, "daemon.state", "{}"), "tags"), tags);
}

#define ASSERT_ALL_REFUSED(peer, method, code, cases)                                              \
    assert_all_refused(peer, method, code, cases, sizeof(cases) / sizeof(cases)[0])

/* A text of that many bytes, on the heap. */
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

/* --- names ----------------------------------------------------------------------------------- */

static void an_id_is_a_name_in_every_method(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const METHODS[] = {"item.file", "item.show", "item.gaps", "item.withdraw"};
    static const char *const IDS[] = {
        "null",       "7",          "['a']",        "''", "'a\\nb'",
        "'a\\u007f'", "'a\\u0085'", "'cafe\\u0301'" /* NFC has a character for e with an accent */
    };
    for (size_t m = 0; m < sizeof METHODS / sizeof METHODS[0]; m++) {
        for (size_t i = 0; i < sizeof IDS / sizeof IDS[0]; i++) {
            const char *beside = m == 0 ? ", 'tags': []" : "";
            assert_error(ask_refused(peer, METHODS[m], "{'id': %s%s}", IDS[i], beside), PARAMS,
                         "/id");
        }
    }
    assert_int_equal(ask_seq(peer), 0);
}

static void a_name_has_255_bytes_at_most(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    char *most = repeat("i", 255);
    char *over = repeat("i", 256);
    char *over_in_bytes = repeat("\xC3\xA9", 128); /* 128 characters */
    assert_error(ask_refused(peer, "item.file", "{'id': '%s', 'tags': []}", over), PARAMS, "/id");
    assert_error(ask_refused(peer, "item.file", "{'id': '%s', 'tags': []}", over_in_bytes), PARAMS,
                 "/id");
    assert_error(ask_refused(peer, "item.file", "{'id': 'a', 'tags': ['fog', '%s']}", over), PARAMS,
                 "/tags/1");
    assert_int_equal(ask_seq(peer), 0);
    (void)ask(peer, "item.file", "{'id': '%s', 'tags': ['%s']}", most, most);
    assert_string_equal(string(ask(peer, "item.show", "{'id': '%s'}", most), "id"), most);
    free(most);
    free(over);
    free(over_in_bytes);
}

static void a_missing_member_is_named(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    assert_error(ask_refused(peer, "item.file", "{'tags': []}"), PARAMS, "/id");
    assert_error(ask_refused(peer, "item.file", "{'id': 'a'}"), PARAMS, "/tags");
    assert_error(ask_refused(peer, "item.show", "{}"), PARAMS, "/id");
    assert_error(ask_refused(peer, "item.withdraw", "{}"), PARAMS, "/id");
    assert_error(ask_refused(peer, "tag.show", "{}"), PARAMS, "/tag");
    assert_int_equal(ask_seq(peer), 0);
}

/* --- item.file ------------------------------------------------------------------------------- */

static void tags_are_names_in_an_array(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': null}", "/tags"},
        {"{'id': 'a', 'tags': 'fog'}", "/tags"},
        {"{'id': 'a', 'tags': {'fog': 1}}", "/tags"},
        {"{'id': 'a', 'tags': [1]}", "/tags/0"},
        {"{'id': 'a', 'tags': ['fog', null]}", "/tags/1"},
        {"{'id': 'a', 'tags': ['fog', ['bell']]}", "/tags/1"},
        {"{'id': 'a', 'tags': ['fog', 'bell', '']}", "/tags/2"},
        {"{'id': 'a', 'tags': ['fog', 'be\\tll']}", "/tags/1"},
        {"{'id': 'a', 'tags': ['fog', 'cafe\\u0301']}", "/tags/1"},
        {"{'id': 'a', 'tags': ['fog', '\\u212b']}", "/tags/1"}, /* the angstrom sign: U+00C5 */
        {"{'id': 'a', 'tags': ['fog'], 'prompted': 'fog'}", "/prompted"},
        {"{'id': 'a', 'tags': ['fog'], 'prompted': [1]}", "/prompted/0"},
        {"{'id': 'a', 'tags': ['fog'], 'declined': 'bell'}", "/declined"},
        {"{'id': 'a', 'tags': ['fog'], 'declined': ['']}", "/declined/0"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", PARAMS, CASES);
}

static void prompted_are_among_the_tags_and_declined_are_not(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': ['fog', 'bell'], 'prompted': ['bell', 'lamp']}", "/prompted/1"},
        {"{'id': 'a', 'tags': [], 'prompted': ['bell']}", "/prompted/0"},
        {"{'id': 'a', 'tags': ['fog', 'bell'], 'declined': ['lamp', 'oil', 'fog']}", "/declined/2"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", PARAMS, CASES);
}

static void texts_and_what_is_beside_them_have_their_types(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': [], 'title': 7}", "/title"},
        {"{'id': 'a', 'tags': [], 'title': null}", "/title"},
        {"{'id': 'a', 'tags': [], 'text': ['fog']}", "/text"},
        {"{'id': 'a', 'tags': [], 'text': {}}", "/text"},
        {"{'id': 'a', 'tags': [], 'language': 3}", "/language"},
        {"{'id': 'a', 'tags': [], 'language': ''}", "/language"},
        {"{'id': 'a', 'tags': [], 'language': 'en_GB'}", "/language"},
        {"{'id': 'a', 'tags': [], 'language': 'the queen of all languages and more'}", "/language"},
        {"{'id': 'a', 'tags': [], 'tagger': 3}", "/tagger"},
        {"{'id': 'a', 'tags': [], 'tagger': ''}", "/tagger"},
        {"{'id': 'a', 'tags': [], 'tagger': 'a\\nb'}", "/tagger"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", PARAMS, CASES);
}

/* RFC 3339, section 5.6 and 5.7. */
static void a_time_is_one_of_rfc_3339(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': [], 'filed_at': 1911}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': ''}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-03-09'}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-03-09T18:30:00'}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-02-29T18:30:00Z'}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-13-09T18:30:00Z'}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-03-09T24:30:00Z'}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': '1911-03-09T18:30:00Z '}", "/filed_at"},
        {"{'id': 'a', 'tags': [], 'filed_at': 'yesterday'}", "/filed_at"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", PARAMS, CASES);
    (void)ask(peer, "item.file",
              "{'id': 'a', 'tags': [], 'filed_at': "
              "'1911-03-09T18:30:00.5-01:30'}");
    assert_string_equal(string(ask(peer, "item.show", "{'id': 'a'}"), "filed_at"),
                        "1911-03-09T20:00:00.500Z");
}

static void fields_are_plain_values(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': [], 'fields': []}", "/fields"},
        {"{'id': 'a', 'tags': [], 'fields': 'desk'}", "/fields"},
        {"{'id': 'a', 'tags': [], 'fields': {'desk': null}}", "/fields/desk"},
        {"{'id': 'a', 'tags': [], 'fields': {'desk': {}}}", "/fields/desk"},
        {"{'id': 'a', 'tags': [], 'fields': {'desk': ['north', 7]}}", "/fields/desk/1"},
        {"{'id': 'a', 'tags': [], 'fields': {'desk': [['north']]}}", "/fields/desk/0"},
        {"{'id': 'a', 'tags': [], 'fields': {'a/b~c': null}}", "/fields/a~1b~0c"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", PARAMS, CASES);
}

/* --- the other methods ----------------------------------------------------------------------- */

static void a_question_about_gaps_is_checked(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'most': -1}", "/most"},
        {"{'most': 1.5}", "/most"},
        {"{'most': '10'}", "/most"},
        {"{'most': 9223372036854775807}", "/most"},
        {"{'floor': -0.1}", "/floor"},
        {"{'floor': 1.1}", "/floor"},
        {"{'floor': '0'}", "/floor"},
        {"{'floor': null}", "/floor"},
        {"{'why': 1}", "/why"},
        {"{'why': 'yes'}", "/why"},
        {"{'title': 1}", "/title"},
        {"{'text': []}", "/text"},
        {"{'fields': 1}", "/fields"},
        {"{'fields': {'a': null}}", "/fields/a"},
        {"{'tags': 'fog'}", "/tags"},
        {"{'tags': ['fog', '']}", "/tags/1"},
        {"{'language': 'e n'}", "/language"},
    };
    ASSERT_ALL_REFUSED(peer, "item.gaps", PARAMS, CASES);
}

static void a_request_for_a_list_is_checked(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad ITEMS[] = {
        {"{'since': -1}", "/since"}, {"{'since': 0.5}", "/since"}, {"{'since': null}", "/since"},
        {"{'most': 0}", "/most"},    {"{'most': -5}", "/most"},    {"{'most': true}", "/most"},
    };
    static const struct bad TAGS[] = {
        {"{'most': 0}", "/most"},          {"{'most': '1'}", "/most"},
        {"{'order': 'size'}", "/order"},   {"{'order': null}", "/order"},
        {"{'order': ['name']}", "/order"}, {"{'after': 7}", "/after"},
        {"{'after': ''}", "/after"},
    };
    ASSERT_ALL_REFUSED(peer, "item.list", PARAMS, ITEMS);
    ASSERT_ALL_REFUSED(peer, "tag.list", PARAMS, TAGS);
}

static void a_tag_is_a_name_where_it_is_asked_for(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'tag': 7}", "/tag"},
        {"{'tag': ''}", "/tag"},
        {"{'tag': 'a\\nb'}", "/tag"},
        {"{'tag': 'cafe\\u0301'}", "/tag"},
    };
    ASSERT_ALL_REFUSED(peer, "tag.show", PARAMS, CASES);
}

/* --- limits ---------------------------------------------------------------------------------- */

static void a_text_is_a_mebibyte_at_most(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const char *const MEMBERS[] = {"title", "text"};
    char *most = repeat("f", 1024 * 1024);
    char *over = repeat("f", 1024 * 1024 + 1);
    for (size_t i = 0; i < 2; i++) {
        char field[16];
        (void)snprintf(field, sizeof field, "/%s", MEMBERS[i]);
        assert_error(ask_refused(peer, "item.file", "{'id': 'a', '%s': '%s', 'tags': ['fog']}",
                                 MEMBERS[i], over),
                     LIMIT, field);
        assert_error(ask_refused(peer, "item.gaps", "{'%s': '%s'}", MEMBERS[i], over), LIMIT,
                     field);
    }
    assert_error(
        ask_refused(peer, "item.file", "{'id': 'a', 'fields': {'x': '%s'}, 'tags': []}", most),
        LIMIT, "/fields"); /* with its name it is longer */
    assert_int_equal(ask_seq(peer), 0);
    (void)ask(peer, "item.file", "{'id': 'a', 'text': '%s', 'tags': ['fog']}", most);
    assert_string_equal(string(ask(peer, "item.show", "{'id': 'a'}"), "text"), most);
    free(most);
    free(over);
}

/* ["t0", "t1", ...], on the heap. */
static char *many_tags(unsigned count)
{
    char *text = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&text, &size);
    assert_non_null(stream);
    for (unsigned i = 0; i < count; i++) {
        assert_true(fprintf(stream, "%s't%u'", i ? ", " : "[", i) > 0);
    }
    assert_true(fputs("]", stream) >= 0);
    assert_int_equal(fclose(stream), 0);
    return text;
}

static void an_item_has_1000_tags_at_most(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    char *most = many_tags(1000);
    char *over = many_tags(1001);
    assert_error(ask_refused(peer, "item.file", "{'id': 'a', 'tags': %s}", over), LIMIT, "/tags");
    assert_error(ask_refused(peer, "item.file", "{'id': 'a', 'tags': [], 'declined': %s}", over),
                 LIMIT, "/declined");
    assert_error(ask_refused(peer, "item.gaps", "{'tags': %s}", over), LIMIT, "/tags");
    assert_int_equal(ask_seq(peer), 0);
    (void)ask(peer, "item.file", "{'id': 'a', 'tags': %s}", most);
    assert_int_equal(
        json_array_size(json_object_get(ask(peer, "item.show", "{'id': 'a'}"), "tags")), 1000);
    free(most);
    free(over);
}

/* A tag given twice counts once. */
static void tags_are_counted_once_each(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    char *many = repeat("'fog', ", 2000);
    (void)ask(peer, "item.file", "{'id': 'a', 'tags': [%s'bell']}", many);
    assert_json(json_object_get(ask(peer, "item.show", "{'id': 'a'}"), "tags"), "['bell', 'fog']");
    assert_int_equal(whole(ask(peer, "tag.show", "{'tag': 'fog'}"), "count"), 1);
    free(many);
}

static int set_up_few_words(void **state)
{
    *state = service_new("words_limit=100", NULL, NULL);
    return 0;
}

/* "w0 w1 ...", on the heap. */
static char *many_words(unsigned count)
{
    char *text = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&text, &size);
    assert_non_null(stream);
    for (unsigned i = 0; i < count; i++) {
        assert_true(fprintf(stream, "w%u ", i) > 0);
    }
    assert_int_equal(fclose(stream), 0);
    return text;
}

static void an_item_has_words_limit_different_words_at_most(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    char *most = many_words(100);
    char *over = many_words(101);
    assert_error(ask_refused(peer, "item.file", "{'id': 'a', 'text': '%s', 'tags': ['fog']}", over),
                 LIMIT, "/text");
    assert_error(ask_refused(peer, "item.gaps", "{'text': '%s'}", over), LIMIT, "/text");
    assert_int_equal(ask_seq(peer), 0);
    (void)ask(peer, "item.file", "{'id': 'a', 'text': '%s%s', 'tags': ['fog']}", most, most);
    (void)ask(peer, "item.gaps", "{'text': '%s%s'}", most, most);
    assert_int_equal(ask_seq(peer), 1);
    free(most);
    free(over);
}

/* --- the vocabulary -------------------------------------------------------------------------- */

static int set_up_closed_vocabulary(void **state)
{
    struct service *service = service_new("unknown_tags=open", NULL, NULL);
    (void)ask(&service->peer, "item.file", "{'id': 'first', 'tags': ['fog', 'bell']}");
    service->daemon.settings[0] = "unknown_tags=refuse";
    service_stop_and_start(service);
    *state = service;
    return 0;
}

static void an_unknown_tag_is_refused_where_none_is_opened(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': ['lamp']}", "/tags/0"},
        {"{'id': 'a', 'tags': ['fog', 'bell', 'lamp']}", "/tags/2"},
        {"{'id': 'a', 'tags': ['fog', 'lamp', 'bell']}", "/tags/1"},
        {"{'id': 'first', 'tags': ['fog', 'lamp']}", "/tags/1"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", VOCABULARY, CASES);
    assert_error(ask_refused(peer, "tag.show", "{'tag': 'lamp'}"), NOT_FOUND, "/tag");
    assert_string_equal(string(ask(peer, "item.file", "{'id': 'a', 'tags': ['fog']}"), "was"),
                        "new");
}

static void a_tag_that_was_declined_must_be_there(void **state)
{
    struct peer *peer = &((struct service *)*state)->peer;
    static const struct bad CASES[] = {
        {"{'id': 'a', 'tags': ['fog'], 'declined': ['bell', 'lamp']}", "/declined/1"},
    };
    ASSERT_ALL_REFUSED(peer, "item.file", NOT_FOUND, CASES);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(an_id_is_a_name_in_every_method),
        TEST(a_name_has_255_bytes_at_most),
        TEST(a_missing_member_is_named),
        TEST(tags_are_names_in_an_array),
        TEST(prompted_are_among_the_tags_and_declined_are_not),
        TEST(texts_and_what_is_beside_them_have_their_types),
        TEST(a_time_is_one_of_rfc_3339),
        TEST(fields_are_plain_values),
        TEST(a_question_about_gaps_is_checked),
        TEST(a_request_for_a_list_is_checked),
        TEST(a_tag_is_a_name_where_it_is_asked_for),
        TEST(a_text_is_a_mebibyte_at_most),
        TEST(an_item_has_1000_tags_at_most),
        TEST(tags_are_counted_once_each),
        cmocka_unit_test_setup_teardown(an_item_has_words_limit_different_words_at_most,
                                        set_up_few_words, service_tear_down),
        cmocka_unit_test_setup_teardown(an_unknown_tag_is_refused_where_none_is_opened,
                                        set_up_closed_vocabulary, service_tear_down),
        cmocka_unit_test_setup_teardown(a_tag_that_was_declined_must_be_there,
                                        set_up_closed_vocabulary, service_tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
