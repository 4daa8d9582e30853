#include "daemon/snapshot/snapshot_room.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <sys/mman.h>
#include <unistd.h>

#include "daemon/snapshot/snapshot_file.h"

static const char WHAT[] = "what a snapshot needs meanwhile";

int snapshot_room_open(struct export_part *part, int *ret_fd, struct store_error *error)
{
    static const char NAME[] = "room";
    int fd = -1;
    int code = snapshot_file_open(part, NAME, &fd, error);
    if (code != STORE_OK) {
        return code;
    }
    if (unlinkat(export_part_fd(part), NAME, 0) < 0) {
        int errnum = errno;
        (void)close(fd); /* nothing is in it */
        return snapshot_fail(error, WHAT, errnum);
    }
    *ret_fd = fd;
    return STORE_OK;
}

int snapshot_room_make(struct export_part *part, size_t bytes, struct snapshot_room *ret_room,
                       struct store_error *error)
{
    int fd = -1;
    void *data = MAP_FAILED;
    int code = snapshot_room_open(part, &fd, error);
    if (code != STORE_OK) {
        return code;
    }
    int errnum = posix_fallocate(fd, 0, (off_t)bytes);
    if (errnum == 0) {
        data = mmap(NULL, bytes, PROT_READ | PROT_WRITE, MAP_SHARED, fd, 0);
        errnum = data == MAP_FAILED ? errno : 0;
    }
    (void)close(fd); /* the map holds the file */
    if (errnum != 0) {
        return snapshot_fail(error, WHAT, errnum);
    }
    *ret_room = (struct snapshot_room){.data = data, .bytes = bytes};
    return STORE_OK;
}

void snapshot_room_free(struct snapshot_room *room)
{
    if (room->data) {
        (void)munmap(room->data, room->bytes); /* it was mapped so */
        *room = (struct snapshot_room){0};
    }
}
