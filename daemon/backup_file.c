#include "daemon/backup_file.h"

#include <errno.h>
#include <sys/statvfs.h>
#include <unistd.h>

enum {
    SYNC_BYTES = 8 << 20
};

int backup_file_ask_room(int fd, uint64_t bytes, uint64_t reserve_bytes)
{
    struct statvfs status;
    if (fstatvfs(fd, &status) < 0) {
        return -errno;
    }
    uint64_t left = (uint64_t)status.f_bavail * status.f_frsize;
    return left >= reserve_bytes && left - reserve_bytes > bytes ? 0 : -ENOSPC;
}

void backup_file_begin(struct backup_file *file, int fd, uint64_t reserve_bytes,
                       bool (*wrote)(void *user, size_t bytes), void *user)
{
    *file = (struct backup_file){
        .fd = fd, .reserve_bytes = reserve_bytes, .wrote = wrote, .user = user};
    sha256_init(&file->sum);
}

static int write_all(int fd, const unsigned char *at, size_t size)
{
    while (size > 0) {
        ssize_t written = write(fd, at, size);
        if (written < 0 && errno != EINTR) {
            return -errno;
        }
        at += written > 0 ? written : 0;
        size -= written > 0 ? (size_t)written : 0;
    }
    return 0;
}

/* What is written now reaches the disk, which must have its reserve still. */
static int settle(struct backup_file *file)
{
    if (fdatasync(file->fd) < 0) {
        return -errno;
    }
    file->unsynced = 0;
    return backup_file_ask_room(file->fd, 0, file->reserve_bytes);
}

int backup_file_take(void *user, const void *data, size_t size)
{
    struct backup_file *file = user;
    file->code = write_all(file->fd, data, size);
    if (file->code < 0) {
        return file->code;
    }
    sha256_update(&file->sum, size, data);
    file->bytes += size;
    file->unsynced += size;
    if (file->unsynced >= SYNC_BYTES) {
        file->code = settle(file);
    }
    if (file->code == 0 && !file->wrote(file->user, size)) {
        file->code = -ECANCELED;
    }
    return file->code;
}

int backup_file_end(struct backup_file *file, char text[SHA256_TEXT_BYTES])
{
    if (file->code == 0) {
        file->code = fsync(file->fd) < 0 ? -errno : 0;
    }
    sha256_text(&file->sum, text);
    return file->code;
}
