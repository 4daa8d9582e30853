#include "daemon/moment.h"

#include <errno.h>
#include <pthread.h>
#include <stdlib.h>

#include "daemon/sync.h"

struct moments {
    pthread_mutex_t mutex;
    pthread_cond_t moved;
    bool wanted;
    bool is_handed; /* and not taken yet */
    bool is_held;   /* or about to be */
    bool stopping;
    uint64_t bytes;
    struct moment moment;
    struct store_error error; /* why there is none, or STORE_OK */
};

int moments_new(struct moments **ret_moments)
{
    struct moments *moments = calloc(1, sizeof *moments);
    if (!moments) {
        return -ENOMEM;
    }
    int code = -pthread_mutex_init(&moments->mutex, NULL);
    if (code == 0) {
        code = sync_init_condition(&moments->moved);
        if (code < 0) {
            (void)pthread_mutex_destroy(&moments->mutex); /* nobody knows it yet */
        }
    }
    if (code < 0) {
        free(moments);
        return code;
    }
    *ret_moments = moments;
    return 0;
}

void moment_leave_model(struct moment *moment)
{
    model_view_close(moment->model);
    moment->model = NULL;
}

void moment_leave_store(struct moment *moment)
{
    if (moment->store) {
        store_end(moment->store);
        moment->store = NULL;
    }
}

void moments_free(struct moments *moments)
{
    if (moments) {
        moment_leave_model(&moments->moment);
        moment_leave_store(&moments->moment);
        (void)pthread_cond_destroy(&moments->moved); /* nobody uses them any more */
        (void)pthread_mutex_destroy(&moments->mutex);
        free(moments);
    }
}

void moments_want(struct moments *moments)
{
    sync_lock(&moments->mutex);
    moments->wanted = true;
    sync_unlock(&moments->mutex);
}

int moments_take(struct moments *moments, struct moment *ret_moment, struct store_error *error)
{
    sync_lock(&moments->mutex);
    while (!moments->is_handed && !moments->stopping) {
        (void)pthread_cond_wait(&moments->moved, &moments->mutex); /* it is looked at again */
    }
    int code = STORE_STOPPED;
    if (moments->is_handed) {
        *ret_moment = moments->moment;
        ret_moment->moments = moments;
        code = moments->error.code;
        if (code != STORE_OK) {
            *error = moments->error;
        }
        moments->moment = (struct moment){0};
        moments->is_handed = false;
    } else {
        (void)store_fail(error, STORE_STOPPED, "the daemon is stopping");
    }
    moments->wanted = false;
    sync_unlock(&moments->mutex);
    return code;
}

void moments_give_back(struct moments *moments, struct moment *moment)
{
    moment_leave_model(moment);
    moment_leave_store(moment);
    sync_lock(&moments->mutex);
    moments->is_held = false;
    moments->bytes = 0;
    sync_unlock(&moments->mutex);
}

void moments_stop(struct moments *moments)
{
    sync_lock(&moments->mutex);
    moments->stopping = true;
    (void)pthread_cond_broadcast(&moments->moved);
    sync_unlock(&moments->mutex);
}

bool moments_are_wanted(struct moments *moments)
{
    sync_lock(&moments->mutex);
    bool wanted = moments->wanted && !moments->is_handed && !moments->stopping;
    sync_unlock(&moments->mutex);
    return wanted;
}

void moments_hand(struct moments *moments, const struct moment *moment,
                  const struct store_error *error)
{
    sync_lock(&moments->mutex);
    moments->moment = moment ? *moment : (struct moment){0};
    moments->error = error ? *error : (struct store_error){0};
    moments->is_held = moment != NULL;
    moments->is_handed = true;
    (void)pthread_cond_broadcast(&moments->moved);
    sync_unlock(&moments->mutex);
}

bool moments_are_held(struct moments *moments)
{
    sync_lock(&moments->mutex);
    bool is_held = moments->is_held;
    sync_unlock(&moments->mutex);
    return is_held;
}

void moment_hold_memory(const struct moment *moment, uint64_t bytes)
{
    sync_lock(&moment->moments->mutex);
    moment->moments->bytes = bytes;
    sync_unlock(&moment->moments->mutex);
}

uint64_t moments_bytes(struct moments *moments)
{
    sync_lock(&moments->mutex);
    uint64_t bytes = moments->bytes;
    sync_unlock(&moments->mutex);
    return bytes;
}
