/* undertag rebuild, against a daemon that says how far it is. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/client_run.h"

static const char RUNNING[] =
    "{\"learned\":3000,\"settings\":{\"loss\":\"squared_hinge\",\"step\":0},"
    "\"rebuild\":{\"seq\":3000,\"learned\":1200,\"of\":3010,"
    "\"settings\":{\"loss\":\"hinge\",\"step\":0.2}},\"rebuilt\":null}";

static const char TAKEN[] =
    "{\"learned\":3012,\"rebuild\":null,\"rebuilt\":{\"seq\":3000,\"failure\":null}}";

static const char FAILED[] =
    "{\"learned\":3012,\"rebuild\":null,\"rebuilt\":{\"seq\":3000,\"failure\":\"no oil\"}}";

/* Runs for two questions, and then is what the test says. */
static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    const char *method = json_string_value(json_object_get(request, "method"));
    if (strcmp(method, "daemon.rebuild") == 0) {
        fake_daemon_answer(request, out, "\"result\":{\"seq\":3000}");
    } else {
        bool runs = fixture->fake.requests < 4;
        fake_daemon_answer(request, out, "\"result\":%s", runs ? RUNNING : fixture->result);
    }
}

static int set_up(void **state)
{
    int result = client_run_start(state, answer);
    if (result == 0) {
        ((struct fixture *)*state)->result = TAKEN;
    }
    return result;
}

static void it_begins_and_does_not_wait(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "rebuild", NULL), 0);
    assert_string_equal(fixture->out, "rebuilding    from 3,000 changes\n");
    assert_string_equal(asked(fixture), "daemon.rebuild {\"settings\":{}}\n");
}

static void settings_are_passed_on_as_they_are(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "rebuild", "--set", "loss=hinge", "--set=step=0.2", NULL), 0);
    assert_string_equal(asked(fixture),
                        "daemon.rebuild {\"settings\":{\"loss\":\"hinge\",\"step\":\"0.2\"}}\n");
}

static void a_setting_without_a_value_or_given_twice_ends_in_64(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "rebuild", "--set", "loss", NULL), 64);
    assert_string_equal(fixture->err, "undertag: --set takes NAME=VALUE, not 'loss'\n");
    assert_int_equal(run(fixture, "", "rebuild", "--set", "=hinge", NULL), 64);
    assert_int_equal(run(fixture, "", "rebuild", "--set", "step=1", "--set", "step=2", NULL), 64);
    assert_string_equal(fixture->err, "undertag: --set gives step twice\n");
    assert_string_equal(asked(fixture), "");
}

static void it_waits_until_the_model_is_in_use(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "rebuild", "--wait", NULL), 0);
    assert_string_equal(fixture->out, "rebuilding    from 3,000 changes\n"
                                      "in use        the new model, learned up to change 3,012\n");
    assert_string_equal(fixture->err, ""); /* no progress line where there is no terminal */
    assert_string_equal(asked(fixture), "daemon.rebuild {\"settings\":{}}\ndaemon.state {}\n"
                                        "daemon.state {}\ndaemon.state {}\n");
}

static void one_that_fails_ends_in_75_and_says_why(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = FAILED;
    assert_int_equal(run(fixture, "", "rebuild", "--wait", NULL), 75);
    assert_string_equal(fixture->err, "undertag: no oil\n");
}

static void one_of_which_nothing_is_told_ends_in_75(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"learned\":1,\"rebuild\":null,\"rebuilt\":null}"; /* it was restarted */
    assert_int_equal(run(fixture, "", "rebuild", "--wait", NULL), 75);
}

static void one_that_is_refused_ends_in_75(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32005,\"message\":\"A rebuild is under way already.\"}";
    assert_int_equal(run(fixture, "", "rebuild", NULL), 75);
    assert_string_equal(fixture->err, "undertag: A rebuild is under way already\n");
}

static void json_is_the_answer_also_with_a_wait(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "--json", "rebuild", "--wait", NULL), 0);
    assert_string_equal(fixture->out, "{\"seq\":3000}\n");
}

static void the_state_shows_how_far_it_is_and_what_differs(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "state", NULL), 0);
    assert_non_null(strstr(fixture->out, "rebuild                   learned 1,200 of 3,010 "
                                         "changes, with loss hinge, step 0.2\n"));
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(it_begins_and_does_not_wait),
        TEST(settings_are_passed_on_as_they_are),
        TEST(a_setting_without_a_value_or_given_twice_ends_in_64),
        TEST(it_waits_until_the_model_is_in_use),
        TEST(one_that_fails_ends_in_75_and_says_why),
        TEST(one_of_which_nothing_is_told_ends_in_75),
        TEST(one_that_is_refused_ends_in_75),
        TEST(json_is_the_answer_also_with_a_wait),
        TEST(the_state_shows_how_far_it_is_and_what_differs),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
