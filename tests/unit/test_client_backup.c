/* undertag backup, against a daemon that has written one, or says why not. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/client_run.h"

static const char STATE[] =
    "{\"version\":\"0\",\"format\":3,\"uptime_s\":1,\"seq\":1,\"learned\":1,"
    "\"backlog\":0,\"backup\":{\"name\":\"monday\",\"bytes\":1200000,"
    "\"of\":5400000,\"since\":\"2026-12-02T10:15:00Z\"}}";

static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    (void)fixture;
    const char *method = json_string_value(json_object_get(request, "method"));
    if (strcmp(method, "daemon.state") == 0) {
        fake_daemon_answer(request, out, "\"result\":%s", STATE);
        return;
    }
    fake_daemon_answer(request, out,
                       "\"result\":{\"name\":\"monday\",\"path\":\"/srv/out/monday\",\"seq\":3000,"
                       "\"learned\":2990,\"bytes\":5341662,\"seconds\":2.5}");
}

static int set_up(void **state)
{
    return client_run_start(state, answer);
}

static void it_says_where_it_is_and_what_it_holds(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "backup", NULL), 0);
    assert_string_equal(fixture->out, "backup        /srv/out/monday\n"
                                      "holds         all up to change 3,000, learned up to 2,990\n"
                                      "size          5.3 MB, written in 3 s\n");
    assert_string_equal(fixture->err, ""); /* no progress line where there is no terminal */
    assert_string_equal(asked(fixture), "backup.write {}\n");
}

static void name_and_rate_are_passed_on(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "backup", "monday", "--rate", "2000000", NULL), 0);
    assert_string_equal(asked(fixture), "backup.write {\"name\":\"monday\",\"rate\":2000000}\n");
    assert_int_equal(run(fixture, "", "backup", "monday", "--rate", "1000", NULL), 64);
    assert_int_equal(run(fixture, "", "backup", "monday", "tuesday", NULL), 64);
}

static void a_path_is_told_from_the_root_on(void **state)
{
    struct fixture *fixture = *state;
    char here[4096];
    char expected[8192];
    assert_non_null(getcwd(here, sizeof here));
    assert_int_equal(run(fixture, "", "backup", "out/monday", NULL), 0);
    (void)snprintf(expected, sizeof expected, "backup.write {\"name\":\"%s/out/monday\"}\n", here);
    assert_string_equal(asked(fixture), expected);
}

static void a_path_from_the_root_on_is_told_as_it_is(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "backup", "/srv/out/monday", NULL), 0);
    assert_string_equal(asked(fixture), "backup.write {\"name\":\"/srv/out/monday\"}\n");
}

static void one_that_is_refused_ends_in_75_and_says_why(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32005,\"message\":\"A backup is being written already.\"}";
    assert_int_equal(run(fixture, "", "backup", NULL), 75);
    assert_string_equal(fixture->err, "undertag: A backup is being written already\n");
}

static void json_is_the_answer(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "--json", "backup", NULL), 0);
    assert_non_null(strstr(fixture->out, "\"path\":\"/srv/out/monday\""));
}

static void the_state_shows_how_far_it_is(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "state", NULL), 0);
    assert_non_null(
        strstr(fixture->out, "backup                    monday, 1.2 MB of 5.4 MB written\n"));
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(it_says_where_it_is_and_what_it_holds),
        TEST(name_and_rate_are_passed_on),
        TEST(a_path_is_told_from_the_root_on),
        TEST(a_path_from_the_root_on_is_told_as_it_is),
        TEST(one_that_is_refused_ends_in_75_and_says_why),
        TEST(json_is_the_answer),
        TEST(the_state_shows_how_far_it_is),
    };
    return cmocka_run_group_tests_name("undertag backup", tests, NULL, NULL);
}
