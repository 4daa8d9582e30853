/*
 * home: the folder of one store, made if need be, and held by one process at a time.
 */
#ifndef UNDERTAG_HOME_H
#define UNDERTAG_HOME_H

enum {
    HOME_ERROR_BYTES = 512
};

/*
 * Makes the folder (and those above it, mode 0700) and takes its lock, which lasts until the
 * descriptor is closed. On failure returns a negative errno with a sentence in `error`:
 * -EWOULDBLOCK where another process holds it.
 */
int home_open(const char *path, int *ret_lock_fd, char *error) __attribute__((warn_unused_result));

#endif
