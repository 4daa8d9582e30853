#include "tests/faults/exports.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <jansson.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "daemon/sha256_file.h"

static void assert_file(const char *folder, const json_t *file)
{
    char path[PATH_MAX];
    char sum[SHA256_TEXT_BYTES];
    uint64_t bytes = 0;
    const char *name = json_string_value(json_object_get(file, "name"));
    assert_non_null(name);
    assert_in_range(snprintf(path, sizeof path, "%s/%s", folder, name), 1, sizeof path - 1);
    int fd = open(path, O_RDONLY | O_NOFOLLOW | O_CLOEXEC);
    if (fd < 0) {
        fail_msg("%s: %s", path, strerror(errno));
    }
    assert_int_equal(sha256_file(fd, sum, &bytes), 0);
    (void)close(fd); /* it was only read */
    assert_int_equal(bytes, json_integer_value(json_object_get(file, "bytes")));
    assert_string_equal(sum, json_string_value(json_object_get(file, "sha256")));
}

static void assert_snapshot(const char *folder)
{
    char path[PATH_MAX];
    json_error_t error;
    assert_in_range(snprintf(path, sizeof path, "%s/manifest.json", folder), 1, sizeof path - 1);
    json_t *manifest = json_load_file(path, JSON_REJECT_DUPLICATES, &error);
    if (!manifest) {
        fail_msg("%s: %s", path, error.text);
    }
    const json_t *files = json_object_get(manifest, "files");
    assert_true(json_array_size(files) > 0);
    for (size_t i = 0; i < json_array_size(files); i++) {
        assert_file(folder, json_array_get(files, i));
    }
    json_decref(manifest);
}

unsigned exports_assert_whole(const char *home)
{
    char path[PATH_MAX];
    unsigned count = 0;
    assert_in_range(snprintf(path, sizeof path, "%s/exports", home), 1, sizeof path - 1);
    DIR *exports = opendir(path);
    if (!exports) {
        assert_int_equal(errno, ENOENT);
        return 0;
    }
    const struct dirent *entry = NULL;
    while ((entry = readdir(exports))) { /* NOLINT(concurrency-mt-unsafe): no other thread */
        if (entry->d_name[0] != '.') {
            char folder[PATH_MAX];
            assert_in_range(snprintf(folder, sizeof folder, "%s/%s", path, entry->d_name), 1,
                            sizeof folder - 1);
            assert_snapshot(folder);
            count += strcmp(entry->d_name, "latest") != 0;
        }
    }
    (void)closedir(exports); /* it was only read */
    return count;
}
