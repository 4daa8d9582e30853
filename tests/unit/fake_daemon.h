/*
 * fake_daemon: a socket that answers as a test wants it to, for tests of the client alone.
 *
 * One thread serves one connection after the other. The test's handler is called there for each
 * line and writes what it likes; it must not use cmocka's assertions, and what it records may be
 * read once fake_daemon_stop has returned.
 */
#ifndef UNDERTAG_TESTS_FAKE_DAEMON_H
#define UNDERTAG_TESTS_FAKE_DAEMON_H

#include <jansson.h>
#include <pthread.h>
#include <signal.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

struct fake_daemon {
    char directory[64];
    char path[96];
    int listener;
    pthread_t thread;
    void *user;
    /* Answers one request on `out`; false closes the connection. */
    bool (*handle)(struct fake_daemon *fake, json_t *request, FILE *out);
    size_t requests; /* lines that came */
};

/* Writes {"jsonrpc":"2.0","id":ID,REST} where REST is formatted as by printf. */
__attribute__((format(printf, 3, 4))) static inline void
fake_daemon_answer(const json_t *request, FILE *out, const char *rest, ...)
{
    va_list arguments;
    (void)fprintf(out, "{\"jsonrpc\":\"2.0\",\"id\":%lld,",
                  (long long)json_integer_value(json_object_get(request, "id")));
    va_start(arguments, rest);
    (void)vfprintf(out, rest, arguments);
    va_end(arguments);
    (void)fputs("}\n", out);
}

static inline void fake_daemon_serve(struct fake_daemon *fake, int fd)
{
    char *line = NULL;
    size_t room = 0;
    int in_fd = dup(fd);
    FILE *in = fdopen(in_fd, "r");
    FILE *out = fdopen(fd, "w");
    bool going = in && out;
    while (going && getline(&line, &room, in) > 0) {
        json_t *request = json_loads(line, 0, NULL);
        fake->requests++;
        going = fake->handle(fake, request, out);
        json_decref(request);
        (void)fflush(out); /* the client may be gone: the next read tells */
    }
    free(line);
    if (in) {
        (void)fclose(in);
    }
    if (out) {
        (void)fclose(out);
    }
}

static inline void *fake_daemon_thread(void *argument)
{
    struct fake_daemon *fake = argument;
    for (;;) {
        int fd = accept(fake->listener, NULL, NULL);
        if (fd < 0) {
            return NULL; /* the listener was shut down */
        }
        fake_daemon_serve(fake, fd);
    }
}

/* Starts with `handle` and `user` set; 0 or -1. */
static inline int fake_daemon_start(struct fake_daemon *fake)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    (void)signal(SIGPIPE, SIG_IGN); /* a client may leave before the last answer is written */
    strcpy(fake->directory, "/tmp/undertag-test-XXXXXX");
    if (!mkdtemp(fake->directory)) {
        return -1;
    }
    (void)snprintf(fake->path, sizeof fake->path, "%s/socket", fake->directory);
    strcpy(address.sun_path, fake->path);
    fake->listener = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    if (fake->listener < 0 ||
        bind(fake->listener, (const struct sockaddr *)&address, sizeof address) ||
        listen(fake->listener, 8)) {
        return -1;
    }
    return pthread_create(&fake->thread, NULL, fake_daemon_thread, fake) ? -1 : 0;
}

static inline void fake_daemon_stop(struct fake_daemon *fake)
{
    (void)shutdown(fake->listener, SHUT_RDWR);
    (void)pthread_join(fake->thread, NULL);
    (void)close(fake->listener);
    (void)unlink(fake->path);
    (void)rmdir(fake->directory);
}

#endif
