#include "tests/faults/moments.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <fcntl.h>
#include <linux/futex.h>
#include <poll.h>
#include <pthread.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <unistd.h>

#include "tests/integration/child.h"

enum {
    PATH_BYTES = 256,
    STORER_NICE = 5, /* as storer.c has it */
    CACHE_LINE = 64  /* as LMDB has it */
};

/* --- the lock for writing -------------------------------------------------------------------- */

/* How LMDB 0.9's lock.mdb begins; the lock for writing is in the next cache line. That this holds
 * for the LMDB and the C library at hand is tested first of all. */
struct lock_file_head {
    uint32_t magic;
    uint32_t format;
    pthread_mutex_t for_readers;
    size_t last_transaction;
    unsigned readers;
};

enum {
    LOCK_AT = (sizeof(struct lock_file_head) + CACHE_LINE - 1) / CACHE_LINE * CACHE_LINE
};

/* How a mutex of the GNU C library begins. */
struct lock {
    uint32_t word; /* the thread that holds it, with the kernel's marks */
    uint32_t count;
    uint32_t owner; /* the same thread; stays when it dies */
};

/* All zeros where there is no such environment. */
static struct lock read_lock(const char *home, const char *environment)
{
    char path[PATH_BYTES];
    struct lock lock = {0};
    int length = snprintf(path, sizeof path, "%s/%s/lock.mdb", home, environment);
    assert_in_range(length, 1, sizeof path - 1);
    int fd = open(path, O_RDONLY | O_CLOEXEC);
    if (fd < 0) {
        return lock;
    }
    if (pread(fd, &lock, sizeof lock, LOCK_AT) != (ssize_t)sizeof lock) {
        lock = (struct lock){0}; /* it is just being made */
    }
    (void)close(fd); /* it was only read */
    return lock;
}

static bool was_left(struct lock lock)
{
    return (lock.word & FUTEX_OWNER_DIED) != 0;
}

bool moments_was_left_open(const char *home, const char *environment)
{
    return was_left(read_lock(home, environment));
}

/* --- the storer's thread --------------------------------------------------------------------- */

/* 0 where no thread has this niceness, or more than one. */
static pid_t find_thread(pid_t process, int niceness)
{
    char path[PATH_BYTES];
    pid_t found = 0;
    unsigned count = 0;
    (void)snprintf(path, sizeof path, "/proc/%d/task", (int)process); /* it fits */
    DIR *threads = opendir(path);
    assert_non_null(threads);
    const struct dirent *entry = NULL;
    while ((entry = readdir(threads))) { /* NOLINT(concurrency-mt-unsafe): no other thread */
        pid_t thread = (pid_t)strtol(entry->d_name, NULL, 10);
        if (thread > 0 && getpriority(PRIO_PROCESS, (id_t)thread) == niceness) {
            found = thread;
            count++;
        }
    }
    (void)closedir(threads); /* it was only read */
    return count == 1 ? found : 0;
}

pid_t moments_find_storer(pid_t daemon)
{
    pid_t storer = 0;
    if (getpriority(PRIO_PROCESS, 0) >= STORER_NICE) {
        fail_msg("run this with a niceness below %d: the storer is known by that", STORER_NICE);
    }
    for (int waited_ms = 0; !(storer = find_thread(daemon, STORER_NICE)); waited_ms++) {
        if (waited_ms > PATIENCE_MS) {
            fail_msg("no thread of the daemon has the niceness %d of the storer", STORER_NICE);
        }
        (void)poll(NULL, 0, 1); /* between two looks: it has hardly begun */
    }
    return storer;
}

/* --- looking --------------------------------------------------------------------------------- */

bool moments_is_flushing(const char *home, pid_t storer)
{
    return (read_lock(home, "model").word & FUTEX_TID_MASK) == (uint32_t)storer;
}

bool moments_is_committing(const char *home)
{
    return (read_lock(home, "store").word & FUTEX_TID_MASK) != 0;
}

bool moments_is_storing_build(const char *home)
{
    return (read_lock(home, "model.next").word & FUTEX_TID_MASK) != 0;
}

bool moments_is_building(const char *home)
{
    char path[PATH_BYTES];
    int length = snprintf(path, sizeof path, "%s/model.next/data.mdb", home);
    assert_in_range(length, 1, sizeof path - 1);
    return access(path, F_OK) == 0;
}

static bool is_part(const char *name)
{
    static const char END[] = ".part";
    size_t bytes = strlen(name);
    return name[0] == '.' && bytes > sizeof END &&
           strcmp(name + bytes - (sizeof END - 1), END) == 0;
}

bool moments_is_writing_snapshot(const char *home)
{
    char path[PATH_BYTES];
    bool is_writing = false;
    int length = snprintf(path, sizeof path, "%s/exports", home);
    assert_in_range(length, 1, sizeof path - 1);
    DIR *exports = opendir(path);
    if (!exports) {
        return false;
    }
    const struct dirent *entry = NULL;
    while ((entry = readdir(exports))) { /* NOLINT(concurrency-mt-unsafe): no other thread */
        is_writing = is_writing || is_part(entry->d_name);
    }
    (void)closedir(exports); /* it was only read */
    return is_writing;
}

struct moment moments_of_kill(const char *home, pid_t storer)
{
    struct lock model = read_lock(home, "model");
    bool is_storers = model.owner == (uint32_t)storer;
    return (struct moment){.in_flush = was_left(model) && is_storers,
                           .in_overwriting = was_left(model) && !is_storers,
                           .in_build = moments_is_building(home),
                           .in_storing_build = moments_was_left_open(home, "model.next"),
                           .in_commit = moments_was_left_open(home, "store"),
                           .in_snapshot = moments_is_writing_snapshot(home)};
}
