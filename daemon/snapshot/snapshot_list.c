#include "daemon/snapshot/snapshot_list.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <unistd.h>

/* Opens the manifest of NAME; -1 where there is none. No link is followed. */
static int open_manifest(struct export_folder *folder, const char *name)
{
    int fd =
        openat(export_folder_fd(folder), name, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    if (fd < 0) {
        return -1;
    }
    int manifest = openat(fd, SNAPSHOT_MANIFEST, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    (void)close(fd); /* it was only looked into */
    return manifest;
}

static bool read_one(struct export_folder *folder, const char *name,
                     struct snapshot_found *ret_found)
{
    int fd = open_manifest(folder, name);
    FILE *stream = fd >= 0 ? fdopen(fd, "r") : NULL;
    if (!stream) {
        if (fd >= 0) {
            (void)close(fd); /* it was only read */
        }
        return false;
    }
    bool is_found = snapshot_manifest_read(stream, ret_found) == 0;
    (void)fclose(stream);                /* likewise */
    (void)stpcpy(ret_found->name, name); /* a valid one; whatever it was called when it was made */
    return is_found;
}

static int is_name(const struct dirent *entry)
{
    return export_name_is_valid(entry->d_name);
}

static int compare_found(const void *left, const void *right)
{
    const struct snapshot_found *a = left;
    const struct snapshot_found *b = right;
    if (a->at_ms != b->at_ms) {
        return a->at_ms < b->at_ms ? -1 : 1;
    }
    if (a->seq != b->seq) {
        return a->seq < b->seq ? -1 : 1;
    }
    return strcmp(a->name, b->name);
}

/* Where EXPORT_LATEST leads to; "" where there is no such link. */
static void read_latest(struct export_folder *folder, char name[EXPORT_NAME_BYTES])
{
    char target[EXPORT_NAME_BYTES + 1]; /* too long a one fills it */
    ssize_t length = readlinkat(export_folder_fd(folder), EXPORT_LATEST, target, sizeof target);
    bool fits = length > 0 && length < EXPORT_NAME_BYTES;
    memcpy(name, target, fits ? (size_t)length : 0);
    name[fits ? length : 0] = '\0';
}

int snapshot_list(struct export_folder *folder, struct snapshot_found **ret_list, size_t *ret_count,
                  char *error)
{
    struct dirent **names = NULL;
    char latest[EXPORT_NAME_BYTES];
    size_t found = 0;
    read_latest(folder, latest);
    int count = scandirat(export_folder_fd(folder), ".", &names, is_name, alphasort);
    int errnum = errno;
    struct snapshot_found *list = count >= 0 ? calloc((size_t)count + 1, sizeof *list) : NULL;
    for (int i = 0; i < count; i++) {
        if (list && read_one(folder, names[i]->d_name, &list[found])) {
            list[found].is_latest = strcmp(list[found].name, latest) == 0;
            found++;
        }
        free(names[i]);
    }
    free(names);
    if (!list) {
        errnum = count < 0 ? errnum : ENOMEM;
        (void)snprintf(error, EXPORT_ERROR_BYTES, "%.300s cannot be read: %s",
                       export_folder_path(folder), strerror(errnum));
        return -errnum;
    }
    if (found > 1) {
        qsort(list, found, sizeof *list, compare_found);
    }
    *ret_list = list;
    *ret_count = found;
    return 0;
}

/* Whether nobody holds it; nobody can lock what has no name any more. */
static bool is_free(struct export_folder *folder, const char *name)
{
    int fd = open_manifest(folder, name);
    if (fd < 0) {
        return false;
    }
    bool is_locked = flock(fd, LOCK_EX | LOCK_NB) < 0;
    (void)close(fd); /* it was only read */
    return !is_locked;
}

int snapshot_thin(struct export_folder *folder, size_t keep, size_t *ret_removed, char *error)
{
    struct snapshot_found *list = NULL;
    size_t count = 0;
    size_t unnamed = 0;
    *ret_removed = 0;
    int code = snapshot_list(folder, &list, &count, error);
    if (code < 0) {
        return code;
    }
    for (size_t i = 0; i < count; i++) {
        unnamed += !list[i].is_named;
    }
    for (size_t i = 0; i < count && unnamed > keep && code == 0; i++) {
        if (list[i].is_named) {
            continue;
        }
        unnamed--;
        if (!list[i].is_latest && is_free(folder, list[i].name)) {
            code = export_folder_remove(folder, list[i].name, error);
            *ret_removed += code == 0;
        }
    }
    free(list);
    return code;
}
