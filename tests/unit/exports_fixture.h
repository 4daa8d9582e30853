/*
 * exports_fixture: a folder of exports in a temporary home, and one of them that is being written.
 */
#ifndef UNDERTAG_TESTS_EXPORTS_FIXTURE_H
#define UNDERTAG_TESTS_EXPORTS_FIXTURE_H

#include <fcntl.h>
#include <unistd.h>

#include "daemon/export_folder.h"
#include "daemon/pace.h"
#include "tests/unit/store_fixture.h"

struct exports {
    char parent[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    struct export_folder *folder;
    struct export_part *part; /* "spring" */
    struct pace pace;         /* without a limit */
    struct store_error error;
};

static inline int exports_set_up(void **state)
{
    static struct exports exports;
    char error[EXPORT_ERROR_BYTES];
    exports = (struct exports){0};
    home_make(exports.parent);
    (void)snprintf(exports.path, sizeof exports.path, "%s/exports", exports.parent);
    assert_int_equal(export_folder_open(exports.path, &exports.folder, error), 0);
    assert_int_equal(export_folder_begin(exports.folder, "spring", &exports.part, error), 0);
    pace_init(&exports.pace, 0);
    *state = &exports;
    return 0;
}

static inline int exports_tear_down(void **state)
{
    struct exports *exports = *state;
    export_part_abort_take(exports->part);
    export_folder_close(exports->folder);
    home_remove(exports->parent);
    return 0;
}

/* A file of the part, with these bytes. */
static inline void exports_add(struct exports *exports, const char *name, const void *bytes,
                               size_t size)
{
    char error[EXPORT_ERROR_BYTES];
    int fd = -1;
    assert_int_equal(export_part_add_file(exports->part, name, &fd, error), 0);
    assert_int_equal(write(fd, bytes, size), size);
    assert_int_equal(close(fd), 0);
}

/* All bytes of a file of the part; the caller frees them. */
static inline unsigned char *exports_bytes(struct exports *exports, const char *name,
                                           size_t *ret_size)
{
    int fd = openat(export_part_fd(exports->part), name, O_RDONLY | O_CLOEXEC);
    assert_true(fd >= 0);
    off_t size = lseek(fd, 0, SEEK_END);
    unsigned char *bytes = malloc((size_t)size + 1);
    assert_non_null(bytes);
    assert_int_equal(pread(fd, bytes, (size_t)size, 0), size);
    assert_int_equal(close(fd), 0);
    bytes[size] = '\0';
    *ret_size = (size_t)size;
    return bytes;
}

#endif
