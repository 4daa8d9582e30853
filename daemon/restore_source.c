#include "daemon/restore_source.h"

#include <errno.h>
#include <fcntl.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "daemon/backup_look.h"

int restore_fail(char *error, int exit_code, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(error, RESTORE_ERROR_BYTES, format, arguments); /* what is too long is cut */
    va_end(arguments);
    return exit_code;
}

static int exit_code_of(const struct store_error *error)
{
    return error->code == STORE_NEWER || error->code == STORE_CORRUPT ? EX_DATAERR
           : error->code == STORE_NO_MEMORY                           ? EX_OSERR
                                                                      : EX_IOERR;
}

static int fail_store(const struct restore_source *source, const struct store_error *reason,
                      char *error)
{
    return restore_fail(error, exit_code_of(reason), "the backup %.300s cannot be restored: %s",
                        source->folder,
                        reason->text[0] ? reason->text : store_code_sentence(reason->code));
}

/* A plain file in the folder, or a negative errno. */
static int open_file(int folder, const char *path)
{
    struct stat status;
    int fd = openat(folder, path, O_RDONLY | O_NOFOLLOW | O_NONBLOCK | O_CLOEXEC);
    if (fd < 0) {
        return -errno;
    }
    int code = fstat(fd, &status) < 0 ? -errno : S_ISREG(status.st_mode) ? 0 : -EINVAL;
    if (code < 0) {
        (void)close(fd); /* it was not even read */
        return code;
    }
    return fd;
}

static int fail_open(const struct restore_source *source, const char *path, int code, char *error)
{
    if (code == -ENOENT || code == -ELOOP || code == -ENOTDIR || code == -EINVAL) {
        return restore_fail(error, EX_DATAERR, "%.300s is no backup: it has no file %s",
                            source->folder, path);
    }
    return restore_fail(error, code == -EACCES ? EX_NOPERM : EX_IOERR, "%.300s/%s: %s",
                        source->folder, path, strerror(-code));
}

/* --- the note -----------------------------------------------------------------------------------
 */

static int read_note(struct restore_source *source, int folder, char *error)
{
    char text[BACKUP_NOTE_BYTES];
    struct store_error reason = {0};
    int fd = open_file(folder, BACKUP_NOTE);
    if (fd < 0) {
        return fail_open(source, BACKUP_NOTE, fd, error);
    }
    ssize_t size = read(fd, text, sizeof text);
    int code = errno;
    (void)close(fd); /* it was only read */
    if (size < 0) {
        return fail_open(source, BACKUP_NOTE, -code, error);
    }
    return backup_note_read(text, (size_t)size, &source->note, &reason) == STORE_OK
               ? 0
               : fail_store(source, &reason, error);
}

/* --- the files ----------------------------------------------------------------------------------
 */

static int check_file(struct restore_source *source, int folder, int at, char *error)
{
    const struct backup_note_file *noted = &source->note.files[at];
    char sum[SHA256_TEXT_BYTES];
    uint64_t bytes = 0;
    source->fds[at] = open_file(folder, BACKUP_PATHS[at]);
    if (source->fds[at] < 0) {
        return fail_open(source, BACKUP_PATHS[at], source->fds[at], error);
    }
    int code = sha256_file(source->fds[at], sum, &bytes);
    if (code < 0) {
        return fail_open(source, BACKUP_PATHS[at], code, error);
    }
    if (bytes != noted->bytes || strcmp(sum, noted->sha256) != 0) {
        return restore_fail(error, EX_DATAERR,
                            "%.300s/%s is damaged: it is not as it was written (" BACKUP_NOTE
                            " has its sum)",
                            source->folder, BACKUP_PATHS[at]);
    }
    source->bytes += bytes;
    return 0;
}

/* They are as written; but what was written must be for this version, and fit together. */
static int look(struct restore_source *source, size_t map_bytes, char *error)
{
    struct store_error reason = {0};
    struct backup_found found = {0};
    if (backup_look(source->folder, map_bytes, &found, &reason) != STORE_OK) {
        return fail_store(source, &reason, error);
    }
    if (found.seq != source->note.seq || found.learned != source->note.learned) {
        return restore_fail(error, EX_DATAERR,
                            "the backup %.300s is damaged: its files are not those of its note",
                            source->folder);
    }
    source->items = found.items;
    return 0;
}

static int check(struct restore_source *source, int folder, size_t map_bytes, char *error)
{
    int exit_code = read_note(source, folder, error);
    for (int at = 0; at < BACKUP_FILES && exit_code == 0; at++) {
        exit_code = check_file(source, folder, at, error);
    }
    return exit_code == 0 ? look(source, map_bytes, error) : exit_code;
}

int restore_source_open(const char *folder, size_t map_bytes, struct restore_source *ret_source,
                        char *error)
{
    struct restore_source source = {.folder = folder, .fds = {-1, -1}};
    int fd = open(folder, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd < 0) {
        int code = errno;
        return restore_fail(error, code == EACCES ? EX_NOPERM : EX_NOINPUT,
                            "the backup %.300s cannot be opened: %s", folder, strerror(code));
    }
    int exit_code = check(&source, fd, map_bytes, error);
    (void)close(fd); /* nothing was written through it */
    if (exit_code != 0) {
        restore_source_close(&source);
        return exit_code;
    }
    *ret_source = source;
    return 0;
}

void restore_source_close(struct restore_source *source)
{
    for (int at = 0; at < BACKUP_FILES; at++) {
        if (source->fds[at] >= 0) {
            (void)close(source->fds[at]); /* they were only read */
            source->fds[at] = -1;
        }
    }
}
