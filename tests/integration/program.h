/*
 * program: runs one of the two programs to its end, with what it reads, and what it says.
 */
#ifndef UNDERTAG_TESTS_PROGRAM_H
#define UNDERTAG_TESTS_PROGRAM_H

#include <stddef.h>

enum {
    PROGRAM_TEXT_BYTES = 64 * 1024
};

struct program_run {
    int exit_code;
    char output[PROGRAM_TEXT_BYTES]; /* standard output */
    char error[PROGRAM_TEXT_BYTES];  /* standard error */
};

/*
 * Runs build/NAME with these arguments, ended by NULL, and `input` on standard input. *ret_run is
 * the caller's; what does not fit there fails the test.
 */
void program_run(const char *name, const char *const *arguments, const char *input,
                 struct program_run *ret_run);

/* What else may differ. */
struct program_way {
    const char *const *environment; /* entries NAME=VALUE ended by NULL; NULL: none */
    int output;                     /* in the place of standard output, borrowed; 0: it is kept */
};

/* Likewise, but that a program may also end by a signal: then exit_code is 128 and its number. */
void program_run_by(const struct program_way *way, const char *name, const char *const *arguments,
                    const char *input, struct program_run *ret_run);

#endif
