/*
 * Happy path: open the folder once; make `.NAME.part` in it; let the caller write; sync all that
 * was written, rename the part to NAME where there is none, sync the folder. Removing goes the same
 * way back: rename to `.NAME.part`, sync, remove.
 *
 * Failure paths: a part that cannot be whole is removed. What cannot be removed, and what a crash
 * has left, still is a `.NAME.part`, which nobody takes for a NAME and the next sweep removes.
 */
#include "daemon/export_folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "daemon/export_tree.h"

#define NAME_LETTERS "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789"

enum {
    PART_NAME_BYTES = EXPORT_NAME_BYTES + sizeof "..part"
};

static const char PART_END[] = ".part";
static const char LINK_PART[] = "." EXPORT_LATEST ".part"; /* no part: its name is not valid */

struct export_folder {
    char *path;
    int fd;
};

struct export_part {
    const struct export_folder *folder;
    int fd;
    char name[EXPORT_NAME_BYTES];
};

static int fail(char *error, int code, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

static int fail(char *error, int code, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(error, EXPORT_ERROR_BYTES, format, arguments); /* what is too long is cut */
    va_end(arguments);
    return code;
}

/* For what the system has refused. */
static int fail_at(char *error, int code, const struct export_folder *folder, const char *name,
                   const char *what)
{
    return fail(error, code, "%.300s/%.70s cannot be %s: %s", folder->path, name, what,
                strerror(-code));
}

/* --- names --------------------------------------------------------------------------------------
 */

bool export_name_is_valid(const char *name)
{
    size_t bytes = strspn(name, NAME_LETTERS "-_.");
    return bytes > 0 && bytes < EXPORT_NAME_BYTES && name[bytes] == '\0' && name[0] != '.' &&
           name[0] != '-' && strcmp(name, EXPORT_LATEST) != 0;
}

static int refuse_name(char *error, const char *name)
{
    return fail(error, -EINVAL,
                "'%.80s' is no name for an export: it has 1 to 64 letters, digits, '-', '_' and "
                "'.', does not begin with '.' or '-', and is not '" EXPORT_LATEST "'",
                name);
}

static void make_part_name(char text[PART_NAME_BYTES], const char *name)
{
    (void)snprintf(text, PART_NAME_BYTES, ".%s%s", name, PART_END); /* a valid name fits */
}

static bool is_part_name(const char *text)
{
    char name[PART_NAME_BYTES];
    size_t bytes = strlen(text);
    size_t end = sizeof PART_END - 1;
    if (text[0] != '.' || bytes <= 1 + end || bytes >= sizeof name ||
        strcmp(text + bytes - end, PART_END) != 0) {
        return false;
    }
    memcpy(name, text + 1, bytes - 1 - end);
    name[bytes - 1 - end] = '\0';
    return export_name_is_valid(name);
}

/* A path inside a part: valid names with single slashes between them. */
static bool is_part_path(const char *path)
{
    char name[EXPORT_NAME_BYTES];
    for (;;) {
        size_t bytes = strcspn(path, "/");
        if (bytes >= sizeof name) {
            return false;
        }
        memcpy(name, path, bytes);
        name[bytes] = '\0';
        if (!export_name_is_valid(name)) {
            return false;
        }
        if (path[bytes] == '\0') {
            return true;
        }
        path += bytes + 1;
    }
}

/* What is there by that name, a link itself; 0 where nothing is, or a negative errno. */
static int kind_of(const struct export_folder *folder, const char *name, mode_t *ret_kind)
{
    struct stat status;
    if (fstatat(folder->fd, name, &status, AT_SYMLINK_NOFOLLOW) < 0) {
        *ret_kind = 0;
        return errno == ENOENT ? 0 : -errno;
    }
    *ret_kind = status.st_mode & S_IFMT;
    return 0;
}

/* --- the folder ---------------------------------------------------------------------------------
 */

int export_folder_place(const char *home, const char *export_dir, char *path, size_t size,
                        char *error)
{
    int length = export_dir[0] == '/' ? snprintf(path, size, "%s", export_dir)
                                      : snprintf(path, size, "%s/%s", home, export_dir);
    if (length < 0 || (size_t)length >= size) {
        return fail(error, -ENAMETOOLONG,
                    "the path of the folder %.200s (option export_dir) is "
                    "too long",
                    export_dir);
    }
    return 0;
}

static int check_owner(const struct export_folder *folder, char *error)
{
    struct stat status;
    if (fstat(folder->fd, &status) < 0) {
        int code = -errno;
        return fail(error, code, "%.300s cannot be looked at: %s", folder->path, strerror(-code));
    }
    if (status.st_uid != geteuid() && status.st_uid != 0) {
        return fail(error, -EPERM,
                    "%.300s belongs to user %lu, not to the daemon's: nothing is written there",
                    folder->path, (unsigned long)status.st_uid);
    }
    if ((status.st_mode & (S_IWGRP | S_IWOTH)) != 0) {
        return fail(error, -EPERM,
                    "%.300s can be written to by others (mode %03o): nothing is written there; "
                    "chmod go-w",
                    folder->path, (unsigned)(status.st_mode & 0777));
    }
    return 0;
}

static int open_there(struct export_folder *folder, char *error)
{
    folder->fd = open(folder->path, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    if (folder->fd >= 0) {
        return check_owner(folder, error);
    }
    int code = -errno;
    if (code == -ENOTDIR || code == -ELOOP) {
        return fail(error, -ENOTDIR, "%.300s is no folder", folder->path);
    }
    return fail(error, code, "the folder %.300s cannot be opened: %s", folder->path,
                strerror(-code));
}

/* With a slash behind it, a link would be followed. */
static char *copy_path(const char *path)
{
    size_t bytes = strlen(path);
    while (bytes > 1 && path[bytes - 1] == '/') {
        bytes--;
    }
    return strndup(path, bytes);
}

int export_folder_open_there(const char *path, struct export_folder **ret_folder, char *error)
{
    struct export_folder *folder = calloc(1, sizeof *folder);
    if (!folder) {
        return fail(error, -ENOMEM, "out of memory");
    }
    folder->fd = -1;
    folder->path = copy_path(path);
    int code = folder->path ? open_there(folder, error) : fail(error, -ENOMEM, "out of memory");
    if (code < 0) {
        export_folder_close(folder);
        return code;
    }
    *ret_folder = folder;
    return 0;
}

int export_folder_open(const char *path, struct export_folder **ret_folder, char *error)
{
    if (mkdir(path, 0750) < 0 && errno != EEXIST) {
        int code = -errno;
        return fail(error, code, "the folder %.300s cannot be made: %s", path, strerror(-code));
    }
    return export_folder_open_there(path, ret_folder, error);
}

void export_folder_close(struct export_folder *folder)
{
    if (!folder) {
        return;
    }
    if (folder->fd >= 0) {
        (void)close(folder->fd); /* nothing was written through it */
    }
    free(folder->path);
    free(folder);
}

int export_folder_fd(const struct export_folder *folder)
{
    return folder->fd;
}

const char *export_folder_path(const struct export_folder *folder)
{
    return folder->path;
}

bool export_folder_is(const struct export_folder *folder, const char *path)
{
    struct stat own;
    struct stat other;
    return fstat(folder->fd, &own) == 0 && stat(path, &other) == 0 && own.st_dev == other.st_dev &&
           own.st_ino == other.st_ino;
}

/* --- writing one --------------------------------------------------------------------------------
 */

static void part_free(struct export_part *part)
{
    if (part->fd >= 0) {
        (void)close(part->fd); /* a folder's descriptor: nothing was written through it */
    }
    free(part);
}

static int refuse_taken(const struct export_folder *folder, const char *name, char *error)
{
    mode_t kind = 0;
    int code = kind_of(folder, name, &kind);
    if (code < 0) {
        return fail_at(error, code, folder, name, "looked at");
    }
    return kind == 0 ? 0
                     : fail(error, -EEXIST, "%.300s/%s is there already: take another name",
                            folder->path, name);
}

static int make_part(struct export_part *part, char *error)
{
    const struct export_folder *folder = part->folder;
    char name[PART_NAME_BYTES];
    make_part_name(name, part->name);
    if (mkdirat(folder->fd, name, 0750) < 0) {
        int code = -errno;
        return code == -EEXIST ? fail(error, code,
                                      "%.300s/%s is in the way: it is being written, or the next "
                                      "start removes it",
                                      folder->path, name)
                               : fail_at(error, code, folder, name, "made");
    }
    part->fd = openat(folder->fd, name, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
    if (part->fd < 0) {
        int code = fail_at(error, -errno, folder, name, "opened");
        (void)unlinkat(folder->fd, name, AT_REMOVEDIR); /* else the next sweep does */
        return code;
    }
    return 0;
}

int export_folder_begin(struct export_folder *folder, const char *name,
                        struct export_part **ret_part, char *error)
{
    if (!export_name_is_valid(name)) {
        return refuse_name(error, name);
    }
    int code = refuse_taken(folder, name, error);
    if (code < 0) {
        return code;
    }
    struct export_part *part = calloc(1, sizeof *part);
    if (!part) {
        return fail(error, -ENOMEM, "out of memory");
    }
    part->folder = folder;
    part->fd = -1;
    (void)snprintf(part->name, sizeof part->name, "%s", name); /* a valid name fits */
    code = make_part(part, error);
    if (code < 0) {
        part_free(part);
        return code;
    }
    *ret_part = part;
    return 0;
}

int export_part_path(const struct export_part *part, char *path, size_t size)
{
    int length = snprintf(path, size, "%s/.%s%s", part->folder->path, part->name, PART_END);
    return length < 0 || (size_t)length >= size ? -ENAMETOOLONG : 0;
}

int export_part_fd(const struct export_part *part)
{
    return part->fd;
}

/* The sentence for something in a part; it names the place where it will be. */
static int fail_in(char *error, int code, const struct export_part *part, const char *path)
{
    return fail(error, code, "%.250s/%s/%.140s cannot be written: %s", part->folder->path,
                part->name, path, strerror(-code));
}

int export_part_add_folder(struct export_part *part, const char *path, char *error)
{
    if (!is_part_path(path)) {
        return fail_in(error, -EINVAL, part, path);
    }
    return mkdirat(part->fd, path, 0750) < 0 ? fail_in(error, -errno, part, path) : 0;
}

int export_part_add_file(struct export_part *part, const char *path, int *ret_fd, char *error)
{
    if (!is_part_path(path)) {
        return fail_in(error, -EINVAL, part, path);
    }
    int fd = openat(part->fd, path, O_RDWR | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0640);
    if (fd < 0) {
        return fail_in(error, -errno, part, path);
    }
    *ret_fd = fd;
    return 0;
}

static int give_name(const struct export_part *part, char *error)
{
    const struct export_folder *folder = part->folder;
    char name[PART_NAME_BYTES];
    make_part_name(name, part->name);
    if (renameat2(folder->fd, name, folder->fd, part->name, RENAME_NOREPLACE) < 0) {
        return fail_at(error, -errno, folder, part->name, "given its name");
    }
    return 0;
}

int export_part_commit_take(struct export_part *part, char *error)
{
    const struct export_folder *folder = part->folder;
    int code = export_tree_sync(part->fd);
    code = code < 0 ? fail_at(error, code, folder, part->name, "synced") : give_name(part, error);
    if (code < 0) {
        export_part_abort_take(part);
        return code;
    }
    if (fsync(folder->fd) < 0) {
        code = fail_at(error, -errno, folder, part->name, "synced");
    }
    part_free(part);
    return code;
}

void export_part_abort_take(struct export_part *part)
{
    char name[PART_NAME_BYTES];
    make_part_name(name, part->name);
    int code = export_tree_remove(part->folder->fd, name);
    (void)code; /* what is left, the next sweep removes */
    part_free(part);
}

/* --- those that are there -----------------------------------------------------------------------
 */

/* Removes the entry if it is a part, and counts it. */
static int sweep_entry(const struct export_folder *folder, const char *name, size_t *count,
                       char *error)
{
    mode_t kind = 0;
    int code = is_part_name(name) ? kind_of(folder, name, &kind) : 0;
    if (code == 0 && kind == S_IFDIR) {
        code = export_tree_remove(folder->fd, name);
        *count += code == 0 ? 1 : 0;
    }
    return code < 0 ? fail_at(error, code, folder, name, "removed") : 0;
}

int export_folder_sweep(struct export_folder *folder, size_t *ret_count, char *error)
{
    char later[EXPORT_ERROR_BYTES];
    size_t count = 0;
    int result = 0;
    *ret_count = 0;
    int fd = openat(folder->fd, ".", O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    DIR *entries = fd >= 0 ? fdopendir(fd) : NULL;
    if (!entries) {
        result = fail_at(error, -errno, folder, ".", "read");
        if (fd >= 0) {
            (void)close(fd); /* nothing was written through it */
        }
        return result;
    }
    for (;;) {
        errno = 0;
        const struct dirent *entry = readdir(entries); /* nobody else has this stream */
        if (!entry) {
            break;
        }
        int code = sweep_entry(folder, entry->d_name, &count, result == 0 ? error : later);
        result = result == 0 ? code : result;
    }
    if (errno != 0 && result == 0) {
        result = fail_at(error, -errno, folder, ".", "read");
    }
    (void)closedir(entries); /* it was only read */
    *ret_count = count;
    return result;
}

/* Whether EXPORT_LATEST is a link to NAME. */
static bool is_latest(const struct export_folder *folder, const char *name)
{
    char target[EXPORT_NAME_BYTES];
    ssize_t bytes = readlinkat(folder->fd, EXPORT_LATEST, target, sizeof target);
    return bytes > 0 && (size_t)bytes == strlen(name) && memcmp(target, name, (size_t)bytes) == 0;
}

static int need_folder(const struct export_folder *folder, const char *name, char *error)
{
    if (!export_name_is_valid(name)) {
        return refuse_name(error, name);
    }
    mode_t kind = 0;
    int code = kind_of(folder, name, &kind);
    if (code == 0 && kind != S_IFDIR) {
        code = kind == 0 ? -ENOENT : -ENOTDIR;
    }
    return code < 0 ? fail_at(error, code, folder, name, "found") : 0;
}

int export_folder_remove(struct export_folder *folder, const char *name, char *error)
{
    char part[PART_NAME_BYTES];
    int code = need_folder(folder, name, error);
    if (code < 0) {
        return code;
    }
    if (is_latest(folder, name) && unlinkat(folder->fd, EXPORT_LATEST, 0) < 0) {
        return fail_at(error, -errno, folder, EXPORT_LATEST, "removed");
    }
    make_part_name(part, name);
    if (renameat2(folder->fd, name, folder->fd, part, RENAME_NOREPLACE) < 0 ||
        fsync(folder->fd) < 0) {
        return fail_at(error, -errno, folder, name, "removed");
    }
    code = export_tree_remove(folder->fd, part);
    return code < 0 ? fail_at(error, code, folder, part, "removed") : 0;
}

int export_folder_point(struct export_folder *folder, const char *name, char *error)
{
    mode_t kind = 0;
    int code = need_folder(folder, name, error);
    if (code < 0) {
        return code;
    }
    code = kind_of(folder, EXPORT_LATEST, &kind);
    if (code == 0 && kind != 0 && kind != S_IFLNK) {
        return fail(error, -EEXIST, "%.300s/" EXPORT_LATEST " is in the way: it is no link",
                    folder->path);
    }
    (void)unlinkat(folder->fd, LINK_PART, 0); /* a crash may have left it; if not, it fails below */
    if (code == 0 &&
        (symlinkat(name, folder->fd, LINK_PART) < 0 ||
         renameat(folder->fd, LINK_PART, folder->fd, EXPORT_LATEST) < 0 || fsync(folder->fd) < 0)) {
        code = -errno;
    }
    return code < 0 ? fail_at(error, code, folder, EXPORT_LATEST, "set") : 0;
}
