#include "daemon/snapshot/snapshot_manifest.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "daemon/answer.h"
#include "daemon/options_json.h"
#include "daemon/sha256_file.h"
#include "daemon/tag_json.h"
#include "daemon/times.h"

/* --- the files ----------------------------------------------------------------------------------
 */

static int add_file(json_t **files, int folder_fd, const char *name, uint64_t *bytes,
                    struct store_error *error)
{
    char sum[SHA256_TEXT_BYTES];
    uint64_t size = 0;
    int fd = openat(folder_fd, name, O_RDONLY | O_NOFOLLOW | O_CLOEXEC);
    if (fd < 0) {
        return snapshot_fail(error, name, errno);
    }
    int result = sha256_file(fd, sum, &size);
    (void)close(fd); /* it was only read */
    if (result < 0) {
        return snapshot_fail(error, name, -result);
    }
    *bytes += size;
    answer_append(files, json_pack("{s:s, s:o, s:s}", "name", name, "bytes", answer_count(size),
                                   "sha256", sum));
    return STORE_OK;
}

static int is_file(const struct dirent *entry)
{
    return entry->d_name[0] != '.';
}

/* By name, with sizes and sums. */
static int list_files(struct export_part *part, json_t **ret_files, uint64_t *bytes,
                      struct store_error *error)
{
    struct dirent **names = NULL;
    int folder_fd = export_part_fd(part);
    int count = scandirat(folder_fd, ".", &names, is_file, alphasort);
    if (count < 0) {
        return snapshot_fail(error, SNAPSHOT_MANIFEST, errno);
    }
    json_t *files = json_array();
    int code = STORE_OK;
    for (int i = 0; i < count; i++) {
        if (code == STORE_OK) {
            code = add_file(&files, folder_fd, names[i]->d_name, bytes, error);
        }
        free(names[i]);
    }
    free(names);
    *ret_files = files;
    return code;
}

/* --- the manifest -------------------------------------------------------------------------------
 */

static json_t *counts_json(const struct snapshot_counts *counts)
{
    json_t *object = json_object();
    answer_add(&object, "items", answer_count(counts->items));
    answer_add(&object, "tags", answer_count(counts->tags));
    answer_add(&object, "words", answer_count(counts->words));
    answer_add(&object, "weights", answer_count(counts->weights));
    return object;
}

/* Takes the files. */
static json_t *manifest_json(const struct snapshot_manifest *manifest, json_t *files)
{
    char time[TIMES_BYTES];
    times_format(manifest->at_ms, time);
    json_t *object = json_object();
    answer_add(&object, "format", json_integer(SNAPSHOT_FORMAT));
    answer_add(&object, "version", json_string(UNDERTAG_VERSION));
    answer_add(&object, "name", json_string(manifest->name));
    answer_add(&object, "named", json_boolean(manifest->is_named));
    answer_add(&object, "seq", answer_count(manifest->seq));
    answer_add(&object, "at", json_string(time));
    answer_add(&object, "counts", counts_json(&manifest->counts));
    answer_add(&object, "settings", options_json(manifest->learning, OPTIONS_IN(OPTIONS_LEARNING)));
    answer_add(&object, "propensity", tag_curve_json(manifest->fit));
    answer_add(&object, "files", files);
    return object;
}

int snapshot_manifest_write(struct export_part *part, const struct snapshot_manifest *manifest,
                            struct pace *pace, uint64_t *ret_bytes, struct store_error *error)
{
    json_t *files = NULL;
    struct stat status;
    uint64_t bytes = 0;
    int code = list_files(part, &files, &bytes, error);
    if (code != STORE_OK) {
        json_decref(files);
        return code;
    }
    code =
        snapshot_file_write(part, SNAPSHOT_MANIFEST, manifest_json(manifest, files), pace, error);
    if (code == STORE_OK && fstatat(export_part_fd(part), SNAPSHOT_MANIFEST, &status, 0) < 0) {
        code = snapshot_fail(error, SNAPSHOT_MANIFEST, errno);
    }
    if (code == STORE_OK) {
        *ret_bytes = bytes + (uint64_t)status.st_size;
    }
    return code;
}

/* --- reading ------------------------------------------------------------------------------------
 */

static int take(const json_t *object, struct snapshot_found *ret_found)
{
    struct snapshot_found found = {0};
    json_int_t format = json_integer_value(json_object_get(object, "format"));
    const char *name = json_string_value(json_object_get(object, "name"));
    const char *at = json_string_value(json_object_get(object, "at"));
    const json_t *seq = json_object_get(object, "seq");
    const json_t *files = json_object_get(object, "files");
    if (format < 1 || format > SNAPSHOT_FORMAT || !name || !export_name_is_valid(name) || !at ||
        !times_parse(at, &found.at_ms) || !json_is_integer(seq) || !json_is_array(files)) {
        return -EINVAL;
    }
    for (size_t i = 0; i < json_array_size(files); i++) {
        const json_t *bytes = json_object_get(json_array_get(files, i), "bytes");
        found.bytes += (uint64_t)json_integer_value(bytes);
    }
    found.is_named = json_is_true(json_object_get(object, "named"));
    found.seq = (uint64_t)json_integer_value(seq);
    (void)stpcpy(found.name, name); /* a valid name fits */
    *ret_found = found;
    return 0;
}

int snapshot_manifest_read(FILE *stream, struct snapshot_found *ret_found)
{
    json_t *object = json_loadf(stream, JSON_REJECT_DUPLICATES, NULL);
    long bytes = ftell(stream);
    int result = take(object, ret_found);
    json_decref(object);
    if (result == 0 && bytes > 0) {
        ret_found->bytes += (uint64_t)bytes;
    }
    return result;
}
