/*
 * Happy path: bar rebuilds and hold back erasing; begin a part in the exports; look through the
 * pages of both environments; copy the model, then the store, in pieces at the rate that was asked
 * for; look at what was written as at a home; write the note; have it reach the disk and take its
 * name.
 *
 * Failure paths: whatever fails, or is stopped, removes the part, and lets go of what was held. A
 * crash leaves the part for the next start to sweep.
 */
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "daemon/backup_file.h"
#include "daemon/backup_look.h"
#include "daemon/backup_note.h"
#include "daemon/backup_private.h"
#include "daemon/clock.h"
#include "storage/model_store.h"

enum {
    MOST_CREDIT_US = 100 * 1000 /* a stall is not made up for by a burst */
};

struct writing {
    struct backup *backup;
    struct backup_outcome *outcome;
    struct model_store *model;
    struct export_folder *folder;
    struct export_part *part;
    struct backup_note note;
    uint64_t due_us; /* when the next bytes may be written */
    bool holds;      /* the writer must not erase yet */
    bool lets_go;    /* with the next bytes it may */
};

/* --- what can go wrong --------------------------------------------------------------------------
 */

static int fail(struct writing *writing, int code, const char *sentence)
{
    (void)snprintf(writing->outcome->error, sizeof writing->outcome->error, "%s", sentence);
    writing->outcome->code = code;
    return code;
}

/* The sentence is there. */
static int fail_export(struct writing *writing, int code)
{
    writing->outcome->code = code;
    return code;
}

static int fail_store(struct writing *writing, const struct store_error *error)
{
    int code = error->code == STORE_NO_MEMORY ? -ENOMEM
               : error->code == STORE_FULL    ? -ENOSPC
               : error->code == STORE_CORRUPT ? -EBADMSG
                                              : -EIO;
    return fail(writing, code, error->text[0] ? error->text : store_code_sentence(error->code));
}

static int fail_file(struct writing *writing, int code, const char *what)
{
    char sentence[EXPORT_ERROR_BYTES];
    if (code == -ENOSPC) {
        (void)snprintf(sentence, sizeof sentence,
                       "the disk of %.300s has no room for it and the reserve (option "
                       "disk_reserve)",
                       export_folder_path(writing->folder));
    } else {
        (void)snprintf(sentence, sizeof sentence, "%s cannot be written to %.300s: %s", what,
                       export_folder_path(writing->folder), strerror(-code));
    }
    return fail(writing, code, sentence);
}

static int fail_name(struct writing *writing, int code)
{
    writing->outcome->is_name_wrong = true;
    return fail_export(writing, code);
}

/* --- holding ------------------------------------------------------------------------------------
 */

static void let_go(struct writing *writing)
{
    struct backup *backup = writing->backup;
    if (writing->holds) {
        writing->holds = false;
        backlog_hold(backup->settings.backlog, BACKLOG_BACKUP, UINT64_MAX);
        backup->settings.let_go(backup->settings.writer_user);
    }
}

static int bar_and_hold(struct writing *writing)
{
    const struct backup_settings *settings = &writing->backup->settings;
    if (!rebuild_bar(settings->rebuild)) {
        return fail(writing, -EBUSY,
                    "a rebuild is under way (see daemon.state): try again once it has ended");
    }
    shared_model_read(settings->shared);
    writing->model = settings->shared->store;
    shared_model_unlock(settings->shared);
    backlog_hold_kept(settings->backlog, BACKLOG_BACKUP);
    writing->holds = true;
    return 0;
}

/* --- the part -----------------------------------------------------------------------------------
 */

static void make_name(char name[EXPORT_NAME_BYTES])
{
    struct tm utc;
    time_t now = (time_t)(clock_wall_ms() / 1000);
    (void)gmtime_r(&now, &utc); /* of our own clock: the year has four digits */
    (void)strftime(name, EXPORT_NAME_BYTES, "backup-%Y%m%dT%H%M%SZ", &utc);
}

/* The name that was asked for, or that at the end of a path in the folder. */
static int take_name(struct writing *writing)
{
    const char *wanted = writing->backup->wanted.name;
    char *name = writing->outcome->name;
    char folder[BACKUP_WORD_BYTES];
    const char *slash = strrchr(wanted, '/');
    if (wanted[0] == '\0') {
        make_name(name);
        return 0;
    }
    if (slash) {
        (void)snprintf(folder, sizeof folder, "%.*s", (int)(slash - wanted + 1), wanted);
        if (!export_folder_is(writing->folder, folder)) {
            (void)snprintf(writing->outcome->error, sizeof writing->outcome->error,
                           "backups are written into %.300s (option export_dir), nowhere else",
                           export_folder_path(writing->folder));
            return fail_name(writing, -EINVAL);
        }
        wanted = slash + 1;
    }
    if (snprintf(name, EXPORT_NAME_BYTES, "%s", wanted) >= EXPORT_NAME_BYTES ||
        !export_name_is_valid(name)) {
        struct export_part *none = NULL; /* it says what a name is */
        return fail_name(
            writing, export_folder_begin(writing->folder, wanted, &none, writing->outcome->error));
    }
    return 0;
}

static int begin_part(struct writing *writing)
{
    const struct backup_settings *settings = &writing->backup->settings;
    struct backup_outcome *outcome = writing->outcome;
    int code = export_folder_place(settings->home, settings->options->export_dir, outcome->path,
                                   sizeof outcome->path, outcome->error);
    if (code == 0) {
        code = export_folder_open(outcome->path, &writing->folder, outcome->error);
    }
    if (code < 0) {
        return fail_export(writing, code);
    }
    code = take_name(writing);
    if (code < 0) {
        return code;
    }
    code = export_folder_begin(writing->folder, outcome->name, &writing->part, outcome->error);
    if (code == -EEXIST) {
        return fail_name(writing, code);
    }
    if (code < 0) {
        return fail_export(writing, code);
    }
    (void)snprintf(outcome->path, sizeof outcome->path, "%s/%s",
                   export_folder_path(writing->folder), outcome->name); /* the kernel took it */
    return 0;
}

/* An environment that is looked through. The first fault is all that anybody reads. */
struct looking {
    const char *what;
    struct store_error error;
};

static void tell(void *user, const char *sentence)
{
    struct looking *looking = user;
    (void)store_fail(&looking->error, STORE_CORRUPT,
                     "%s is damaged (%s): undertagd --verify tells more", looking->what, sentence);
}

/* LMDB follows pages without a look: a damaged one would end the daemon. */
static int check_pages(struct writing *writing, int at)
{
    struct store *store = writing->backup->settings.store;
    struct looking looking = {.what = at == 0 ? "the model" : "the store"};
    int result = at == 0 ? model_store_check_pages(writing->model, tell, &looking, &looking.error)
                         : store_check_pages(store, tell, &looking, &looking.error);
    return result == STORE_OK && looking.error.code == STORE_OK
               ? 0
               : fail_store(writing, &looking.error);
}

/* There shall be room for all of it before anything is written. */
static int expect(struct writing *writing)
{
    const struct backup_settings *settings = &writing->backup->settings;
    struct store_error error = {0};
    uint64_t of_model = 0;
    uint64_t of_store = 0;
    if (model_store_copy_bytes(writing->model, &of_model, &error) != STORE_OK ||
        store_copy_bytes(settings->store, &of_store, &error) != STORE_OK) {
        return fail_store(writing, &error);
    }
    backup_tell(writing->backup, writing->outcome->name, of_model + of_store);
    int code = backup_file_ask_room(export_part_fd(writing->part), of_model + of_store,
                                    settings->options->disk_reserve_bytes);
    return code < 0 ? fail_file(writing, code, writing->outcome->name) : 0;
}

/* --- copying ------------------------------------------------------------------------------------
 */

static bool on_wrote(void *user, size_t bytes)
{
    struct writing *writing = user;
    uint64_t now_us = clock_steady_us();
    uint64_t least_us = now_us > MOST_CREDIT_US ? now_us - MOST_CREDIT_US : 0;
    if (writing->lets_go) {
        let_go(writing); /* the copy has its moment: what is erased now is in it */
    }
    writing->due_us = writing->due_us > least_us ? writing->due_us : least_us;
    writing->due_us += bytes * 1000000 / writing->backup->wanted.rate;
    return backup_count(writing->backup, bytes, writing->due_us);
}

static int fail_stopped(struct writing *writing)
{
    return fail(writing, -ECANCELED, "the daemon is stopping");
}

static int copy_environment(struct writing *writing, int at, struct backup_file *file,
                            struct store_error *error)
{
    if (at == 0) {
        return model_store_copy(writing->model, backup_file_take, file, error);
    }
    writing->lets_go = true;
    return store_copy(writing->backup->settings.store, backup_file_take, file, error);
}

static int copy_to(struct writing *writing, int at, int fd)
{
    struct store_error error = {0};
    struct backup_file file;
    struct backup_note_file *noted = &writing->note.files[at];
    backup_file_begin(&file, fd, writing->backup->settings.options->disk_reserve_bytes, on_wrote,
                      writing);
    int result = copy_environment(writing, at, &file, &error);
    if (result == STORE_OK) {
        result = backup_file_end(&file, noted->sha256) == 0 ? STORE_OK : STORE_STOPPED;
    }
    noted->bytes = file.bytes;
    writing->outcome->bytes += file.bytes;
    if (result == STORE_STOPPED) {
        return file.code == -ECANCELED ? fail_stopped(writing)
                                       : fail_file(writing, file.code, BACKUP_PATHS[at]);
    }
    return result == STORE_OK ? 0 : fail_store(writing, &error);
}

static int copy_file(struct writing *writing, int at)
{
    static const char *const FOLDERS[BACKUP_FILES] = {"model", "store"};
    char *error = writing->outcome->error;
    int fd = -1;
    int code = export_part_add_folder(writing->part, FOLDERS[at], error);
    if (code == 0) {
        code = export_part_add_file(writing->part, BACKUP_PATHS[at], &fd, error);
    }
    if (code < 0) {
        return fail_export(writing, code);
    }
    code = copy_to(writing, at, fd);
    if (close(fd) < 0 && code == 0) {
        code = fail_file(writing, -errno, BACKUP_PATHS[at]);
    }
    return code;
}

/* --- the note -----------------------------------------------------------------------------------
 */

static int look(struct writing *writing)
{
    char path[PATH_MAX];
    struct store_error error = {0};
    struct backup_found found = {0};
    if (export_part_path(writing->part, path, sizeof path) < 0) {
        return fail(writing, -ENAMETOOLONG, "the path of the backup is too long");
    }
    if (backup_look(path, writing->backup->settings.options->map_size_bytes, &found, &error) !=
        STORE_OK) {
        return fail_store(writing, &error);
    }
    writing->note.seq = found.seq;
    writing->note.learned = found.learned;
    writing->outcome->seq = found.seq;
    writing->outcome->learned = found.learned;
    return 0;
}

static int put_note(struct writing *writing, const char *text)
{
    int fd = -1;
    int code = export_part_add_file(writing->part, BACKUP_NOTE, &fd, writing->outcome->error);
    if (code < 0) {
        return fail_export(writing, code);
    }
    size_t size = strlen(text);
    ssize_t written = write(fd, text, size);
    code = written < 0 ? -errno : (size_t)written != size ? -ENOSPC : 0;
    if (close(fd) < 0 && code == 0) {
        code = -errno;
    }
    writing->outcome->bytes += size;
    return code < 0 ? fail_file(writing, code, BACKUP_NOTE) : 0;
}

static int write_note(struct writing *writing)
{
    times_format(clock_wall_ms(), writing->note.made);
    char *text = backup_note_write(&writing->note);
    int code = text ? put_note(writing, text) : fail(writing, -ENOMEM, "out of memory");
    free(text);
    return code;
}

/* --- all of it ----------------------------------------------------------------------------------
 */

static int write_part(struct writing *writing)
{
    int code = begin_part(writing);
    for (int at = 0; at < BACKUP_FILES && code == 0; at++) {
        code = check_pages(writing, at);
    }
    if (code == 0) {
        code = expect(writing);
    }
    for (int at = 0; at < BACKUP_FILES && code == 0; at++) {
        code = copy_file(writing, at);
    }
    if (code == 0) {
        code = look(writing);
    }
    if (code == 0) {
        code = write_note(writing);
    }
    if (code == 0) {
        code = export_part_commit_take(writing->part, writing->outcome->error);
        writing->part = NULL;
        code = code < 0 ? fail_export(writing, code) : 0;
    }
    return code;
}

void backup_write(struct backup *backup, struct backup_outcome *outcome)
{
    struct writing writing = {.backup = backup, .outcome = outcome};
    if (bar_and_hold(&writing) < 0) {
        return;
    }
    if (write_part(&writing) < 0 && writing.part) {
        export_part_abort_take(writing.part);
    }
    export_folder_close(writing.folder);
    let_go(&writing);
    rebuild_unbar(backup->settings.rebuild);
}
