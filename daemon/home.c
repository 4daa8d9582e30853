#include "daemon/home.h"

#include <errno.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

#include "daemon/lockfile.h"

static int fail(char *error, int code, const char *path)
{
    (void)snprintf(error, HOME_ERROR_BYTES, "the home %.300s cannot be used: %s", path,
                   strerror(-code));
    return code;
}

/* Makes every folder of the path that is not there. */
static int make_folders(char *path)
{
    for (char *slash = strchr(path + 1, '/'); slash; slash = strchr(slash + 1, '/')) {
        *slash = '\0';
        int failed = mkdir(path, 0700);
        *slash = '/';
        if (failed && errno != EEXIST) {
            return -errno;
        }
    }
    return mkdir(path, 0700) < 0 && errno != EEXIST ? -errno : 0;
}

int home_open(const char *path, int *ret_lock_fd, char *error)
{
    char buffer[PATH_MAX];
    int length = snprintf(buffer, sizeof buffer, "%s", path);
    if (length <= 0 || (size_t)length >= sizeof buffer - sizeof "/lock") {
        return fail(error, length <= 0 ? -ENOENT : -ENAMETOOLONG, path);
    }
    int code = make_folders(buffer);
    if (code < 0) {
        return fail(error, code, path);
    }
    char reason[LOCKFILE_ERROR_BYTES];
    (void)snprintf(buffer + length, sizeof buffer - (size_t)length, "/lock");
    code = lockfile_take(buffer, ret_lock_fd, reason);
    if (code == -EWOULDBLOCK) {
        (void)snprintf(error, HOME_ERROR_BYTES, "the home %.150s is in use: %.300s", path, reason);
        return code;
    }
    return code < 0 ? fail(error, code, path) : 0;
}
