/* Lines for the operator, with standard error turned into a pipe. */
#include "daemon/log.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cmocka.h>

struct caught {
    int own_stderr;
    int pipe[2];
    char text[4096];
};

static int setup(void **state)
{
    static struct caught caught;
    memset(&caught, 0, sizeof caught);
    assert_int_equal(unsetenv("JOURNAL_STREAM"), 0);
    caught.own_stderr = dup(STDERR_FILENO);
    assert_true(caught.own_stderr >= 0);
    assert_int_equal(pipe(caught.pipe), 0);
    assert_int_equal(dup2(caught.pipe[1], STDERR_FILENO), STDERR_FILENO);
    *state = &caught;
    return 0;
}

static int teardown(void **state)
{
    struct caught *caught = *state;
    assert_int_equal(dup2(caught->own_stderr, STDERR_FILENO), STDERR_FILENO);
    assert_int_equal(close(caught->own_stderr), 0);
    assert_int_equal(close(caught->pipe[0]), 0);
    assert_int_equal(close(caught->pipe[1]), 0);
    return 0;
}

/* What was written so far, at most a pipe's worth. */
static const char *written(struct caught *caught)
{
    ssize_t got = read(caught->pipe[0], caught->text, sizeof caught->text - 1);
    assert_true(got > 0);
    caught->text[got] = '\0';
    return caught->text;
}

/* systemd.exec(5): JOURNAL_STREAM is the device and inode number of the journal's stream. */
static void name_journal(unsigned long long offset)
{
    struct stat status;
    char stream[64];
    assert_int_equal(fstat(STDERR_FILENO, &status), 0);
    (void)snprintf(stream, sizeof stream, "%llu:%llu", (unsigned long long)status.st_dev,
                   (unsigned long long)status.st_ino + offset);
    assert_int_equal(setenv("JOURNAL_STREAM", stream, 1), 0);
}

static void a_line_names_the_program(void **state)
{
    log_line(LOG_NOTE, "%d readers at %s", 3, "the pier");
    assert_string_equal(written(*state), "undertagd: 3 readers at the pier\n");
}

/* sd-daemon(3): a line for the journal begins with its priority in angle brackets. */
static void to_the_journal_a_line_tells_its_priority(void **state)
{
    name_journal(0);
    log_line(LOG_TROUBLE, "the disk is full");
    log_line(LOG_CAUTION, "the disk fills");
    log_line(LOG_NOTE, "ready");
    assert_string_equal(written(*state), "<3>the disk is full\n<4>the disk fills\n<6>ready\n");
}

static void another_programs_journal_is_not_ours(void **state)
{
    name_journal(1);
    log_line(LOG_NOTE, "ready");
    assert_string_equal(written(*state), "undertagd: ready\n");
}

static void a_text_from_outside_makes_no_lines_of_its_own(void **state)
{
    log_line(LOG_CAUTION, "a peer sent '%s'", "fog\n<3>all is lost\r\x1B[2J\x7F");
    assert_string_equal(written(*state), "undertagd: a peer sent 'fog <3>all is lost  [2J '\n");
}

static void an_endless_line_is_cut_and_still_ended(void **state)
{
    char long_text[5000];
    memset(long_text, 'x', sizeof long_text);
    long_text[sizeof long_text - 1] = '\0';
    log_line(LOG_NOTE, "%s", long_text);
    const char *line = written(*state);
    assert_int_equal(strlen(line), 1023);
    assert_string_equal(line + 1020, "xx\n");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_line_names_the_program),
        TEST(to_the_journal_a_line_tells_its_priority),
        TEST(another_programs_journal_is_not_ours),
        TEST(a_text_from_outside_makes_no_lines_of_its_own),
        TEST(an_endless_line_is_cut_and_still_ended),
    };
    return cmocka_run_group_tests_name("log", tests, NULL, NULL);
}
