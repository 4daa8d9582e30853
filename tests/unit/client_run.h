/*
 * client_run: the whole program, as a person or a script runs it, against a small daemon in a
 * thread that answers as the test says.
 */
#ifndef UNDERTAG_TESTS_CLIENT_RUN_H
#define UNDERTAG_TESTS_CLIENT_RUN_H

#include <errno.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cmocka.h>

#include "tests/unit/fake_daemon.h"

enum {
    ARGUMENTS_MOST = 16
};

struct fixture {
    struct fake_daemon fake;
    char program[4096];
    char asked[4096]; /* the requests that came, as METHOD PARAMS a line */
    /* Answers a request; runs in the daemon's thread. */
    void (*answer)(struct fixture *fixture, const json_t *request, FILE *out);
    const char *error;  /* what every request is answered with; NULL: as `answer` does */
    const char *result; /* for tests that give one */
    /* of the last run */
    char out[32768];
    char err[4096];
};

static inline bool handle(struct fake_daemon *fake, json_t *request, FILE *out)
{
    struct fixture *fixture = fake->user;
    size_t used = strlen(fixture->asked);
    char *params = json_dumps(json_object_get(request, "params"), JSON_COMPACT);
    (void)snprintf(fixture->asked + used, sizeof fixture->asked - used, "%s %s\n",
                   json_string_value(json_object_get(request, "method")), params);
    free(params);
    const json_t *id = json_object_get(json_object_get(request, "params"), "id");
    if (id && strcmp(json_string_value(id), "last") == 0) {
        return false;
    }
    if (fixture->error) {
        fake_daemon_answer(request, out, "\"error\":%s", fixture->error);
    } else {
        fixture->answer(fixture, request, out);
    }
    return true;
}

static inline int client_run_start(void **state, void (*answer)(struct fixture *fixture,
                                                                const json_t *request, FILE *out))
{
    static struct fixture fixture;
    const char *build = getenv("BUILD");
    fixture = (struct fixture){.fake = {.handle = handle, .user = &fixture}, .answer = answer};
    (void)snprintf(fixture.program, sizeof fixture.program, "%s/undertag", build ? build : "build");
    *state = &fixture;
    if (access(fixture.program, X_OK)) {
        print_error("%s is not there: make it first, or name its folder by BUILD\n",
                    fixture.program);
        return -1;
    }
    if (fake_daemon_start(&fixture.fake)) {
        return -1;
    }
    return setenv("LC_ALL", "C.UTF-8", 1) || setenv("UNDERTAG_SOCKET", fixture.fake.path, 1) ? -1
                                                                                             : 0;
}

static inline int tear_down(void **state)
{
    struct fixture *fixture = *state;
    if (fixture->fake.listener >= 0) {
        fake_daemon_stop(&fixture->fake);
    }
    return unsetenv("UNDERTAG_SOCKET");
}

/* The requests that came; ends the daemon, so that they may be read. */
static inline const char *asked(struct fixture *fixture)
{
    if (fixture->fake.listener >= 0) {
        fake_daemon_stop(&fixture->fake);
        fixture->fake.listener = -1;
    }
    return fixture->asked;
}

static inline void read_back(FILE *file, char *text, size_t size)
{
    rewind(file);
    size_t length = fread(text, 1, size - 1, file);
    text[length] = '\0';
    assert_int_equal(fclose(file), 0);
}

/* Runs in the child: never returns. */
static inline void become(const struct fixture *fixture, char **arguments, int in, int out, int err)
{
    if (dup2(in, STDIN_FILENO) < 0 || dup2(out, STDOUT_FILENO) < 0 ||
        dup2(err, STDERR_FILENO) < 0) {
        _exit(126);
    }
    (void)execv(fixture->program, arguments);
    _exit(127);
}

/*
 * Runs undertag with the words that follow, ended by NULL, and `input` (length bytes) on its
 * standard input; out_fd -1: its output is kept in fixture->out. Returns its exit code.
 */
static inline int run_to(struct fixture *fixture, int out_fd, const char *input, va_list words)
{
    char *arguments[ARGUMENTS_MOST] = {fixture->program};
    size_t count = 1;
    for (char *word = va_arg(words, char *); word; word = va_arg(words, char *)) {
        assert_true(count + 1 < ARGUMENTS_MOST);
        arguments[count++] = word;
    }
    FILE *in = tmpfile();
    FILE *out = tmpfile();
    FILE *err = tmpfile();
    assert_true(in && out && err);
    assert_true(fputs(input, in) >= 0);
    assert_int_equal(fflush(in), 0);
    rewind(in);
    pid_t child = fork();
    if (child == 0) {
        become(fixture, arguments, fileno(in), out_fd >= 0 ? out_fd : fileno(out), fileno(err));
    }
    assert_true(child > 0);
    int status = 0;
    while (waitpid(child, &status, 0) < 0) {
        assert_int_equal(errno, EINTR);
    }
    assert_true(WIFEXITED(status)); /* no signal, SIGPIPE least of all */
    read_back(out, fixture->out, sizeof fixture->out);
    read_back(err, fixture->err, sizeof fixture->err);
    assert_int_equal(fclose(in), 0);
    return WEXITSTATUS(status);
}

static inline int run(struct fixture *fixture, const char *input, ...)
{
    va_list words;
    va_start(words, input);
    int code = run_to(fixture, -1, input, words);
    va_end(words);
    return code;
}

static inline int run_into(struct fixture *fixture, int out_fd, ...)
{
    va_list words;
    va_start(words, out_fd);
    int code = run_to(fixture, out_fd, "", words);
    va_end(words);
    return code;
}

#endif
