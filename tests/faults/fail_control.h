/*
 * fail_control: what a test and the shim in the daemon (fail_nth.c) share: a small file that both
 * map. The test arms it at the moment at which counting shall begin, and reads what became of it,
 * whatever became of the daemon.
 */
#ifndef UNDERTAG_TESTS_FAIL_CONTROL_H
#define UNDERTAG_TESTS_FAIL_CONTROL_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

/* X(name, errno, what the report calls it) */
#define FAIL_KINDS_OF(X)                                                                           \
    X(FAIL_MALLOC, ENOMEM, "malloc")                                                               \
    X(FAIL_WRITE, ENOSPC, "write: no room")                                                        \
    X(FAIL_WRITE_BADLY, EIO, "write: I/O error")                                                   \
    X(FAIL_SYNC, EIO, "sync")                                                                      \
    X(FAIL_OPEN, EMFILE, "open")                                                                   \
    X(FAIL_MMAP, ENOMEM, "mmap")

enum fail_kind {
#define FAIL_ENUM(name, error, title) name,
    FAIL_KINDS_OF(FAIL_ENUM)
#undef FAIL_ENUM
    FAIL_KINDS
};

enum {
    FAIL_NAME_BYTES = 128
};

/* The variable that names the file. */
#define FAIL_CONTROL_VARIABLE "UNDERTAG_FAIL_CONTROL"

struct fail_control {
    atomic_uint kind;              /* below: what to fail, while it is armed */
    atomic_int error;              /* errno */
    atomic_long left;              /* calls to let pass; below 0: none is failed any more */
    char only_on[FAIL_NAME_BYTES]; /* "": any; else LMDB's own calls on a file whose path ends so */
    atomic_bool is_armed;

    atomic_bool is_injected; /* below: what the shim did; written once for each arming */
    char call[32];           /* the function that failed */
    char module[FAIL_NAME_BYTES];
    char symbol[FAIL_NAME_BYTES]; /* the exported one before the call site; "" */
    uint64_t offset;              /* of the call site in the module */

    atomic_long blocks_left; /* of memory at a run's end; -1: it did not come so far */
};

#endif
