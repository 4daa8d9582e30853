#include "daemon/storer.h"

#include <errno.h>
#include <pthread.h>
#include <stdlib.h>
#include <sys/resource.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "daemon/sync.h"

enum {
    NICE = 5
};

struct storer {
    struct backlog *backlog;
    pthread_t thread;
    pthread_mutex_t mutex;
    pthread_cond_t moved;
    struct model_store_writing *writing; /* to be committed */
    bool is_begun;
    bool is_done; /* and the result is not taken yet */
    bool stopping;
    struct storer_result result;
};

static void beat(void *user)
{
    struct storer *storer = user;
    heartbeat_work(backlog_heartbeat(storer->backlog), HEART_STORER);
}

static void commit(struct storer *storer, struct model_store_writing *writing)
{
    struct storer_result result = {0};
    uint64_t begun_us = clock_steady_us();
    beat(storer);
    model_store_watch(writing, beat, storer);
    result.code = model_store_commit(writing, &result.error);
    result.took_us = clock_steady_us() - begun_us;
    heartbeat_rest(backlog_heartbeat(storer->backlog), HEART_STORER);
    sync_lock(&storer->mutex);
    storer->result = result;
    storer->is_done = true;
    (void)pthread_cond_broadcast(&storer->moved);
    sync_unlock(&storer->mutex);
    backlog_nudge(storer->backlog);
}

/* The next writing; NULL once it is to stop. */
static struct model_store_writing *wait_for_writing(struct storer *storer)
{
    sync_lock(&storer->mutex);
    while (!storer->writing && !storer->stopping) {
        (void)pthread_cond_wait(&storer->moved, &storer->mutex); /* it is looked at again */
    }
    struct model_store_writing *writing = storer->writing;
    storer->writing = NULL;
    sync_unlock(&storer->mutex);
    return writing;
}

static void *run(void *argument)
{
    struct storer *storer = argument;
    struct model_store_writing *writing = NULL;
    /* Of this thread alone: whoever asks goes first. It may always be nicer; where it cannot be, it
     * goes on all the same. */
    (void)setpriority(PRIO_PROCESS, (id_t)gettid(), NICE);
    while ((writing = wait_for_writing(storer))) {
        commit(storer, writing);
    }
    return NULL;
}

int storer_new(struct backlog *backlog, struct storer **ret_storer)
{
    struct storer *storer = calloc(1, sizeof *storer);
    if (!storer) {
        return -ENOMEM;
    }
    storer->backlog = backlog;
    int code = -pthread_mutex_init(&storer->mutex, NULL);
    if (code < 0) {
        goto no_mutex;
    }
    code = sync_init_condition(&storer->moved);
    if (code < 0) {
        goto no_condition;
    }
    code = -pthread_create(&storer->thread, NULL, run, storer);
    if (code < 0) {
        goto no_thread;
    }
    *ret_storer = storer;
    return 0;

no_thread:
    (void)pthread_cond_destroy(&storer->moved); /* nobody knows it yet */
no_condition:
    (void)pthread_mutex_destroy(&storer->mutex);
no_mutex:
    free(storer);
    return code;
}

void storer_free(struct storer *storer)
{
    if (!storer) {
        return;
    }
    sync_lock(&storer->mutex);
    storer->stopping = true;
    (void)pthread_cond_broadcast(&storer->moved);
    sync_unlock(&storer->mutex);
    sync_join(storer->thread);
    (void)pthread_cond_destroy(&storer->moved); /* nobody waits any more */
    (void)pthread_mutex_destroy(&storer->mutex);
    free(storer);
}

void storer_begin(struct storer *storer, struct model_store_writing *writing)
{
    sync_lock(&storer->mutex);
    storer->writing = writing;
    storer->is_begun = true;
    (void)pthread_cond_broadcast(&storer->moved);
    sync_unlock(&storer->mutex);
}

bool storer_take(struct storer *storer, bool waits, struct storer_result *ret_result)
{
    sync_lock(&storer->mutex);
    while (waits && storer->is_begun && !storer->is_done) {
        (void)pthread_cond_wait(&storer->moved, &storer->mutex); /* it is looked at again */
    }
    bool is_taken = storer->is_begun && storer->is_done;
    if (is_taken) {
        *ret_result = storer->result;
        storer->is_begun = false;
        storer->is_done = false;
    }
    sync_unlock(&storer->mutex);
    return is_taken;
}
