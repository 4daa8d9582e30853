/*
 * failing_calls: the n-th call of a kind fails, n = 0, 1, 2 … until none is left to fail. The
 * programs test_failing_* are linked so that calls of our own code come here first (--wrap, see the
 * Makefile); what a library calls for itself does not. Nothing is preloaded, so it goes with a
 * sanitizer, too. Include cmocka.h first; each program includes it once.
 */
#ifndef UNDERTAG_TESTS_FAILING_CALLS_H
#define UNDERTAG_TESTS_FAILING_CALLS_H

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <lmdb.h>
#include <pthread.h>
#include <stdarg.h>
#include <stdatomic.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/random.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <sys/wait.h>
#include <unistd.h>

enum failing {
    FAILING_MEMORY, /* malloc and its family */
    FAILING_LMDB,
    FAILING_FILES, /* open, read, write, sync, rename and their like */
    FAILING_NEW    /* what begins a thread, a process, a lock or randomness */
};

struct failing_state {
    atomic_bool is_armed;
    enum failing kind;
    atomic_long left; /* calls to let pass; below 0: one has failed */
    atomic_long blocks;
};

static struct failing_state *failing; /* shared with processes that are forked */

__attribute__((constructor)) static void failing_share(void)
{
    void *shared =
        mmap(NULL, sizeof *failing, PROT_READ | PROT_WRITE, MAP_SHARED | MAP_ANONYMOUS, -1, 0);
    if (shared == MAP_FAILED) {
        abort();
    }
    failing = shared;
}

static bool failing_is_over; /* this process is at its end: what follows is not ours */

static inline bool failing_now(enum failing kind, int error)
{
    if (failing_is_over || !atomic_load(&failing->is_armed) || failing->kind != kind ||
        atomic_fetch_sub(&failing->left, 1) != 0) {
        return false;
    }
    errno = error;
    return true;
}

static inline void failing_arm(enum failing kind, long n)
{
    failing->kind = kind;
    atomic_store(&failing->left, n);
    atomic_store(&failing->is_armed, true);
}

/* Returns whether one has failed. */
static inline bool failing_disarm(void)
{
    atomic_store(&failing->is_armed, false);
    return atomic_load(&failing->left) < 0;
}

/* Blocks of memory that our own code has asked for and not given back. */
static inline long failing_blocks(void)
{
    return atomic_load(&failing->blocks);
}

/*
 * Runs `round` with the n-th call failing until none is left to fail, and has `check` look at what
 * came of each round in which one did. A round in which none did returns 0; none leaks. Returns how
 * many calls were failed.
 */
static inline long failing_each(enum failing kind, int (*round)(void *user),
                                void (*check)(void *user, int result), void *user)
{
    for (long n = 0;; n++) {
        long blocks = failing_blocks();
        failing_arm(kind, n);
        int result = round(user);
        bool is_hit = failing_disarm();
        if (failing_blocks() != blocks) {
            fail_msg("call %ld: %ld blocks of memory leak", n, failing_blocks() - blocks);
        }
        if (!is_hit) {
            assert_int_equal(result, 0);
            return n;
        }
        check(user, result);
    }
}

/* --- the calls ----------------------------------------------------------------------------------
 */

/* NOLINTBEGIN(bugprone-reserved-identifier,misc-definitions-in-headers): the linker's names, in one
 * file of a program each */

#define FAILING_CALL(type, name, parameters, arguments, kind, error, failed)                       \
    type __real_##name parameters;                                                                 \
    type __wrap_##name parameters;                                                                 \
    type __wrap_##name parameters                                                                  \
    {                                                                                              \
        return failing_now(kind, error) ? (failed) : __real_##name arguments;                      \
    }

void *__real_malloc(size_t size);
void *__real_calloc(size_t count, size_t size);
void *__real_realloc(void *memory, size_t size);
char *__real_strdup(const char *text);
char *__real_strndup(const char *text, size_t most);
void __real_free(void *memory);
void *__wrap_malloc(size_t size);
void *__wrap_calloc(size_t count, size_t size);
void *__wrap_realloc(void *memory, size_t size);
char *__wrap_strdup(const char *text);
char *__wrap_strndup(const char *text, size_t most);
void __wrap_free(void *memory);

static inline void *failing_count(void *memory)
{
    atomic_fetch_add(&failing->blocks, memory ? 1 : 0);
    return memory;
}

void *__wrap_malloc(size_t size)
{
    return failing_now(FAILING_MEMORY, ENOMEM) ? NULL : failing_count(__real_malloc(size));
}

void *__wrap_calloc(size_t count, size_t size)
{
    return failing_now(FAILING_MEMORY, ENOMEM) ? NULL : failing_count(__real_calloc(count, size));
}

void *__wrap_realloc(void *memory, size_t size)
{
    if (failing_now(FAILING_MEMORY, ENOMEM)) {
        return NULL;
    }
    void *moved = __real_realloc(memory, size);
    return memory ? moved : failing_count(moved);
}

char *__wrap_strdup(const char *text)
{
    return failing_now(FAILING_MEMORY, ENOMEM) ? NULL : failing_count(__real_strdup(text));
}

char *__wrap_strndup(const char *text, size_t most)
{
    return failing_count(failing_now(FAILING_MEMORY, ENOMEM) ? NULL : __real_strndup(text, most));
}

void __wrap_free(void *memory)
{
    atomic_fetch_sub(&failing->blocks, memory ? 1 : 0);
    __real_free(memory);
}

#define FAILING_MDB(name, parameters, arguments)                                                   \
    FAILING_CALL(int, name, parameters, arguments, FAILING_LMDB, EIO, EIO)

FAILING_MDB(mdb_env_create, (MDB_env * *ret_env), (ret_env))
FAILING_MDB(mdb_env_set_mapsize, (MDB_env * env, size_t size), (env, size))
FAILING_MDB(mdb_env_set_maxdbs, (MDB_env * env, MDB_dbi count), (env, count))
FAILING_MDB(mdb_env_set_maxreaders, (MDB_env * env, unsigned count), (env, count))
FAILING_MDB(mdb_env_open, (MDB_env * env, const char *path, unsigned flags, mdb_mode_t mode),
            (env, path, flags, mode))
FAILING_MDB(mdb_env_get_fd, (MDB_env * env, int *ret_fd), (env, ret_fd))
FAILING_MDB(mdb_env_info, (MDB_env * env, MDB_envinfo *ret_info), (env, ret_info))
FAILING_MDB(mdb_env_stat, (MDB_env * env, MDB_stat *ret_stat), (env, ret_stat))
FAILING_MDB(mdb_env_copyfd2, (MDB_env * env, int fd, unsigned flags), (env, fd, flags))
FAILING_MDB(mdb_reader_check, (MDB_env * env, int *ret_dead), (env, ret_dead))
FAILING_MDB(mdb_txn_begin, (MDB_env * env, MDB_txn *parent, unsigned flags, MDB_txn **ret_txn),
            (env, parent, flags, ret_txn))
FAILING_MDB(mdb_dbi_open, (MDB_txn * txn, const char *name, unsigned flags, MDB_dbi *ret_dbi),
            (txn, name, flags, ret_dbi))
FAILING_MDB(mdb_stat, (MDB_txn * txn, MDB_dbi dbi, MDB_stat *ret_stat), (txn, dbi, ret_stat))
FAILING_MDB(mdb_get, (MDB_txn * txn, MDB_dbi dbi, MDB_val *key, MDB_val *data),
            (txn, dbi, key, data))
FAILING_MDB(mdb_put, (MDB_txn * txn, MDB_dbi dbi, MDB_val *key, MDB_val *data, unsigned flags),
            (txn, dbi, key, data, flags))
FAILING_MDB(mdb_del, (MDB_txn * txn, MDB_dbi dbi, MDB_val *key, MDB_val *data),
            (txn, dbi, key, data))
FAILING_MDB(mdb_drop, (MDB_txn * txn, MDB_dbi dbi, int whole), (txn, dbi, whole))
FAILING_MDB(mdb_cursor_open, (MDB_txn * txn, MDB_dbi dbi, MDB_cursor **ret_cursor),
            (txn, dbi, ret_cursor))
FAILING_MDB(mdb_cursor_get, (MDB_cursor * cursor, MDB_val *key, MDB_val *data, MDB_cursor_op op),
            (cursor, key, data, op))
FAILING_MDB(mdb_cursor_del, (MDB_cursor * cursor, unsigned flags), (cursor, flags))

int __real_mdb_txn_commit(MDB_txn *txn);
int __wrap_mdb_txn_commit(MDB_txn *txn);

/* A commit ends the transaction, whatever comes of it. */
int __wrap_mdb_txn_commit(MDB_txn *txn)
{
    if (failing_now(FAILING_LMDB, EIO)) {
        mdb_txn_abort(txn);
        return EIO;
    }
    return __real_mdb_txn_commit(txn);
}

#define FAILING_FILE(type, name, parameters, arguments, error, failed)                             \
    FAILING_CALL(type, name, parameters, arguments, FAILING_FILES, error, failed)

FAILING_FILE(ssize_t, pread, (int fd, void *to, size_t size, off_t at), (fd, to, size, at), EIO, -1)
FAILING_FILE(ssize_t, pwrite, (int fd, const void *from, size_t size, off_t at),
             (fd, from, size, at), ENOSPC, -1)
FAILING_FILE(ssize_t, read, (int fd, void *to, size_t size), (fd, to, size), EIO, -1)
FAILING_FILE(ssize_t, write, (int fd, const void *from, size_t size), (fd, from, size), ENOSPC, -1)
FAILING_FILE(int, fsync, (int fd), (fd), EIO, -1)
FAILING_FILE(int, fdatasync, (int fd), (fd), EIO, -1)
FAILING_FILE(int, fstat, (int fd, struct stat *ret_status), (fd, ret_status), EIO, -1)
FAILING_FILE(int, stat, (const char *path, struct stat *ret_status), (path, ret_status), EIO, -1)
FAILING_FILE(int, lstat, (const char *path, struct stat *ret_status), (path, ret_status), EIO, -1)
FAILING_FILE(int, fstatat, (int fd, const char *path, struct stat *ret_status, int flags),
             (fd, path, ret_status, flags), EIO, -1)
FAILING_FILE(int, statvfs, (const char *path, struct statvfs *ret_status), (path, ret_status), EIO,
             -1)
FAILING_FILE(int, renameat2,
             (int from_fd, const char *from, int to_fd, const char *to, unsigned flags),
             (from_fd, from, to_fd, to, flags), EIO, -1)
FAILING_FILE(int, renameat, (int from_fd, const char *from, int to_fd, const char *to),
             (from_fd, from, to_fd, to), EIO, -1)
FAILING_FILE(int, mkdir, (const char *path, mode_t mode), (path, mode), ENOSPC, -1)
FAILING_FILE(int, mkdirat, (int fd, const char *path, mode_t mode), (fd, path, mode), ENOSPC, -1)
FAILING_FILE(int, unlink, (const char *path), (path), EIO, -1)
FAILING_FILE(int, unlinkat, (int fd, const char *path, int flags), (fd, path, flags), EIO, -1)
FAILING_FILE(int, symlinkat, (const char *target, int fd, const char *path), (target, fd, path),
             ENOSPC, -1)
FAILING_FILE(ssize_t, readlinkat, (int fd, const char *path, char *to, size_t size),
             (fd, path, to, size), EIO, -1)
FAILING_FILE(int, ftruncate, (int fd, off_t size), (fd, size), ENOSPC, -1)
FAILING_FILE(int, pipe2, (int *ret_fds, int flags), (ret_fds, flags), EMFILE, -1)
FAILING_FILE(DIR *, opendir, (const char *path), (path), EMFILE, NULL)
FAILING_FILE(DIR *, fdopendir, (int fd), (fd), ENOMEM, NULL)
FAILING_FILE(FILE *, fdopen, (int fd, const char *mode), (fd, mode), ENOMEM, NULL)
FAILING_FILE(int, fflush, (FILE * file), (file), ENOSPC, EOF)

int __real_open(const char *path, int flags, ...);
int __real_openat(int folder, const char *path, int flags, ...);
int __real_close(int fd);
int __wrap_open(const char *path, int flags, ...);
int __wrap_openat(int folder, const char *path, int flags, ...);
int __wrap_close(int fd);

/* As open and openat have it. */
#define FAILING_MODE(flags, mode)                                                                  \
    do {                                                                                           \
        if ((flags) & (O_CREAT | O_TMPFILE)) {                                                     \
            va_list rest;                                                                          \
            va_start(rest, flags);                                                                 \
            (mode) = va_arg(rest, mode_t);                                                         \
            va_end(rest);                                                                          \
        }                                                                                          \
    } while (0)

int __wrap_open(const char *path, int flags, ...)
{
    mode_t mode = 0;
    FAILING_MODE(flags, mode);
    return failing_now(FAILING_FILES, EMFILE) ? -1 : __real_open(path, flags, mode);
}

int __wrap_openat(int folder, const char *path, int flags, ...)
{
    mode_t mode = 0;
    FAILING_MODE(flags, mode);
    return failing_now(FAILING_FILES, EMFILE) ? -1 : __real_openat(folder, path, flags, mode);
}

/* It is closed all the same. */
int __wrap_close(int fd)
{
    int result = __real_close(fd);
    return failing_now(FAILING_FILES, EIO) ? -1 : result;
}

#define FAILING_BEGIN(type, name, parameters, arguments, error, failed)                            \
    FAILING_CALL(type, name, parameters, arguments, FAILING_NEW, error, failed)

FAILING_BEGIN(int, pthread_create,
              (pthread_t * ret_thread, const pthread_attr_t *attributes, void *(*run)(void *),
               void *user),
              (ret_thread, attributes, run, user), EAGAIN, EAGAIN)
FAILING_BEGIN(int, pthread_mutex_init,
              (pthread_mutex_t * mutex, const pthread_mutexattr_t *attributes), (mutex, attributes),
              ENOMEM, ENOMEM)
FAILING_BEGIN(int, pthread_cond_init,
              (pthread_cond_t * condition, const pthread_condattr_t *attributes),
              (condition, attributes), ENOMEM, ENOMEM)
FAILING_BEGIN(int, pthread_rwlock_init,
              (pthread_rwlock_t * lock, const pthread_rwlockattr_t *attributes), (lock, attributes),
              ENOMEM, ENOMEM)
FAILING_BEGIN(int, pthread_condattr_init, (pthread_condattr_t * attributes), (attributes), ENOMEM,
              ENOMEM)
FAILING_BEGIN(int, pthread_condattr_setclock, (pthread_condattr_t * attributes, clockid_t clock),
              (attributes, clock), EINVAL, EINVAL)
void __wrap__exit(int code) __attribute__((noreturn));

/* With what exit does besides: a sanitizer looks for leaks of the forked process then, and what was
 * counted for coverage is written. */
void __wrap__exit(int code)
{
    failing_is_over = true;
    exit(code); /* NOLINT(concurrency-mt-unsafe): it has one thread */
}

FAILING_BEGIN(pid_t, fork, (void), (), EAGAIN, -1)
FAILING_BEGIN(pid_t, waitpid, (pid_t pid, int *ret_status, int options), (pid, ret_status, options),
              ECHILD, -1)
FAILING_BEGIN(ssize_t, getrandom, (void *to, size_t size, unsigned flags), (to, size, flags), EIO,
              -1)
/* NOLINTEND(bugprone-reserved-identifier,misc-definitions-in-headers) */

#endif
