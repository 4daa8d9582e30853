#include "daemon/shared_model.h"

#include <stdlib.h>

/* By default glibc lets new readers in before a waiting writer, so that steady asking would keep
 * the trainer out. Asked to prefer writers it still hands over to waiting readers after each. */
static int init_lock(pthread_rwlock_t *lock)
{
    pthread_rwlockattr_t attributes;
    int code = pthread_rwlockattr_init(&attributes);
    if (code != 0) {
        return -code;
    }
    code = pthread_rwlockattr_setkind_np(&attributes, PTHREAD_RWLOCK_PREFER_WRITER_NONRECURSIVE_NP);
    if (code == 0) {
        code = pthread_rwlock_init(lock, &attributes);
    }
    (void)pthread_rwlockattr_destroy(&attributes); /* no failure for an initialised one */
    return -code;
}

int shared_model_init_take(struct shared_model *shared, struct model *model,
                           struct model_store *store, uint64_t learned)
{
    int code = init_lock(&shared->lock);
    if (code < 0) {
        model_free(model);
        return code;
    }
    shared->model = model;
    shared->store = store;
    shared->version = 0;
    shared->learned = learned;
    shared->broken = 0;
    return 0;
}

void shared_model_deinit(struct shared_model *shared)
{
    (void)pthread_rwlock_destroy(&shared->lock); /* nobody holds it any more */
    model_free(shared->model);
}

void shared_model_exchange(struct shared_model *shared, struct model **model,
                           struct model_store **store)
{
    struct model *old_model = shared->model;
    struct model_store *old_store = shared->store;
    shared->model = *model;
    shared->store = *store;
    shared->version++;
    *model = old_model;
    *store = old_store;
}

/* Errors of these are errors of ours alone. */
void shared_model_read(struct shared_model *shared)
{
    if (pthread_rwlock_rdlock(&shared->lock) != 0) {
        abort();
    }
}

void shared_model_write(struct shared_model *shared)
{
    if (pthread_rwlock_wrlock(&shared->lock) != 0) {
        abort();
    }
}

void shared_model_unlock(struct shared_model *shared)
{
    if (pthread_rwlock_unlock(&shared->lock) != 0) {
        abort();
    }
}
