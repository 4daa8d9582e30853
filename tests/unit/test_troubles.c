/* What is wrong right now, for whoever asks, and once for the log. */
#include "daemon/troubles.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

struct fixture {
    struct troubles troubles;
    FILE *log; /* in place of standard error while it is open */
    int error_fd;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){.log = tmpfile(), .error_fd = dup(STDERR_FILENO)};
    *state = &fixture;
    return fixture.log && troubles_init(&fixture.troubles) == 0 &&
                   dup2(fileno(fixture.log), STDERR_FILENO) >= 0
               ? 0
               : -1;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    troubles_deinit(&fixture->troubles);
    (void)dup2(fixture->error_fd, STDERR_FILENO);
    return fclose(fixture->log) | close(fixture->error_fd);
}

static void assert_trouble(struct fixture *fixture, enum trouble trouble, const char *expected)
{
    char sentence[TROUBLE_BYTES];
    troubles_read(&fixture->troubles, trouble, sentence);
    assert_string_equal(sentence, expected);
}

/* How many lines the log has, and how many of them hold `part`. */
static void assert_logged(struct fixture *fixture, int lines, int with_part, const char *part)
{
    char line[1024];
    rewind(fixture->log);
    while (fgets(line, sizeof line, fixture->log)) {
        lines--;
        with_part -= strstr(line, part) != NULL;
    }
    assert_int_equal(lines, 0);
    assert_int_equal(with_part, 0);
}

static void at_first_there_is_no_trouble(void **state)
{
    for (int kind = 0; kind < TROUBLE_KINDS; kind++) {
        assert_trouble(*state, (enum trouble)kind, "");
    }
}

static void a_trouble_lasts_until_it_is_over(void **state)
{
    struct fixture *fixture = *state;
    troubles_begin(&fixture->troubles, TROUBLE_STORING, "changes cannot be stored (%s)", "full");
    assert_trouble(fixture, TROUBLE_STORING, "changes cannot be stored (full)");
    assert_trouble(fixture, TROUBLE_KEEPING, "");
    troubles_end(&fixture->troubles, TROUBLE_STORING);
    assert_trouble(fixture, TROUBLE_STORING, "");
}

static void it_is_logged_when_it_begins_and_when_it_is_over(void **state)
{
    struct fixture *fixture = *state;
    troubles_begin(&fixture->troubles, TROUBLE_STORING, "no room");
    assert_logged(fixture, 1, 1, "no room");
    troubles_end(&fixture->troubles, TROUBLE_STORING);
    assert_logged(fixture, 2, 1, "over: no room");
}

static void meeting_it_again_is_not_logged_but_told_as_it_is_now(void **state)
{
    struct fixture *fixture = *state;
    for (int i = 1; i <= 1000; i++) {
        troubles_begin(&fixture->troubles, TROUBLE_STORING, "no room, try %d", i);
    }
    assert_logged(fixture, 1, 1, "no room, try 1\n");
    assert_trouble(fixture, TROUBLE_STORING, "no room, try 1000");
}

static void what_was_no_trouble_is_not_over(void **state)
{
    struct fixture *fixture = *state;
    troubles_end(&fixture->troubles, TROUBLE_LEARNING);
    assert_logged(fixture, 0, 0, "");
}

static void a_trouble_that_comes_back_is_logged_again(void **state)
{
    struct fixture *fixture = *state;
    for (int i = 0; i < 2; i++) {
        troubles_begin(&fixture->troubles, TROUBLE_ERASING, "not erased");
        troubles_end(&fixture->troubles, TROUBLE_ERASING);
    }
    assert_logged(fixture, 4, 2, "over: ");
}

static void a_long_sentence_is_cut(void **state)
{
    struct fixture *fixture = *state;
    char sentence[TROUBLE_BYTES];
    troubles_begin(&fixture->troubles, TROUBLE_KEEPING, "%0600d", 1);
    troubles_read(&fixture->troubles, TROUBLE_KEEPING, sentence);
    assert_int_equal(strlen(sentence), TROUBLE_BYTES - 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(at_first_there_is_no_trouble),
        TEST(a_trouble_lasts_until_it_is_over),
        TEST(it_is_logged_when_it_begins_and_when_it_is_over),
        TEST(meeting_it_again_is_not_logged_but_told_as_it_is_now),
        TEST(what_was_no_trouble_is_not_over),
        TEST(a_trouble_that_comes_back_is_logged_again),
        TEST(a_long_sentence_is_cut),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
