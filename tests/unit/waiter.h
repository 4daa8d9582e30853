/*
 * waiter: a thread that is to wait for something, and how a test knows that it does: the kernel
 * says that it sleeps. No test waits for time to pass. Static functions, since each test is one
 * file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_WAITER_H
#define UNDERTAG_TESTS_WAITER_H

#include <pthread.h>
#include <sched.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

struct waiter {
    pthread_t thread;
    void (*wait)(void *user); /* what is to wait */
    void *user;
    atomic_int id; /* the kernel's number of the thread; 0: not running yet */
    atomic_bool returned;
};

static inline void *waiter_run(void *argument)
{
    struct waiter *waiter = argument;
    atomic_store(&waiter->id, (int)gettid());
    waiter->wait(waiter->user);
    atomic_store(&waiter->returned, true);
    return NULL;
}

static inline void waiter_start(struct waiter *waiter, void (*wait)(void *user), void *user)
{
    *waiter = (struct waiter){.wait = wait, .user = user};
    assert_int_equal(pthread_create(&waiter->thread, NULL, waiter_run, waiter), 0);
}

/* Whether the kernel says that the thread sleeps: the letter behind its name (proc(5)). */
static inline bool waiter_sleeps(const struct waiter *waiter)
{
    char path[64];
    char line[256] = "";
    (void)snprintf(path, sizeof path, "/proc/self/task/%d/stat", atomic_load(&waiter->id));
    FILE *file = fopen(path, "r");
    if (!file) {
        return false; /* it has ended */
    }
    const char *read = fgets(line, sizeof line, file);
    (void)fclose(file);
    const char *name_end = read ? strrchr(line, ')') : NULL;
    return name_end && name_end[1] == ' ' && name_end[2] == 'S';
}

/* Returns once the thread sleeps, which it must come to. */
static inline void assert_waits(struct waiter *waiter)
{
    while (atomic_load(&waiter->id) == 0 || !waiter_sleeps(waiter)) {
        if (atomic_load(&waiter->returned)) {
            fail_msg("it did not wait");
        }
        (void)sched_yield();
    }
    assert_false(atomic_load(&waiter->returned));
}

static inline void waiter_join(struct waiter *waiter)
{
    assert_int_equal(pthread_join(waiter->thread, NULL), 0);
    assert_true(atomic_load(&waiter->returned));
}

#endif
