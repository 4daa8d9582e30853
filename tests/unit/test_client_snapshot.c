/* undertag snapshot write and list, against a daemon that answers as the test says. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/client_run.h"

static const char WRITTEN[] = "{\"name\":\"20310504T100000Z-300\",\"path\":\"/var/lib/undertag/"
                              "exports/20310504T100000Z-300\",\"seq\":1300,\"bytes\":1234567,"
                              "\"seconds\":0.42}";

static const char LISTED[] =
    "{\"snapshots\":["
    "{\"name\":\"spring\",\"path\":\"/srv/logs/spring\",\"seq\":7,\"at\":\"2031-05-04T10:00:00Z\","
    "\"bytes\":900,\"named\":true,\"latest\":false},"
    "{\"name\":\"20310505T100000Z-1300\",\"path\":\"/srv/logs/20310505T100000Z-1300\",\"seq\":1300,"
    "\"at\":\"2031-05-05T10:00:00Z\",\"bytes\":1234567,\"named\":false,\"latest\":true}]}";

static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    fake_daemon_answer(request, out, "\"result\":%s", fixture->result);
}

static int set_up(void **state)
{
    int result = client_run_start(state, answer);
    if (result == 0) {
        ((struct fixture *)*state)->result = WRITTEN;
    }
    return result;
}

static void what_was_written_is_shown(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "snapshot", "write", NULL), 0);
    assert_string_equal(fixture->out,
                        "snapshot      20310504T100000Z-300\n"
                        "of change     1,300\n"
                        "size          1.2 MB, written in 0.4 s\n"
                        "folder        /var/lib/undertag/exports/20310504T100000Z-300\n");
    assert_string_equal(fixture->err, ""); /* no progress line where there is no terminal */
}

static void what_is_not_given_is_left_to_the_daemon(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "snapshot", "write", NULL), 0);
    assert_string_equal(asked(fixture), "snapshot.write {}\n");
}

static void all_options_are_passed_on(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "snapshot", "write", "--name", "spring", "--items",
                         "--no-proposals", "--floor", "0.5", "--rate", "2MiB", NULL),
                     0);
    assert_string_equal(asked(fixture), "snapshot.write {\"name\":\"spring\",\"items\":true,"
                                        "\"proposals\":false,\"floor\":0.5,\"rate\":2097152}\n");
}

static void a_rate_below_1_mib_ends_in_64_before_anything_is_asked(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "snapshot", "write", "--rate", "512KiB", NULL), 64);
    assert_string_equal(asked(fixture), "");
}

static void one_that_is_refused_ends_in_75_with_the_daemon_s_sentence(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32005,\"message\":\"The oil store is full.\"}";
    assert_int_equal(run(fixture, "", "snapshot", "write", NULL), 75);
    assert_string_equal(fixture->err, "undertag: The oil store is full\n");
    assert_string_equal(fixture->out, "");
}

static void an_answer_with_a_hole_in_it_is_not_shown(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"name\":\"spring\"}";
    assert_int_equal(run(fixture, "", "snapshot", "write", NULL), 76);
    assert_string_equal(fixture->out, "");
}

static void json_is_the_answer_as_it_came(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "--json", "snapshot", "write", NULL), 0);
    assert_memory_equal(fixture->out, WRITTEN, sizeof WRITTEN - 1);
    assert_string_equal(fixture->out + sizeof WRITTEN - 1, "\n");
}

static void the_list_says_which_is_the_latest_and_which_stay(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = LISTED;
    assert_int_equal(run(fixture, "", "snapshot", "list", NULL), 0);
    assert_string_equal(
        fixture->out,
        "name                   change       size  written\n"
        "spring                      7  900 bytes  2031-05-04T10:00:00Z  named, stays\n"
        "20310505T100000Z-1300   1,300     1.2 MB  2031-05-05T10:00:00Z  latest\n"
        "\n"
        "They are in /srv/logs.\n");
    assert_string_equal(asked(fixture), "snapshot.list {}\n");
}

static void no_snapshots_are_a_sentence(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"snapshots\":[]}";
    assert_int_equal(run(fixture, "", "snapshot", "list", NULL), 0);
    assert_string_equal(fixture->out, "There are no snapshots yet.\n");
}

static void the_family_alone_names_its_commands(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "snapshot", NULL), 64);
    assert_string_equal(fixture->err, "undertag: 'snapshot' alone is no command; there are "
                                      "'snapshot write', 'snapshot list'\n");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_was_written_is_shown),
        TEST(what_is_not_given_is_left_to_the_daemon),
        TEST(all_options_are_passed_on),
        TEST(a_rate_below_1_mib_ends_in_64_before_anything_is_asked),
        TEST(one_that_is_refused_ends_in_75_with_the_daemon_s_sentence),
        TEST(an_answer_with_a_hole_in_it_is_not_shown),
        TEST(json_is_the_answer_as_it_came),
        TEST(the_list_says_which_is_the_latest_and_which_stay),
        TEST(no_snapshots_are_a_sentence),
        TEST(the_family_alone_names_its_commands),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
