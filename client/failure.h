/*
 * failure: why a command cannot go on: the code it ends with and one sentence for people.
 *
 * A failure is filled once, where it is found; the first one wins. Functions that take one return
 * its code: 0 or one of the negative codes below, whose absolute value is the exit code.
 */
#ifndef UNDERTAG_CLIENT_FAILURE_H
#define UNDERTAG_CLIENT_FAILURE_H

#include <sysexits.h>

/* X(name, exit code of sysexits.h, what the code is for, as --help lists it) */
#define FAILURE_CODES(X)                                                                           \
    X(FAILURE_USAGE, EX_USAGE, "the command line is wrong")                                        \
    X(FAILURE_DATA, EX_DATAERR, "bad data, or no such item or tag")                                \
    X(FAILURE_UNREACHABLE, EX_UNAVAILABLE, "the daemon cannot be reached, or went away")           \
    X(FAILURE_INTERNAL, EX_SOFTWARE, "an internal error of the daemon")                            \
    X(FAILURE_MEMORY, EX_OSERR, "no memory")                                                       \
    X(FAILURE_IO, EX_IOERR, "a file cannot be read, or the output not written")                    \
    X(FAILURE_AGAIN, EX_TEMPFAIL, "try again later")                                               \
    X(FAILURE_PROTOCOL, EX_PROTOCOL, "the answer is not one this client knows")                    \
    X(FAILURE_FORBIDDEN, EX_NOPERM, "not allowed")                                                 \
    X(FAILURE_SETTINGS, EX_CONFIG, "the configuration is wrong")

enum failure_code {
#define FAILURE_ENUM(name, exit_code, sentence) name = -(exit_code),
    FAILURE_CODES(FAILURE_ENUM)
#undef FAILURE_ENUM
};

enum {
    FAILURE_MESSAGE_BYTES = 1024
};

struct failure {
    int code;                            /* 0 while there is none */
    char message[FAILURE_MESSAGE_BYTES]; /* no line end; may hold text from outside: clean it */
};

/* Fills the failure unless it holds one already; returns the code it holds afterwards. */
int failure_set(struct failure *failure, enum failure_code code, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* The failure for lack of memory. */
int failure_memory(struct failure *failure);

#endif
