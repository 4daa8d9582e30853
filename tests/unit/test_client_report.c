/*
 * The report as a person asks for it: where it is written, and that it is there whole or not at
 * all.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/unit/client_run.h"

#define X "{\"share\":0.5,\"low\":0.4,\"high\":0.6,\"given\":4,\"missing\":4,\"from\":\"both\"}"

/* What the report asks for, and the answers; two pages of tags. */
static const char *const ANSWERS[][2] = {
    {"daemon.state", "{\"version\":\"9.1\",\"items\":7,\"tags\":3,\"words\":9,\"weights\":9,"
                     "\"seq\":8,\"learned\":8}"},
    {"desk.completeness", "{\"overall\":" X ",\"bands\":{\"head\":" X ",\"torso\":" X ",\"tail\":" X
                          "},\"tags\":[],\"checks\":{\"random\":1,\"picked\":0}}"},
    {"desk.standing", "{\"items\":7,\"bands\":{\"all\":{\"with\":{},\"without\":null,\"gain\":null}"
                      "},\"reliability\":[],\"history\":[]}"},
    {"desk.worklist", "{\"items\":[],\"next\":null}"},
};

/* `fixture->result`, where it is given, is the answer to desk.worklist. */
static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    const char *method = json_string_value(json_object_get(request, "method"));
    const json_t *after = json_object_get(json_object_get(request, "params"), "after");
    for (size_t i = 0; i < sizeof ANSWERS / sizeof ANSWERS[0]; i++) {
        if (strcmp(method, ANSWERS[i][0]) == 0) {
            const char *result = i == 3 && fixture->result ? fixture->result : ANSWERS[i][1];
            fake_daemon_answer(request, out, "\"result\":%s", result);
            return;
        }
    }
    fake_daemon_answer(request, out,
                       "\"result\":{\"tags\":[{\"tag\":\"%s\",\"count\":%d,\"p\":0.5,"
                       "\"missing\":1,\"state\":\"%s\"}]%s}",
                       after ? "oil" : "fog", after ? 3 : 5, after ? "retired" : "open",
                       after ? "" : ",\"next\":\"5 fog\"");
}

static int set_up(void **state)
{
    return client_run_start(state, answer);
}

/* A path in the fixture's folder, beside the socket. */
static char *page_path(const struct fixture *fixture)
{
    static char path[128];
    (void)snprintf(path, sizeof path, "%s/page.html", fixture->fake.directory);
    return path;
}

static void the_report_asks_for_all_it_needs_and_every_tag(void **state)
{
    struct fixture *fixture = *state;
    char *path = page_path(fixture);
    assert_int_equal(run(fixture, "", "report", path, NULL), 0);
    assert_non_null(strstr(fixture->out, "/page.html: written, "));
    assert_int_equal(unlink(path), 0);
    assert_string_equal(
        asked(fixture),
        "daemon.state {}\ndesk.completeness {\"most\":20}\ndesk.standing {}\n"
        "desk.worklist {\"most\":20}\ntag.list {\"most\":5000,\"order\":\"count\"}\n"
        "tag.list {\"most\":5000,\"order\":\"count\",\"after\":\"5 fog\"}\n");
}

static void retired_tags_are_not_among_those_in_use(void **state)
{
    struct fixture *fixture = *state;
    char *path = page_path(fixture);
    assert_int_equal(run(fixture, "", "report", path, NULL), 0);
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    read_back(file, fixture->out, sizeof fixture->out);
    assert_int_equal(unlink(path), 0);
    assert_non_null(strstr(fixture->out, "Tags in use: 1. Given fewer than 30 times: 1,"));
    assert_non_null(strstr(fixture->out, "</html>\n"));
}

static void without_the_folder_nothing_is_asked(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "report", "/tmp/undertag-none/page.html", NULL), 74);
    assert_string_equal(fixture->err, "undertag: /tmp/undertag-none/page.html cannot be written: "
                                      "there is no folder /tmp/undertag-none\n");
    assert_string_equal(asked(fixture), "");
}

static void an_answer_with_a_hole_in_it_gives_no_page(void **state)
{
    struct fixture *fixture = *state;
    char *path = page_path(fixture);
    fixture->result = "{\"items\":[{\"id\":\"log/7\"}]}";
    assert_int_equal(run(fixture, "", "report", path, NULL), 76);
    assert_non_null(strstr(fixture->err, "/items/0/gaps is not a list"));
    assert_int_not_equal(access(path, F_OK), 0);
}

static void an_error_of_the_daemon_gives_no_page(void **state)
{
    struct fixture *fixture = *state;
    char *path = page_path(fixture);
    fixture->error = "{\"code\":-32601,\"message\":\"There is no method 'desk.standing'.\"}";
    assert_int_not_equal(run(fixture, "", "report", path, NULL), 0);
    assert_int_not_equal(access(path, F_OK), 0);
}

static void with_json_the_answers_behind_the_page_are_printed(void **state)
{
    struct fixture *fixture = *state;
    char *path = page_path(fixture);
    assert_int_equal(run(fixture, "", "--json", "report", path, NULL), 0);
    assert_int_equal(unlink(path), 0);
    const char *line = fixture->out;
    for (size_t i = 0; i < sizeof ANSWERS / sizeof ANSWERS[0]; i++) {
        size_t length = strlen(ANSWERS[i][1]);
        assert_memory_equal(line, ANSWERS[i][1], length);
        line += length + 1;
    }
    assert_null(strstr(fixture->out, "written"));
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_report_asks_for_all_it_needs_and_every_tag),
        TEST(retired_tags_are_not_among_those_in_use),
        TEST(without_the_folder_nothing_is_asked),
        TEST(an_answer_with_a_hole_in_it_gives_no_page),
        TEST(an_error_of_the_daemon_gives_no_page),
        TEST(with_json_the_answers_behind_the_page_are_printed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
