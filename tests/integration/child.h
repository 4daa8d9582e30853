/*
 * child: a program that a test has started. It dies with the test, whatever becomes of that.
 */
#ifndef UNDERTAG_TESTS_CHILD_H
#define UNDERTAG_TESTS_CHILD_H

#include <stdbool.h>
#include <sys/types.h>

enum {
    PATIENCE_MS = 60000, /* after which a test fails that waits for something */
    CHILD_PATH_BYTES = 512
};

struct child {
    pid_t pid;    /* 0: there is none */
    int lifeline; /* becomes readable when the child has ended */
};

/* The path of one of the two programs, in the folder that the environment variable BUILD names. */
void child_program(const char *name, char path[CHILD_PATH_BYTES]);

/*
 * Starts argv[0] with the three descriptors as its own, and with `environment`, entries of the form
 * NAME=VALUE ended by NULL, beside what is inherited. Fails the test where it cannot.
 */
void child_start(struct child *child, const char *const *argv, const char *const *environment,
                 int input, int output, int error);

bool child_has_ended(const struct child *child);

/* Waits for the end and reaps it; its exit code, or 128 and the signal that ended it. */
int child_wait(struct child *child);

void child_signal(const struct child *child, int number);

#endif
