/* What the trainer does while there is nothing to learn: scoring the worklist again, and rehearsal.
 */
#include <errno.h>

#include "daemon/clock.h"
#include "daemon/trainer_private.h"

enum {
    RESCORED_A_ROUND = 16, /* items of the worklist, before it looks for changes again */
    REHEARSAL_US = 1000,   /* likewise */
    SETTLED_US = 50000     /* without a change: rehearsal waits for the end of a feed */
};

/* --- the worklist -------------------------------------------------------------------------------
 */

/* Scores one item again; an entry whose item cannot be read any more leaves the worklist. */
static int rescore_item(struct trainer *trainer, struct store_view *view, uint64_t number,
                        struct store_error *error)
{
    struct shared_model *shared = trainer->settings.shared;
    struct worklist_entry entry;
    const struct model_item *item = NULL;
    int code = change_reader_item(trainer->reader, view, number, &item, error);
    if (code != STORE_OK) {
        return code;
    }
    /* Nobody else changes the model: scoring needs no lock. */
    int result = item ? model_rescore(shared->model, item, trainer->scratch, &entry) : 0;
    if (result == 0) {
        const struct base *base = &trainer->base.base;
        shared_model_write(shared);
        result = item ? model_relist(shared->model, base, &entry)
                      : model_delist(shared->model, base, number);
        shared_model_unlock(shared);
    }
    return result == 0 ? STORE_OK : trainer_fail_to_learn(trainer, result, number, error);
}

/* Scores again, while there is time, what the model has outgrown; says whether there is more. What
 * cannot be scored now is left until something has been learned. */
static bool rescore_some(struct trainer *trainer, struct store_error *error)
{
    struct store_view *view = NULL;
    if (trainer_begin_round(trainer, &view, error) != STORE_OK) {
        return false; /* learning will tell, if it lasts */
    }
    uint64_t number = 0;
    int next = 0;
    int code = STORE_OK;
    for (size_t i = 0; i < RESCORED_A_ROUND && code == STORE_OK && next == 0; i++) {
        next = model_next_stale(trainer->settings.shared->model, &trainer->base.base, &number);
        if (next == 0) {
            code = rescore_item(trainer, view, number, error);
            trainer->idly_changed = true;
        } else if (next != -ENOENT) {
            code = trainer_fail_to_learn(trainer, next, trainer->learned, error);
        }
    }
    trainer_end_round(trainer, view);
    return code == STORE_OK && next == 0;
}

/* --- rehearsal ----------------------------------------------------------------------------------
 */

/* Whose turn it is; -ENOENT for nobody's. */
static int next_rehearsal(struct trainer *trainer, uint64_t *ret_number)
{
    struct shared_model *shared = trainer->settings.shared;
    shared_model_write(shared);
    int result = model_next_rehearsal(shared->model, &trainer->base.base, ret_number);
    shared_model_unlock(shared);
    return result;
}

static int rehearse_item(struct trainer *trainer, struct store_view *view, uint64_t number,
                         struct store_error *error)
{
    struct shared_model *shared = trainer->settings.shared;
    const struct model_item *item = NULL;
    int code = change_reader_item(trainer->reader, view, number, &item, error);
    if (code != STORE_OK) {
        return code;
    }
    int result = 0;
    shared_model_write(shared);
    if (item) {
        result = model_rehearse(shared->model, item, trainer->scratch);
        model_trim(shared->model, trainer->shares.dictionary, trainer->shares.weights);
        shared->broken = result;
    } else {
        model_skip_rehearsal(shared->model, number);
    }
    shared_model_unlock(shared);
    return result == 0 ? STORE_OK : trainer_fail_to_learn(trainer, result, number, error);
}

/* Rehearses for a moment, and rests for as long as its share asks for. Says in *ret_more whether
 * there is more. */
static int rehearse_some(struct trainer *trainer, bool *ret_more, struct store_error *error)
{
    struct store_view *view = NULL;
    uint64_t begun_us = clock_steady_us();
    uint64_t now_us = begun_us;
    uint64_t number = 0;
    int next = 0;
    *ret_more = false;
    if (trainer_begin_round(trainer, &view, error) != STORE_OK) {
        *error = (struct store_error){0}; /* learning will tell, if it lasts */
        return STORE_OK;
    }
    int code = STORE_OK;
    while (code == STORE_OK && next == 0 && now_us - begun_us < REHEARSAL_US &&
           !trainer_is_full(trainer)) {
        next = next_rehearsal(trainer, &number);
        if (next == 0) {
            code = rehearse_item(trainer, view, number, error);
            trainer->idly_changed = true;
        } else if (next != -ENOENT) {
            code = trainer_fail_to_learn(trainer, next, trainer->learned, error);
        }
        now_us = clock_steady_us();
    }
    trainer_end_round(trainer, view);
    double share = trainer->settings.rehearsal_share;
    trainer->rest_until_us = now_us + (uint64_t)((double)(now_us - begun_us) * (1.0 / share - 1.0));
    *ret_more = next == 0;
    return code;
}

static bool may_rehearse(const struct trainer *trainer)
{
    return trainer->rehearse_due && !trainer->rescore_due && !trainer_is_full(trainer) &&
           clock_steady_us() >= trainer->rest_until_us;
}

/* --- both ---------------------------------------------------------------------------------------
 */

void trainer_work_idly(struct trainer *trainer, bool is_idle)
{
    struct store_error error = {0};
    if (trainer->failed || !is_idle) {
        trainer->rescore_due = !trainer->failed;
        trainer->rehearse_due = !trainer->failed && trainer->settings.rehearsal_share > 0.0;
        trainer->rest_until_us = clock_steady_us() + SETTLED_US;
        return;
    }
    if (trainer_is_full(trainer)) {
        return;
    }
    if (trainer->rescore_due) {
        trainer->rescore_due = rescore_some(trainer, &error);
        if (trainer->is_damaged) {
            trainer_fail(trainer, &error);
        }
    } else if (may_rehearse(trainer) &&
               rehearse_some(trainer, &trainer->rehearse_due, &error) != STORE_OK) {
        trainer_fail(trainer, &error);
    }
}
