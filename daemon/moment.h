/*
 * moment: the store and the stored model as of one and the same change, to be copied from.
 *
 * The two are stored at different times, so the trainer makes such a moment when somebody wants
 * one: it opens a view of the store, learns up to that view's last change and no further, has the
 * model stored, and opens a view of that before it is stored again. While anybody holds a moment no
 * other model takes the place of the one in use.
 */
#ifndef UNDERTAG_MOMENT_H
#define UNDERTAG_MOMENT_H

#include <stdbool.h>

#include "daemon/options.h"
#include "storage/model_view.h"
#include "storage/store.h"

/* One thread at a time. */
struct moments;

struct moment {
    struct moments *moments; /* that it is of */
    uint64_t seq;            /* the last change in both */
    struct store_view *store;
    struct model_view *model;
    struct options learning; /* the learning options are those that the model was learned with */
};

/* Returns 0 or a negative errno. */
int moments_new(struct moments **ret_moments) __attribute__((warn_unused_result));
void moments_free(struct moments *moments); /* NULL is passed over; nothing may be held */

/* --- who copies: any thread, one at a time ------------------------------------------------------
 */

/* Says that a moment is wanted; wake the trainer then, and wait for it with moments_take. */
void moments_want(struct moments *moments);

/* Waits for it. STORE_STOPPED once moments_stop was called, or what kept the trainer from making
 * it. */
int moments_take(struct moments *moments, struct moment *ret_moment, struct store_error *error)
    __attribute__((warn_unused_result));

/* Closes the model's view, or the store's, before the other. NULL then. */
void moment_leave_model(struct moment *moment);
void moment_leave_store(struct moment *moment);

/* Says how much memory is held for the sake of a moment, until it is given back: the trainer makes
 * room for it within memory_budget. */
void moment_hold_memory(const struct moment *moment, uint64_t bytes);

/* Closes what is open of it. */
void moments_give_back(struct moments *moments, struct moment *moment);

/* Nobody waits any more, now and from now on. Any thread. */
void moments_stop(struct moments *moments);

/* --- the trainer ---------------------------------------------------------------------------------
 */

bool moments_are_wanted(struct moments *moments);

/* Hands a moment over, which it takes; or, with `error`, says why there is none. */
void moments_hand(struct moments *moments, const struct moment *moment,
                  const struct store_error *error);

/* Whether anybody holds one, and how much memory for it. */
bool moments_are_held(struct moments *moments);
uint64_t moments_bytes(struct moments *moments);

#endif
