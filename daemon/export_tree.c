#include "daemon/export_tree.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdbool.h>
#include <stddef.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/* The folder's entries, through a descriptor of its own; NULL with errno set. */
static DIR *list(int folder)
{
    int fd = openat(folder, ".", O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    DIR *entries = fd >= 0 ? fdopendir(fd) : NULL;
    if (fd >= 0 && !entries) {
        int code = errno;
        (void)close(fd); /* nothing was written through it */
        errno = code;
    }
    return entries;
}

static bool is_dots(const char *name)
{
    return strcmp(name, ".") == 0 || strcmp(name, "..") == 0;
}

/* Calls `each` for all that is in the folder, until it returns a code below 0. */
static int walk(int folder, int (*each)(int folder, const char *name, int depth), int depth)
{
    if (depth > EXPORT_TREE_DEPTH) {
        return -ELOOP;
    }
    DIR *entries = list(folder);
    if (!entries) {
        return -errno;
    }
    int code = 0;
    while (code == 0) {
        errno = 0;
        const struct dirent *entry = readdir(entries); /* nobody else has this stream */
        if (!entry) {
            code = -errno;
            break;
        }
        if (!is_dots(entry->d_name)) {
            code = each(folder, entry->d_name, depth);
        }
    }
    (void)closedir(entries); /* it was only read */
    return code;
}

/* --- removing -----------------------------------------------------------------------------------
 */

static int remove_entry(int parent, const char *name, int depth) /* NOLINT(misc-no-recursion) */
{
    if (unlinkat(parent, name, 0) == 0) {
        return 0;
    }
    int code = -errno;
    if (code != -EISDIR && code != -EPERM) { /* POSIX has EPERM for a folder, Linux EISDIR */
        return code;
    }
    int folder = openat(parent, name, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    if (folder < 0) {
        return errno == ENOTDIR ? code : -errno;
    }
    code = walk(folder, remove_entry, depth + 1);
    (void)close(folder); /* nothing was written through it */
    if (code < 0) {
        return code;
    }
    return unlinkat(parent, name, AT_REMOVEDIR) < 0 ? -errno : 0;
}

int export_tree_remove(int parent, const char *name)
{
    return remove_entry(parent, name, 0);
}

/* --- syncing ------------------------------------------------------------------------------------
 */

static int sync_folder(int folder, int depth);

static int sync_entry(int parent, const char *name, int depth) /* NOLINT(misc-no-recursion) */
{
    struct stat status;
    int fd = openat(parent, name, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    if (fd < 0) {
        return -errno;
    }
    int code = fstat(fd, &status) < 0 ? -errno : 0;
    if (code == 0 && S_ISDIR(status.st_mode)) {
        code = sync_folder(fd, depth + 1);
    } else if (code == 0 && !S_ISREG(status.st_mode)) {
        code = -EINVAL;
    } else if (code == 0 && fsync(fd) < 0) {
        code = -errno;
    }
    (void)close(fd); /* nothing was written through it */
    return code;
}

static int sync_folder(int folder, int depth) /* NOLINT(misc-no-recursion) */
{
    int code = walk(folder, sync_entry, depth);
    return code == 0 && fsync(folder) < 0 ? -errno : code;
}

int export_tree_sync(int folder)
{
    return sync_folder(folder, 0);
}
