/*
 * lockfile: at most one process at a time, by a lock that ends with the process, however it ends.
 * The file stays: who removed it could not know who has opened it meanwhile.
 */
#ifndef UNDERTAG_LOCKFILE_H
#define UNDERTAG_LOCKFILE_H

enum {
    LOCKFILE_ERROR_BYTES = 512
};

/*
 * Takes the lock, making the file if need be, and writes this process's number in it. The lock is
 * held until the descriptor is closed. On failure returns a negative errno with a sentence in
 * `error`: -EWOULDBLOCK where another process holds it.
 */
int lockfile_take(const char *path, int *ret_fd, char *error) __attribute__((warn_unused_result));

#endif
