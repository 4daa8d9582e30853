#include "tests/integration/child.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/prctl.h>
#include <sys/wait.h>
#include <unistd.h>

void child_program(const char *name, char path[CHILD_PATH_BYTES])
{
    const char *build = getenv("BUILD");
    int length = snprintf(path, CHILD_PATH_BYTES, "%s/%s", build ? build : "build", name);
    assert_in_range(length, 1, CHILD_PATH_BYTES - 1);
}

/* In the child: nothing of the test's may be used but what is async-signal-safe, and setenv. */
static void become(const char *const *argv, const char *const *environment, const int *streams)
{
    if (prctl(PR_SET_PDEATHSIG, SIGKILL) < 0) {
        _exit(127);
    }
    for (int i = 0; i < 3; i++) {
        if (dup2(streams[i], i) < 0) {
            _exit(127);
        }
    }
    for (size_t i = 0; environment && environment[i]; i++) {
        if (putenv((char *)environment[i]) != 0) {
            _exit(127);
        }
    }
    (void)execv(argv[0], (char *const *)argv);
    _exit(127); /* it returns only on failure */
}

void child_start(struct child *child, const char *const *argv, const char *const *environment,
                 int input, int output, int error)
{
    /* Each above the three, so that none is overwritten before it has been copied. */
    const int streams[3] = {input, output, error};
    int ends[2];
    for (int i = 0; i < 3; i++) {
        assert_true(streams[i] > STDERR_FILENO);
    }
    assert_int_equal(pipe2(ends, O_CLOEXEC), 0);
    pid_t pid = fork();
    assert_true(pid >= 0);
    if (pid == 0) {
        if (dup(ends[1]) < 0) { /* a copy that survives exec and closes with the process */
            _exit(127);
        }
        become(argv, environment, streams);
    }
    assert_int_equal(close(ends[1]), 0);
    *child = (struct child){.pid = pid, .lifeline = ends[0]};
}

static bool ends_within(const struct child *child, int timeout_ms)
{
    struct pollfd line = {.fd = child->lifeline, .events = POLLIN};
    return poll(&line, 1, timeout_ms) == 1;
}

bool child_has_ended(const struct child *child)
{
    return ends_within(child, 0);
}

int child_wait(struct child *child)
{
    int status = 0;
    if (!ends_within(child, PATIENCE_MS)) {
        child_signal(child, SIGKILL);
        print_error("a program did not end and was killed\n");
    }
    assert_int_equal(waitpid(child->pid, &status, 0), child->pid);
    (void)close(child->lifeline); /* nothing was read from it */
    *child = (struct child){0};
    return WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
}

void child_signal(const struct child *child, int number)
{
    assert_true(child->pid > 0);
    assert_int_equal(kill(child->pid, number), 0);
}
