/*
 * Making a moment (moment.h), where one is wanted: a view of the store is opened once learning has
 * nearly come to its end; what is in it is learned, and nothing behind it; the model is stored, and
 * a view of that opened before it can be stored again.
 */
#include "daemon/trainer_private.h"

enum {
    NEAR_CHANGES = 20000 /* under a feed learning is some way behind always; not as after a crash */
};

/* There will be no moment. */
static void refuse(struct trainer *trainer, const struct store_error *error)
{
    trainer_drop_moment(trainer);
    moments_hand(trainer->settings.moments, NULL, error);
}

void trainer_drop_moment(struct trainer *trainer)
{
    moment_leave_store(&trainer->moment);
    trainer->moment = (struct moment){0};
    trainer->moment_is_sealed = false;
}

bool trainer_nears_moment(const struct trainer *trainer)
{
    return trainer->moment.store && !trainer->moment_is_sealed;
}

uint64_t trainer_bound(const struct trainer *trainer, uint64_t last)
{
    bool is_bound = trainer_nears_moment(trainer) && last > trainer->moment.seq;
    return is_bound ? trainer->moment.seq : last;
}

/* Opens the store's view, where learning is near its end. */
static void begin(struct trainer *trainer)
{
    struct store_error error = {0};
    struct moment moment = {0};
    if (trainer->learned + NEAR_CHANGES < backlog_read(trainer->settings.backlog).committed) {
        return; /* later */
    }
    if (store_read(trainer->settings.store, &moment.store, &error) != STORE_OK) {
        refuse(trainer, &error);
        return;
    }
    moment.seq = store_view_totals(moment.store).seq;
    trainer->moment = moment;
}

static void hand_over(struct trainer *trainer)
{
    struct store_error error = {0};
    struct moment moment = trainer->moment;
    if (model_view_open(trainer->settings.model_store, &moment.model, &error) != STORE_OK) {
        refuse(trainer, &error);
        return;
    }
    moment.learning = trainer->settings.configured;
    if (trainer->settings.rebuild) {
        rebuild_lay_over(trainer->settings.rebuild, &moment.learning);
    }
    trainer->moment = (struct moment){0};
    trainer->moment_is_sealed = false;
    moments_hand(trainer->settings.moments, &moment, NULL);
}

/* All of it is learned: has the model stored as it is now, while learning goes on. */
static void seal(struct trainer *trainer)
{
    trainer_end_storing(trainer, true); /* of something earlier */
    if (trainer->kept == trainer->learned && !trainer->idly_changed) {
        hand_over(trainer);
        return;
    }
    trainer_begin_storing(trainer);
    trainer->moment_is_sealed = true;
}

/* It is stored, or could not be. */
static void end(struct trainer *trainer)
{
    struct store_error error = {0};
    if (trainer->kept == trainer->moment.seq) {
        hand_over(trainer);
        return;
    }
    (void)store_fail(&error, STORE_FULL, "what was learned cannot be stored");
    refuse(trainer, &error);
}

void trainer_make_moment(struct trainer *trainer)
{
    struct moments *moments = trainer->settings.moments;
    if (!moments_are_wanted(moments)) {
        trainer_drop_moment(trainer);
        return;
    }
    if (trainer->failed) {
        struct store_error error = {0};
        (void)store_fail(&error, STORE_BROKEN, "learning has stopped");
        refuse(trainer, &error);
        return;
    }
    if (!trainer->moment.store) {
        begin(trainer);
    }
    if (trainer->moment_is_sealed && !trainer->is_storing) {
        end(trainer);
    } else if (trainer_nears_moment(trainer) && trainer->learned == trainer->moment.seq) {
        seal(trainer);
    }
}
