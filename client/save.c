/*
 * Happy path: resolve symbolic links, make a temporary file in the same folder, write, sync, give
 * it the mode of an ordinary new file (or that of the file it takes the place of), rename. Whatever
 * fails before the rename removes the temporary file.
 */
#include "client/save.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

static int fail_save(const char *path, int error, struct failure *failure)
{
    return failure_set(failure, error == EACCES || error == EPERM ? FAILURE_FORBIDDEN : FAILURE_IO,
                       "%.500s cannot be written: %s", path, strerror(error));
}

/* The folder of a path, as a copy; NULL: no memory. */
static char *folder_of(const char *path)
{
    const char *slash = strrchr(path, '/');
    if (!slash) {
        return strdup(".");
    }
    return slash == path ? strdup("/") : strndup(path, (size_t)(slash - path));
}

static int check_folder(const char *path, const char *folder, struct failure *failure)
{
    struct stat found;
    if (stat(folder, &found)) {
        int error = errno;
        if (error == ENOENT) {
            return failure_set(failure, FAILURE_IO,
                               "%.500s cannot be written: there is no folder %.300s", path, folder);
        }
        return fail_save(path, error, failure);
    }
    if (!S_ISDIR(found.st_mode)) {
        return failure_set(failure, FAILURE_IO, "%.500s cannot be written: %.300s is no folder",
                           path, folder);
    }
    return access(folder, W_OK | X_OK) ? fail_save(path, errno, failure) : 0;
}

int save_check(const char *path, struct failure *failure)
{
    struct stat found;
    char *folder = folder_of(path);
    if (!folder) {
        return failure_memory(failure);
    }
    int code = check_folder(path, folder, failure);
    free(folder);
    if (!code && (!*path || path[strlen(path) - 1] == '/' ||
                  (stat(path, &found) == 0 && !S_ISREG(found.st_mode)))) {
        code = failure_set(failure, FAILURE_IO, "%.500s cannot be written: it is not a file", path);
    }
    return code;
}

/* The mode for the file: of what stands there now, or of any new file. */
static mode_t mode_for(const char *path)
{
    struct stat found;
    if (stat(path, &found) == 0) {
        return found.st_mode & 0777;
    }
    mode_t mask = umask(0);
    (void)umask(mask); /* there is no other way to ask; it returns what was set */
    return 0666 & ~mask;
}

static int write_all(int fd, const char *bytes, size_t length)
{
    while (length > 0) {
        ssize_t written = write(fd, bytes, length);
        if (written < 0 && errno != EINTR) {
            return -1;
        }
        bytes += written > 0 ? written : 0;
        length -= written > 0 ? (size_t)written : 0;
    }
    return 0;
}

/* Fills `temporary`, which exists as `fd`, and renames it; 0 or an errno. Closes `fd`. */
static int fill(int fd, const char *temporary, const char *target, const char *bytes, size_t length)
{
    int error = 0;
    if (write_all(fd, bytes, length) || fchmod(fd, mode_for(target)) || fsync(fd)) {
        error = errno;
    }
    if (close(fd) && !error) {
        error = errno;
    }
    if (!error && rename(temporary, target)) {
        error = errno;
    }
    return error;
}

int save_file(const char *path, const char *bytes, size_t length, struct failure *failure)
{
    char *temporary = NULL;
    char *target = NULL;
    int fd = -1;
    int error = 0;
    int code = save_check(path, failure);
    if (code) {
        return code;
    }
    target = realpath(path, NULL); /* NULL where nothing is there yet */
    if (!target) {
        target = strdup(path);
    }
    if (!target || asprintf(&temporary, "%s.XXXXXX", target) < 0) {
        temporary = NULL;
        code = failure_memory(failure);
        goto out;
    }
    fd = mkostemp(temporary, O_CLOEXEC);
    error = fd < 0 ? errno : fill(fd, temporary, target, bytes, length);
    if (error) {
        if (fd >= 0) {
            (void)unlink(temporary); /* there is nothing else to do about it */
        }
        code = fail_save(path, error, failure);
    }
out:
    free(temporary);
    free(target);
    return code;
}
