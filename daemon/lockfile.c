#include "daemon/lockfile.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <unistd.h>

static int say_held(int fd, const char *path, char *error)
{
    char owner[32] = {0};
    long process = 0;
    if (pread(fd, owner, sizeof owner - 1, 0) > 0) {
        process = strtol(owner, NULL, 10);
    }
    if (process > 0) {
        (void)snprintf(error, LOCKFILE_ERROR_BYTES, "process %ld holds %.300s already", process,
                       path);
    } else {
        (void)snprintf(error, LOCKFILE_ERROR_BYTES, "another process holds %.300s already", path);
    }
    return -EWOULDBLOCK;
}

/* The number is for people; the lock holds without it. */
static int write_owner(int fd)
{
    char owner[32];
    int length = snprintf(owner, sizeof owner, "%ld\n", (long)getpid());
    if (ftruncate(fd, 0) < 0 || pwrite(fd, owner, (size_t)length, 0) != length) {
        return -errno;
    }
    return 0;
}

int lockfile_take(const char *path, int *ret_fd, char *error)
{
    int fd = open(path, O_RDWR | O_CREAT | O_CLOEXEC | O_NOFOLLOW, 0600);
    if (fd < 0) {
        int code = -errno;
        (void)snprintf(error, LOCKFILE_ERROR_BYTES, "%.300s cannot be opened: %s", path,
                       strerror(-code));
        return code;
    }
    int code = 0;
    if (flock(fd, LOCK_EX | LOCK_NB) < 0) {
        code = errno == EWOULDBLOCK ? say_held(fd, path, error) : -errno;
    } else {
        code = write_owner(fd);
    }
    if (code != 0) {
        if (code != -EWOULDBLOCK) {
            (void)snprintf(error, LOCKFILE_ERROR_BYTES, "%.300s cannot be locked: %s", path,
                           strerror(-code));
        }
        (void)close(fd); /* nothing was written that matters */
        return code;
    }
    *ret_fd = fd;
    return 0;
}
