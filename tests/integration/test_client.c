/*
 * The real client and the real daemon.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    ARGUMENTS_MOST = 16
};

static struct program_run run;

static const char ENTRIES[] =
    "{\"id\": \"1911-03-09\", \"title\": \"A night of fog\", \"text\": \"Dense, the bell at "
    "two.\", "
    "\"tags\": [\"fog\", \"bell\"]}\n"
    "{\"id\": \"1911-03-10\", \"text\": \"Clear. The supply boat landed.\", \"tags\": "
    "[\"supply\"]}\n"
    "{\"id\": \"1911-03-11\", \"text\": \"Fog again.\", \"tags\": [\"fog\"]}\n";

/* Runs the client on the service's socket with these arguments. */
static void client(const struct service *service, const char *input, const char *const *arguments)
{
    const char *all[ARGUMENTS_MOST + 3] = {"--socket", service->daemon.socket};
    for (size_t i = 0; arguments[i]; i++) {
        assert_true(i < ARGUMENTS_MOST);
        all[i + 2] = arguments[i];
    }
    program_run("undertag", all, input, &run);
}

#define CLIENT(service, input, ...) client(service, input, (const char *const[]){__VA_ARGS__, NULL})

static void assert_ended(int exit_code)
{
    if (run.exit_code != exit_code) {
        fail_msg("ended with %d, said: %s%s", run.exit_code, run.output, run.error);
    }
}

static void assert_part(const char *text, const char *part)
{
    if (!strstr(text, part)) {
        fail_msg("'%s' is not in: %s", part, text);
    }
}

/* A service that has filed the three entries. */
static int set_up_entries(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    *state = service;
    CLIENT(service, ENTRIES, "file");
    assert_ended(0);
    wait_until_learned(&service->peer);
    return 0;
}

/* --- file ------------------------------------------------------------------------------------ */

static void items_are_filed_from_standard_input(void **state)
{
    struct service *service = *state;
    CLIENT(service, ENTRIES, "file");
    assert_ended(0);
    assert_string_equal(run.output, "3 new, 0 revised, 0 same, 0 refused\n");
    const json_t *item = ask(&service->peer, "item.show", "{'id': '1911-03-09'}");
    assert_members(item, "{'title': 'A night of fog', 'tags': ['bell', 'fog'], 'seq': 1}");
}

static void items_are_filed_from_files(void **state)
{
    struct service *service = *state;
    char first[UNDERTAGD_PATH_BYTES];
    char second[UNDERTAGD_PATH_BYTES];
    undertagd_write(&service->daemon, "first.jsonl", ENTRIES);
    undertagd_write(&service->daemon, "second.jsonl", "{\"id\": \"x\", \"tags\": []}"); /* no end */
    undertagd_path(&service->daemon, "first.jsonl", first);
    undertagd_path(&service->daemon, "second.jsonl", second);
    CLIENT(service, "", "file", first, second);
    assert_ended(0);
    assert_string_equal(run.output, "4 new, 0 revised, 0 same, 0 refused\n");
    assert_int_equal(ask_seq(&service->peer), 4);
}

static void the_same_command_again_files_the_same(void **state)
{
    struct service *service = *state;
    CLIENT(service, ENTRIES, "file");
    assert_ended(0);
    assert_string_equal(run.output, "0 new, 0 revised, 3 same, 0 refused\n");
    assert_int_equal(ask_seq(&service->peer), 3);
}

static void a_refused_line_is_told_and_the_rest_goes_on(void **state)
{
    struct service *service = *state;
    char path[UNDERTAGD_PATH_BYTES];
    char line[2 * UNDERTAGD_PATH_BYTES];
    undertagd_write(&service->daemon, "entries.jsonl",
                    "{\"id\": \"a\", \"tags\": [\"fog\"]}\n"
                    "\n"
                    "not JSON\n"
                    "{\"id\": \"b\"}\n"
                    "{\"id\": \"c\", \"tags\": [\"fog\", \"\"]}\n"
                    "{\"id\": \"d\", \"tags\": []}\n");
    undertagd_path(&service->daemon, "entries.jsonl", path);
    CLIENT(service, "", "file", path);
    assert_ended(EX_DATAERR);
    assert_string_equal(run.output, "2 new, 0 revised, 0 same, 3 refused\n");
    static const char *const TOLD[] = {":3: this is not JSON", ":4: tags is missing",
                                       ":5: Each of tags is 1 to 255 bytes"};
    for (size_t i = 0; i < sizeof TOLD / sizeof TOLD[0]; i++) {
        (void)snprintf(line, sizeof line, "%s%s", path, TOLD[i]);
        assert_part(run.error, line);
    }
    assert_part(run.error, "(/tags/1)");
    assert_int_equal(ask_seq(&service->peer), 2);
}

static void a_long_stream_is_filed_in_order(void **state)
{
    struct service *service = *state;
    char *lines = NULL;
    size_t size = 0;
    FILE *stream = open_memstream(&lines, &size);
    assert_non_null(stream);
    for (unsigned i = 1; i <= 3000; i++) {
        assert_true(fprintf(stream, "{\"id\": \"%u\", \"tags\": [\"t%u\"]}\n", i, i % 7) > 0);
    }
    assert_int_equal(fclose(stream), 0);
    CLIENT(service, lines, "file");
    free(lines);
    assert_ended(0);
    assert_string_equal(run.output, "3,000 new, 0 revised, 0 same, 0 refused\n");
    assert_int_equal(whole(ask(&service->peer, "item.show", "{'id': '2024'}"), "seq"), 2024);
}

static void one_item_is_filed_by_options(void **state)
{
    struct service *service = *state;
    CLIENT(service, "The lens was cleaned.", "file", "--id", "x", "--title", "Lamp", "--tag",
           "lamp", "--tag", "repair", "--field", "desk=north", "--tagger", "keeper 3");
    assert_ended(0);
    assert_part(run.output, "x: new");
    assert_members(ask(&service->peer, "item.show", "{'id': 'x'}"),
                   "{'title': 'Lamp', 'text': 'The lens was cleaned.', 'tags': ['lamp', 'repair'], "
                   "'fields': {'desk': 'north'}, 'tagger': 'keeper 3'}");
}

/* --- gaps ------------------------------------------------------------------------------------ */

static void gaps_are_shown_for_items_and_drafts(void **state)
{
    struct service *service = *state;
    CLIENT(service, "", "gaps", "1911-03-11", "--floor", "0", "--why");
    assert_ended(0);
    assert_part(run.output, "bell");
    CLIENT(service, "Fog, and the bell at night.", "gaps", "--floor", "0");
    assert_ended(0);
    assert_part(run.output, "fog");
    CLIENT(service, "{\"text\": \"fog\", \"tags\": [\"fog\"]}", "gaps", "--floor", "0");
    assert_ended(0);
    assert_part(run.output, "supply");
}

static void json_is_what_the_daemon_answered(void **state)
{
    struct service *service = *state;
    CLIENT(service, "{\"text\": \"fog\"}", "--json", "gaps", "--most", "2", "--floor", "0");
    assert_ended(0);
    json_t *printed = json_loads(run.output, 0, NULL);
    const json_t *answered =
        ask(&service->peer, "item.gaps", "{'text': 'fog', 'most': 2, 'floor': 0}");
    assert_true(json_equal(printed, answered));
    json_decref(printed);
}

/* --- the rest -------------------------------------------------------------------------------- */

static void an_item_is_shown_listed_and_withdrawn(void **state)
{
    struct service *service = *state;
    CLIENT(service, "", "show", "1911-03-09");
    assert_ended(0);
    assert_part(run.output, "A night of fog");
    assert_part(run.output, "Dense, the bell at two.");
    CLIENT(service, "", "list");
    assert_ended(0);
    assert_part(run.output, "1911-03-10");
    CLIENT(service, "", "withdraw", "1911-03-09", "1911-03-10");
    assert_ended(0);
    assert_int_equal(ask_seq(&service->peer), 5);
    CLIENT(service, "", "show", "1911-03-09");
    assert_ended(EX_DATAERR);
    assert_part(run.error, "1911-03-09");
    assert_string_equal(run.output, "");
}

static void tags_and_state_are_shown(void **state)
{
    struct service *service = *state;
    CLIENT(service, "", "tags", "list");
    assert_ended(0);
    assert_part(run.output, "supply");
    CLIENT(service, "", "tags", "list", "--order", "missing", "--most", "1");
    assert_ended(0);
    assert_part(run.output, "fog");
    CLIENT(service, "", "tags", "show", "fog");
    assert_ended(0);
    assert_part(run.output, "fog");
    CLIENT(service, "", "tags", "show", "mermaids");
    assert_ended(EX_DATAERR);
    CLIENT(service, "", "state");
    assert_ended(0);
    assert_part(run.output, "3");
}

/* --- without a daemon ------------------------------------------------------------------------ */

static void without_a_daemon_it_ends_unavailable(void **state)
{
    struct service *service = *state;
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    CLIENT(service, ENTRIES, "file");
    assert_ended(EX_UNAVAILABLE);
    assert_part(run.error, service->daemon.socket);
    assert_string_equal(run.output, "");
    CLIENT(service, "", "state");
    assert_ended(EX_UNAVAILABLE);
}

static void a_socket_left_behind_ends_unavailable(void **state)
{
    struct service *service = *state;
    undertagd_kill(&service->daemon);
    CLIENT(service, "", "state");
    assert_ended(EX_UNAVAILABLE);
    assert_part(run.error, "nothing listens");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)
#define TEST_OF_ENTRIES(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, set_up_entries, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(items_are_filed_from_standard_input),
        TEST(items_are_filed_from_files),
        TEST_OF_ENTRIES(the_same_command_again_files_the_same),
        TEST(a_refused_line_is_told_and_the_rest_goes_on),
        TEST(a_long_stream_is_filed_in_order),
        TEST(one_item_is_filed_by_options),
        TEST_OF_ENTRIES(gaps_are_shown_for_items_and_drafts),
        TEST_OF_ENTRIES(json_is_what_the_daemon_answered),
        TEST_OF_ENTRIES(an_item_is_shown_listed_and_withdrawn),
        TEST_OF_ENTRIES(tags_and_state_are_shown),
        TEST(without_a_daemon_it_ends_unavailable),
        TEST(a_socket_left_behind_ends_unavailable),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
