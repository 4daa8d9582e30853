/*
 * every_command: each command of the client, played once against a real daemon with a small
 * invented logbook, so that it can be played again against a stand-in that gives the same answers
 * (tests/integration/stand_in.h), whole or spoiled. What it prints then is known to the byte.
 */
#ifndef UNDERTAG_TESTS_EVERY_COMMAND_H
#define UNDERTAG_TESTS_EVERY_COMMAND_H

#include "tests/integration/program.h"
#include "tests/integration/stand_in.h"
#include "tests/integration/undertagd.h"

enum {
    PLAYED_ARGUMENTS = 24,
    PLAYED_COMMANDS = 64
};

/* A command as somebody types it. An argument that begins with @ is a file in the test's folder. */
struct played_command {
    const char *input;                       /* on standard input */
    const char *arguments[PLAYED_ARGUMENTS]; /* NULL behind the last */
};

/* One of them, and how it went. */
struct played {
    const struct played_command *command;
    struct rehearsal rehearsal;
    char *output; /* what it printed */
};

struct every_command {
    struct undertagd daemon;
    struct stand_in stand_in;
    char stand_in_path[UNDERTAGD_PATH_BYTES];
    char page[UNDERTAGD_PATH_BYTES]; /* what `report` writes */
    struct played played[PLAYED_COMMANDS];
    size_t count;
};

/* cmocka's group set-up and tear-down: all have been played, and the daemon is stopped. */
int every_command_set_up(void **state);
int every_command_tear_down(void **state);

/* A name for sentences about it, as it was typed. */
const char *played_name(const struct played *played);

/* Plays one again with what the stand-in does now; `way` may be NULL. */
void every_command_run(const struct every_command *all, const struct played *played,
                       const struct program_way *way, struct program_run *ret_run);

/* Fails the test, with all that is known, unless it ended with a code of sysexits.h and a sentence
 * of its own on standard error. */
void assert_ended_with_a_sentence(const struct played *played, const struct program_run *run);

#endif
