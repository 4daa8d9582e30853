/*
 * export_fixture: a folder of exports in a temporary folder, and the steps of those who write
 * there. Static functions, since each test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TEST_EXPORT_FIXTURE_H
#define UNDERTAG_TEST_EXPORT_FIXTURE_H

#include <errno.h>
#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include "daemon/export_folder.h"
#include "tests/unit/store_fixture.h"

enum {
    PATH_BYTES = FIXTURE_PATH_BYTES + 128
};

struct exports {
    char parent[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    struct export_folder *folder;
    char error[EXPORT_ERROR_BYTES];
};

static inline int set_up(void **state)
{
    static struct exports exports;
    exports = (struct exports){0};
    home_make(exports.parent);
    (void)snprintf(exports.path, sizeof exports.path, "%s/exports", exports.parent);
    assert_int_equal(export_folder_open(exports.path, &exports.folder, exports.error), 0);
    *state = &exports;
    return 0;
}

static inline int tear_down(void **state)
{
    struct exports *exports = *state;
    export_folder_close(exports->folder);
    home_remove(exports->parent);
    return 0;
}

/* --- steps --- */

static inline const char *at(const struct exports *exports, const char *name)
{
    static char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/%s", exports->path, name);
    return path;
}

static inline bool is_there(const struct exports *exports, const char *name)
{
    struct stat status;
    return lstat(at(exports, name), &status) == 0;
}

static inline void write_text(const char *path, const char *text)
{
    FILE *file = fopen(path, "w");
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fclose(file), 0);
}

static inline void assert_text(const char *path, const char *expected)
{
    char text[64] = "";
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    assert_int_equal(fread(text, 1, sizeof text - 1, file), strlen(expected));
    assert_int_equal(fclose(file), 0);
    assert_string_equal(text, expected);
}

static inline struct export_part *begin(struct exports *exports, const char *name)
{
    struct export_part *part = NULL;
    int code = export_folder_begin(exports->folder, name, &part, exports->error);
    if (code != 0) {
        fail_msg("%d: %s", code, exports->error);
    }
    return part;
}

/* Begins one with the file `log` in it and the file `lamps` in a folder `store`. */
static inline struct export_part *begin_full(struct exports *exports, const char *name)
{
    static const char *const files[] = {"log", "store/lamps"};
    struct export_part *part = begin(exports, name);
    assert_int_equal(export_part_add_folder(part, "store", exports->error), 0);
    for (size_t i = 0; i < 2; i++) {
        int fd = -1;
        assert_int_equal(export_part_add_file(part, files[i], &fd, exports->error), 0);
        assert_int_equal(write(fd, name, strlen(name)), strlen(name));
        assert_int_equal(close(fd), 0);
    }
    return part;
}

static inline void write_one(struct exports *exports, const char *name)
{
    struct export_part *part = begin_full(exports, name);
    int code = export_part_commit_take(part, exports->error);
    if (code != 0) {
        fail_msg("%d: %s", code, exports->error);
    }
}

#endif
