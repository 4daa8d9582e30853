#include "daemon/backup_note.h"

#include <jansson.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

const char *const BACKUP_PATHS[BACKUP_FILES] = {"model/data.mdb", "store/data.mdb"};

static const char SUM[] = "sha256";

/* The sum of the note without its sum; false: no memory. */
static bool sum_up(const json_t *note, char text[SHA256_TEXT_BYTES])
{
    struct sha256_ctx sum;
    json_t *bare = json_copy((json_t *)note); /* it is only read */
    if (!bare) {
        return false;
    }
    (void)json_object_del(bare, SUM); /* it may not be there */
    char *bytes = json_dumps(bare, JSON_COMPACT | JSON_SORT_KEYS);
    json_decref(bare);
    if (!bytes) {
        return false;
    }
    sha256_init(&sum);
    sha256_update(&sum, strlen(bytes), (const uint8_t *)bytes);
    sha256_text(&sum, text);
    free(bytes);
    return true;
}

/* --- writing ------------------------------------------------------------------------------------
 */

static json_t *file_json(const struct backup_note *note, int at)
{
    return json_pack("{s:s, s:I, s:s}", "name", BACKUP_PATHS[at], "bytes",
                     (json_int_t)note->files[at].bytes, "sha256", note->files[at].sha256);
}

/* Takes the text; NULL: no memory, then or now. */
static char *with_line_end(char *text)
{
    char *ended = NULL;
    if (text && asprintf(&ended, "%s\n", text) < 0) {
        ended = NULL;
    }
    free(text);
    return ended;
}

char *backup_note_write(const struct backup_note *note)
{
    char sum[SHA256_TEXT_BYTES];
    char *text = NULL;
    json_t *json =
        json_pack("{s:i, s:s, s:s, s:I, s:I, s:[o, o]}", "format", BACKUP_FORMAT, "made",
                  note->made, "version", UNDERTAG_VERSION, "seq", (json_int_t)note->seq, "learned",
                  (json_int_t)note->learned, "files", file_json(note, 0), file_json(note, 1));
    if (json && sum_up(json, sum) && json_object_set_new(json, SUM, json_string(sum)) == 0) {
        text = with_line_end(json_dumps(json, JSON_INDENT(1)));
    }
    json_decref(json);
    return text;
}

/* --- reading ------------------------------------------------------------------------------------
 */

static int fail(struct store_error *error)
{
    return store_fail(error, STORE_CORRUPT,
                      BACKUP_NOTE " is damaged, or it is no note of a backup");
}

static bool read_count(const json_t *object, const char *name, uint64_t *ret_count)
{
    const json_t *value = json_object_get(object, name);
    json_int_t count = json_integer_value(value);
    *ret_count = (uint64_t)count;
    return json_is_integer(value) && count >= 0;
}

static bool read_text(const json_t *object, const char *name, char *text, size_t size)
{
    const char *value = json_string_value(json_object_get(object, name));
    if (!value || strlen(value) >= size) {
        return false;
    }
    (void)snprintf(text, size, "%s", value); /* it fits */
    return true;
}

static bool read_file(const json_t *files, size_t at, struct backup_note_file *file)
{
    const json_t *json = json_array_get(files, at);
    const char *name = json_string_value(json_object_get(json, "name"));
    return name && strcmp(name, BACKUP_PATHS[at]) == 0 && read_count(json, "bytes", &file->bytes) &&
           read_text(json, "sha256", file->sha256, sizeof file->sha256);
}

static bool is_as_written(const json_t *json)
{
    char sum[SHA256_TEXT_BYTES];
    const char *stated = json_string_value(json_object_get(json, SUM));
    return stated && sum_up(json, sum) && strcmp(sum, stated) == 0;
}

static int read_members(const json_t *json, struct backup_note *note, struct store_error *error)
{
    uint64_t format = 0;
    const json_t *files = json_object_get(json, "files");
    if (read_count(json, "format", &format) && format > BACKUP_FORMAT) {
        return store_fail(error, STORE_NEWER,
                          "the backup was written by a newer version of undertag (format %llu, "
                          "this version reads up to %d)",
                          (unsigned long long)format, BACKUP_FORMAT);
    }
    bool is_whole = format == BACKUP_FORMAT && is_as_written(json) &&
                    read_text(json, "made", note->made, sizeof note->made) &&
                    read_count(json, "seq", &note->seq) &&
                    read_count(json, "learned", &note->learned) &&
                    json_array_size(files) == BACKUP_FILES;
    for (size_t i = 0; i < BACKUP_FILES && is_whole; i++) {
        is_whole = read_file(files, i, &note->files[i]);
    }
    return is_whole ? STORE_OK : fail(error);
}

int backup_note_read(const char *text, size_t size, struct backup_note *ret_note,
                     struct store_error *error)
{
    struct backup_note note = {0};
    json_error_t reason;
    json_t *json = json_loadb(text, size, JSON_REJECT_DUPLICATES, &reason);
    if (!json) {
        return fail(error);
    }
    int code = read_members(json, &note, error);
    json_decref(json);
    if (code == STORE_OK) {
        *ret_note = note;
    }
    return code;
}
