/*
 * undertagd: the real daemon, as a child of the test, with a home and a socket in a folder of its
 * own that goes with it.
 */
#ifndef UNDERTAG_TESTS_UNDERTAGD_H
#define UNDERTAG_TESTS_UNDERTAGD_H

#include <stdbool.h>
#include <stddef.h>

#include "tests/integration/child.h"

enum {
    UNDERTAGD_FOLDER_BYTES = 64, /* short, since a socket's path may have 107 bytes */
    UNDERTAGD_PATH_BYTES = 96,
    UNDERTAGD_SETTINGS = 8
};

struct undertagd {
    char folder[UNDERTAGD_FOLDER_BYTES];
    char home[UNDERTAGD_PATH_BYTES];
    char socket[UNDERTAGD_PATH_BYTES];
    char log[UNDERTAGD_PATH_BYTES];           /* its standard error, of all its runs */
    const char *settings[UNDERTAGD_SETTINGS]; /* "name=value" for --set, NULL behind the last */
    const char *config;                       /* for --config; NULL: none */
    struct child child;
};

/* Whether it is built with a sanitizer, as this is: then it takes more memory, and must not have
 * anything preloaded. */
bool undertagd_is_sanitized(void);

/* Whether it runs under valgrind, some thirty times slower (see `wrap`). */
bool undertagd_is_slowed(void);

/* Makes the folder; nothing runs yet. */
void undertagd_make(struct undertagd *daemon);

/* Starts it on its home and waits until it says that it is ready. */
void undertagd_start(struct undertagd *daemon);

/* kill -9. */
void undertagd_kill(struct undertagd *daemon);

/* SIGTERM; returns the exit code. */
int undertagd_stop(struct undertagd *daemon);

/* Whether a line of what it logged so far holds the part. */
bool undertagd_said(const struct undertagd *daemon, const char *part);

/* Waits until it has said so. */
void undertagd_wait_for(const struct undertagd *daemon, const char *part);

/*
 * Stops the daemon, if it runs, and removes the folder. -1, with what it logged, where it had ended
 * by itself, ended badly, or where a sanitizer or valgrind had something to say.
 */
int undertagd_remove(struct undertagd *daemon);

/* A path in the folder. */
void undertagd_path(const struct undertagd *daemon, const char *name,
                    char path[UNDERTAGD_PATH_BYTES]);

/* Writes a file into the folder. */
void undertagd_write(const struct undertagd *daemon, const char *name, const char *text);

#endif
