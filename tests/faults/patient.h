/*
 * patient: a daemon that something is done to: undertagd with the shim (fail_nth) preloaded, and
 * without. Other than the helpers of tests/integration it takes it that the daemon may not start,
 * may end, or may close a connection without an answer: what is right and what is wrong of that,
 * the tests say.
 */
#ifndef UNDERTAG_TESTS_PATIENT_H
#define UNDERTAG_TESTS_PATIENT_H

#include <jansson.h>
#include <stdbool.h>

#include "tests/faults/fail_control.h"
#include "tests/integration/undertagd.h"

enum {
    DEADLINE_MS = 20000, /* after which something hangs */
    PATIENT_HANGS = -1   /* as an exit code: it was killed for it */
};

struct patient {
    struct undertagd daemon; /* folder, home, settings; started by patient_start alone */
    struct fail_control *control;
    char control_path[UNDERTAGD_PATH_BYTES];
};

/* False, having said so, where nothing can be preloaded: a sanitizer has to come first itself. */
bool patient_is_possible(void);

void patient_make(struct patient *patient);

/* Ends what runs, and removes the folder. */
void patient_remove(struct patient *patient);

/* A home that is not there yet. */
void patient_new_home(struct patient *patient);

/* From now on the n-th call (0: the next) of the kind fails. */
void patient_arm(struct patient *patient, enum fail_kind kind, unsigned n);

/* The next sync that LMDB itself makes of a file whose path ends so. */
void patient_arm_sync_of(struct patient *patient, const char *path_end);

/* From now on none fails; returns whether one has. */
bool patient_disarm(struct patient *patient);

/* Starts it, with the shim or without; true once it takes connections, false where it has ended
 * first, or hangs: patient_end tells. */
bool patient_start(struct patient *patient, bool with_shim);

bool patient_has_ended(const struct patient *patient);

/* SIGTERM if it runs; how it ended: its exit code, 128 and a signal, or PATIENT_HANGS. */
int patient_end(struct patient *patient);

/* kill -9 and gone. */
void patient_kill(struct patient *patient);

/* Whether the last run has logged a sentence. */
bool patient_said_something(const struct patient *patient);

/* The last run's log, on the heap. */
char *patient_log(const struct patient *patient);

/* undertagd --verify: its exit code. */
int patient_verify(const struct patient *patient);

/* One request on a connection of its own: the answer, to be released; NULL where the connection was
 * closed or refused; *ret_hangs where there was neither in time. JSON with ' for ". */
json_t *patient_ask(const struct patient *patient, bool *ret_hangs, const char *method,
                    const char *params, ...) __attribute__((format(printf, 4, 5)));

#endif
