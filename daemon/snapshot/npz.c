/* libzip knows files by their paths, so the folder is named through /proc: whatever stands where it
 * stood, it is the folder that is open. */
#include "daemon/snapshot/npz.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <zip.h>

#include "daemon/snapshot/npy.h"
#include "daemon/snapshot/snapshot_file.h"

enum {
    PATH_BYTES = 160,
    FASTEST = 1 /* weights are coded in few bits: more takes longer and hardly makes it smaller */
};

void npz_format(struct npz_text *ret_text)
{
    static const char CSR[3] = {'c', 's', 'r'};
    npy_header_of(ret_text->bytes, "|S3", "()");
    memcpy(ret_text->bytes + NPY_HEADER_BYTES, CSR, sizeof CSR);
    ret_text->size = NPY_HEADER_BYTES + sizeof CSR;
}

void npz_shape(struct npz_text *ret_text, uint64_t rows, uint64_t columns)
{
    const int64_t shape[2] = {(int64_t)rows, (int64_t)columns};
    npy_header(ret_text->bytes, NPY_I8, 2);
    memcpy(ret_text->bytes + NPY_HEADER_BYTES, shape, sizeof shape);
    ret_text->size = NPY_HEADER_BYTES + sizeof shape;
}

struct packing {
    struct pace *pace;
    struct store_error *error;
    uint64_t bytes; /* of all members */
    uint64_t told;
    int code;
};

static void name_path(char path[PATH_BYTES], int folder_fd, const char *name)
{
    (void)snprintf(path, PATH_BYTES, "/proc/self/fd/%d/%s", folder_fd, name); /* our own names */
}

static int fail_zip(struct store_error *error, zip_error_t *reason)
{
    bool is_full = zip_error_code_system(reason) == ENOSPC;
    return store_fail(error, is_full ? STORE_FULL : STORE_DENIED, "%s: %s",
                      "weights.npz cannot be written", zip_error_strerror(reason));
}

static int add_member(zip_t *archive, int folder_fd, const struct npz_member *member,
                      struct packing *packing)
{
    char path[PATH_BYTES];
    struct stat status;
    zip_source_t *source = NULL;
    if (member->file) {
        name_path(path, folder_fd, member->file);
        if (fstatat(folder_fd, member->file, &status, AT_SYMLINK_NOFOLLOW) < 0) {
            return snapshot_fail(packing->error, member->file, errno);
        }
        packing->bytes += (uint64_t)status.st_size;
        source = zip_source_file(archive, path, 0, -1);
    } else {
        source = zip_source_buffer(archive, member->text->bytes, member->text->size, 0);
    }
    if (!source) {
        return fail_zip(packing->error, zip_get_error(archive));
    }
    zip_int64_t at = zip_file_add(archive, member->name, source, 0);
    if (at < 0) {
        zip_source_free(source);
        return fail_zip(packing->error, zip_get_error(archive));
    }
    return zip_set_file_compression(archive, (zip_uint64_t)at, ZIP_CM_DEFLATE, FASTEST) == 0
               ? STORE_OK
               : fail_zip(packing->error, zip_get_error(archive));
}

static void on_progress(zip_t *archive, double share, void *user)
{
    (void)archive;
    struct packing *packing = user;
    uint64_t done = (uint64_t)(share * (double)packing->bytes);
    if (packing->code == STORE_OK && done > packing->told) {
        packing->code = pace_add(packing->pace, done - packing->told, packing->error);
        packing->told = done;
    }
}

static int is_cancelled(zip_t *archive, void *user)
{
    (void)archive;
    const struct packing *packing = user;
    return packing->code != STORE_OK;
}

/* Writes all of it: before, nothing is in the file. */
static int close_archive(zip_t *archive, struct packing *packing)
{
    int code =
        zip_register_progress_callback_with_state(archive, 0.001, on_progress, NULL, packing);
    if (code == 0) {
        code = zip_register_cancel_callback_with_state(archive, is_cancelled, NULL, packing);
    }
    if (code == 0) {
        code = zip_close(archive);
    }
    if (code == 0) {
        return packing->code;
    }
    code = packing->code != STORE_OK ? packing->code
                                     : fail_zip(packing->error, zip_get_error(archive));
    zip_discard(archive);
    return code;
}

int npz_write(struct export_part *part, const char *name, const struct npz_member *members,
              size_t count, struct pace *pace, struct store_error *error)
{
    char path[PATH_BYTES];
    int folder_fd = export_part_fd(part);
    int failure = 0;
    struct packing packing = {.pace = pace, .error = error};
    name_path(path, folder_fd, name);
    zip_t *archive = zip_open(path, ZIP_CREATE | ZIP_EXCL, &failure);
    if (!archive) {
        zip_error_t reason;
        zip_error_init_with_code(&reason, failure);
        int code = fail_zip(error, &reason);
        zip_error_fini(&reason);
        return code;
    }
    for (size_t i = 0; i < count; i++) {
        int code = add_member(archive, folder_fd, &members[i], &packing);
        if (code != STORE_OK) {
            zip_discard(archive);
            return code;
        }
    }
    int code = close_archive(archive, &packing);
    /* As all other files are. */
    return code == STORE_OK && fchmodat(folder_fd, name, 0640, 0) < 0
               ? snapshot_fail(error, name, errno)
               : code;
}
