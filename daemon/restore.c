/*
 * Happy path: look whether the home is free; hold the backup against its note; make the home and
 * take its lock; copy both files into HOME/.restore.part, summing them up once more; have them
 * reach the disk; rename `model` and, as the last step, `store` into place; remove the empty part.
 *
 * Failure paths: nothing is made before the backup is known to be whole. Later, what was copied is
 * removed again. A kill leaves `.restore.part`, with or without `model` beside it, and no `store`:
 * no daemon starts on that, and restoring again removes it first.
 */
#include "daemon/restore.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "daemon/backup_file.h"
#include "daemon/export_tree.h"
#include "daemon/home.h"

#define PART ".restore.part"

enum {
    PIECE_BYTES = 64 * 1024
};

static const char *const FOLDERS[BACKUP_FILES] = {"model", "store"};

struct restoring {
    const char *home;
    struct restore_source source;
    int into; /* the home */
    int part;
    uint64_t reserve_bytes;
    const char *export_dir;
    char *error;
};

static int fail_errno(const struct restoring *restoring, int code)
{
    if (code == -ENOSPC) {
        return restore_fail(restoring->error, EX_TEMPFAIL,
                            "the disk of %.300s has no room for the backup and the reserve (option "
                            "disk_reserve): nothing was restored",
                            restoring->home);
    }
    return restore_fail(restoring->error, EX_IOERR, "the backup cannot be restored into %.300s: %s",
                        restoring->home, strerror(-code));
}

/* --- whether the home is free -------------------------------------------------------------------
 */

struct contents {
    bool has_part;
    bool has_model;
    bool has_store;
    bool has_others;
};

/* What says nothing of whether it is a home: backups may be in it, even that which is restored. */
static bool is_of_exports(const char *name, const char *export_dir)
{
    size_t bytes = strcspn(export_dir, "/");
    return strlen(name) == bytes && memcmp(name, export_dir, bytes) == 0;
}

static void count_entry(struct contents *contents, const char *name, const char *export_dir)
{
    static const char *const PASSED_OVER[] = {".", "..", "lock", "lost+found"};
    for (size_t i = 0; i < sizeof PASSED_OVER / sizeof PASSED_OVER[0]; i++) {
        if (strcmp(name, PASSED_OVER[i]) == 0) {
            return;
        }
    }
    if (is_of_exports(name, export_dir)) {
        return;
    }
    if (strcmp(name, PART) == 0) {
        contents->has_part = true;
    } else if (strcmp(name, "model") == 0) {
        contents->has_model = true;
    } else if (strcmp(name, "store") == 0) {
        contents->has_store = true;
    } else {
        contents->has_others = true;
    }
}

/* What is in the home; nothing where it is not there. */
static int read_contents(const char *home, const char *export_dir, struct contents *ret_contents)
{
    *ret_contents = (struct contents){0};
    DIR *entries = opendir(home);
    if (!entries) {
        return errno == ENOENT ? 0 : -errno;
    }
    int code = 0;
    for (;;) {
        errno = 0;
        const struct dirent *entry = readdir(entries); /* nobody else has this stream */
        if (!entry) {
            code = -errno;
            break;
        }
        count_entry(ret_contents, entry->d_name, export_dir);
    }
    (void)closedir(entries); /* it was only read */
    return code;
}

/* A restore that was killed may have left its part, and the model: without its store it is
 * nobody's.
 */
static int check_free(const struct restoring *restoring, bool *ret_has_left)
{
    struct contents contents;
    int code = read_contents(restoring->home, restoring->export_dir, &contents);
    if (code == -EACCES || code == -ENOTDIR) {
        return restore_fail(restoring->error, code == -EACCES ? EX_NOPERM : EX_CANTCREAT,
                            "the home %.300s cannot be used: %s", restoring->home, strerror(-code));
    }
    if (code < 0) {
        return fail_errno(restoring, code);
    }
    if (contents.has_store || contents.has_others || (contents.has_model && !contents.has_part)) {
        return restore_fail(
            restoring->error, EX_CANTCREAT,
            "the home %.300s is not empty: a backup is restored into a home that is "
            "not there, or empty",
            restoring->home);
    }
    *ret_has_left = contents.has_part;
    return 0;
}

int restore_check(const char *home, char *error)
{
    struct contents contents;
    if (read_contents(home, "", &contents) < 0 || !contents.has_part || contents.has_store) {
        return 0; /* what cannot be read, opening the home will tell */
    }
    return restore_fail(error, EX_CONFIG,
                        "a backup was to be restored into the home %.300s, and that has not ended: "
                        "run undertagd --restore again",
                        home);
}

/* --- copying ------------------------------------------------------------------------------------
 */

static bool go_on(void *user, size_t bytes)
{
    (void)user;
    (void)bytes;
    return true;
}

static int copy_bytes(int from, struct backup_file *file)
{
    unsigned char piece[PIECE_BYTES];
    off_t at = 0;
    for (;;) {
        ssize_t got = pread(from, piece, sizeof piece, at);
        if (got == 0) {
            return 0;
        }
        if (got < 0 && errno != EINTR) {
            return -errno;
        }
        if (got > 0 && backup_file_take(file, piece, (size_t)got) != 0) {
            return file->code;
        }
        at += got > 0 ? got : 0;
    }
}

static int copy_to(const struct restoring *restoring, int at, int to)
{
    char sum[SHA256_TEXT_BYTES];
    struct backup_file file;
    backup_file_begin(&file, to, restoring->reserve_bytes, go_on, NULL);
    int code = copy_bytes(restoring->source.fds[at], &file);
    if (code == 0) {
        code = backup_file_end(&file, sum);
    }
    if (code < 0) {
        return fail_errno(restoring, code);
    }
    return strcmp(sum, restoring->source.note.files[at].sha256) == 0
               ? 0
               : restore_fail(restoring->error, EX_DATAERR,
                              "%.300s/%s is another than it was a moment ago",
                              restoring->source.folder, BACKUP_PATHS[at]);
}

static int copy_file(const struct restoring *restoring, int at)
{
    if (mkdirat(restoring->part, FOLDERS[at], 0700) < 0) {
        return fail_errno(restoring, -errno);
    }
    int to = openat(restoring->part, BACKUP_PATHS[at],
                    O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0600);
    if (to < 0) {
        return fail_errno(restoring, -errno);
    }
    int exit_code = copy_to(restoring, at, to);
    if (close(to) < 0 && exit_code == 0) {
        exit_code = fail_errno(restoring, -errno);
    }
    return exit_code;
}

/* --- the home -----------------------------------------------------------------------------------
 */

/* What is removed here is ours: the home was free. The part goes last: it says that this has not
 * ended. */
static int clear(const struct restoring *restoring)
{
    static const char *const NAMES[] = {"store", "model", PART};
    int code = 0;
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0] && code == 0; i++) {
        code = export_tree_remove(restoring->into, NAMES[i]);
        code = code == -ENOENT ? 0 : code;
    }
    return code;
}

static int make_part(struct restoring *restoring)
{
    int code =
        backup_file_ask_room(restoring->into, restoring->source.bytes, restoring->reserve_bytes);
    if (code == 0 && mkdirat(restoring->into, PART, 0700) < 0) {
        code = -errno;
    }
    if (code == 0) {
        restoring->part =
            openat(restoring->into, PART, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
        code = restoring->part < 0 ? -errno : 0;
    }
    return code < 0 ? fail_errno(restoring, code) : 0;
}

/* The store comes last: without it nothing takes this for a home. */
static int put_in_place(const struct restoring *restoring)
{
    int code = export_tree_sync(restoring->part);
    for (int at = 0; at < BACKUP_FILES && code == 0; at++) {
        code = renameat2(restoring->part, FOLDERS[at], restoring->into, FOLDERS[at],
                         RENAME_NOREPLACE) < 0 ||
                       fsync(restoring->into) < 0
                   ? -errno
                   : 0;
    }
    if (code < 0) {
        return fail_errno(restoring, code);
    }
    (void)unlinkat(restoring->into, PART, AT_REMOVEDIR); /* an empty folder hurts nobody */
    return 0;
}

static int fill_home(struct restoring *restoring)
{
    int code = clear(restoring);
    int exit_code = code < 0 ? fail_errno(restoring, code) : make_part(restoring);
    for (int at = 0; at < BACKUP_FILES && exit_code == 0; at++) {
        exit_code = copy_file(restoring, at);
    }
    if (exit_code == 0) {
        exit_code = put_in_place(restoring);
    }
    if (exit_code != 0) {
        code = clear(restoring);
        (void)code; /* what is left is no home, and restoring again removes it */
    }
    return exit_code;
}

/* The lock's exit codes are those of a daemon that starts. */
static int take_home(struct restoring *restoring, int *ret_lock)
{
    char error[HOME_ERROR_BYTES];
    bool has_left = false;
    int code = home_open(restoring->home, ret_lock, error);
    if (code < 0) {
        return restore_fail(restoring->error,
                            code == -EWOULDBLOCK                ? EX_TEMPFAIL
                            : code == -EACCES || code == -EPERM ? EX_NOPERM
                                                                : EX_CANTCREAT,
                            "%s", error);
    }
    int exit_code = check_free(restoring, &has_left); /* again, now that nobody else can fill it */
    if (exit_code == 0) {
        restoring->into = open(restoring->home, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
        exit_code = restoring->into < 0 ? fail_errno(restoring, -errno) : 0;
    }
    return exit_code;
}

static int restore(struct restoring *restoring)
{
    int lock = -1;
    int exit_code = take_home(restoring, &lock);
    if (exit_code == 0) {
        exit_code = fill_home(restoring);
    }
    const int fds[] = {restoring->part, restoring->into, lock};
    for (size_t i = 0; i < sizeof fds / sizeof fds[0]; i++) {
        if (fds[i] >= 0) {
            (void)close(fds[i]); /* folders, and the lock: nothing was written through them */
        }
    }
    return exit_code;
}

int restore_home(const char *home, const char *folder, const struct options *options, FILE *out,
                 char *error)
{
    bool has_left = false;
    struct restoring restoring = {.home = home,
                                  .into = -1,
                                  .part = -1,
                                  .reserve_bytes = options->disk_reserve_bytes,
                                  .export_dir = options->export_dir,
                                  .error = error};
    int exit_code = check_free(&restoring, &has_left);
    if (exit_code == 0) {
        exit_code = restore_source_open(folder, options->map_size_bytes, &restoring.source, error);
    }
    if (exit_code != 0) {
        return exit_code;
    }
    exit_code = restore(&restoring);
    restore_source_close(&restoring.source);
    const struct backup_note *note = &restoring.source.note;
    if (exit_code == 0 &&
        (fprintf(out,
                 "restored %s: %llu items up to change %llu, as of %s (learned up to change %llu); "
                 "start it with: undertagd --home %s\n",
                 folder, (unsigned long long)restoring.source.items, (unsigned long long)note->seq,
                 note->made, (unsigned long long)note->learned, home) < 0 ||
         fflush(out) != 0)) {
        exit_code = restore_fail(error, EX_IOERR,
                                 "it is restored, but standard output cannot be "
                                 "written");
    }
    return exit_code;
}
