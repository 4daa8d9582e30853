/*
 * scene: what a daemon does while its n-th call of a kind fails, n = 0, 1, 2 … until nothing is
 * left to fail. What must hold after each: it is up and answers, or has ended with a sentence and a
 * code of sysexits.h; nothing hangs; each request was answered with a result or with an error that
 * does not blame it, or its connection was closed; and after a clean restart without the shim what
 * was acknowledged is there, what was refused is not, and the home is whole. And no memory leaks: a
 * daemon that ends has no more blocks than one for which nothing failed.
 */
#ifndef UNDERTAG_TESTS_SCENE_H
#define UNDERTAG_TESTS_SCENE_H

#include "tests/faults/patient.h"
#include "tests/faults/promises.h"
#include "tests/faults/sites.h"

struct scene {
    const char *name;
    struct patient patient;
    struct promises promises;
    struct sites *sites;
    enum fail_kind kind;
    unsigned n;
    unsigned stamp;     /* for ids that were not there before */
    bool is_up;         /* a daemon with the shim runs */
    bool needs_restart; /* it says that it does */
    unsigned sparse; /* of many calls only each so many-th of those that would be taken; 0: all */
    unsigned since_look; /* rounds since all was looked at */
    unsigned wrong;      /* what did not hold */
    long blocks_left;    /* by the last life with the shim; -1: it did not end by itself */
    long blocks_most;    /* of all lives in which something failed, and by which round: */
    enum fail_kind most_kind;
    unsigned most_n;
    void *own;
};

/* One round with the n-th call failed; false: there was none left. */
typedef bool (*scene_round)(struct scene *scene);

/* Makes a scene, in cmocka's *state's place. */
void scene_begin(struct scene *scene, struct sites *sites, const char *name);

/* All kinds, all n (or some of the many: see scene.c). */
void scene_play(struct scene *scene, scene_round play);

/* Ends it; fails the test where something did not hold. */
void scene_end(struct scene *scene);

/* Something does not hold; it is told with the call that was failed. */
void scene_wrong(struct scene *scene, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

/* --- steps of rounds ------------------------------------------------------------------------- */

/* A daemon with the shim that is in order, nothing failing yet. */
void scene_be_up(struct scene *scene);

/* From here on it counts; and no more: returns whether one was failed, and notes it. */
void scene_arm(struct scene *scene);
bool scene_disarm(struct scene *scene);

/* Asks, and notes what was answered. */
enum outcome scene_ask(struct scene *scene, const char *method, const char *params, ...)
    __attribute__((format(printf, 3, 4)));

/* The same for a change to an item. */
void scene_change(struct scene *scene, struct promise change, const char *method,
                  const char *params, ...) __attribute__((format(printf, 4, 5)));

/* Waits until all is learned, or the daemon says that something is wrong, or is gone. */
void scene_wait_until_learned(struct scene *scene);

/* The daemon that was failed is up and answers, or has ended as it should. */
void scene_look(struct scene *scene);

/* Ends the daemon, if it runs. */
void scene_stop(struct scene *scene);

/* Starts it without the shim, looks at the whole promises from entry `from` on, ends it, and has
 * the home verified. */
void scene_restart_clean(struct scene *scene, size_t from);

#endif
