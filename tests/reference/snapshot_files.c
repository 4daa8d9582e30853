#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/reference/snapshot_files.h"

#include <fcntl.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>

#include "daemon/fields.h"
#include "daemon/text/tfidf.h"

enum {
    PATH_BYTES = 512,
    PREAMBLE_BYTES = 10, /* magic, version, length of the header */
    HEADER_BYTES = 256
};

double snapshot_number(const json_t *object, const char *name)
{
    const json_t *number = json_object_get(object, name);
    if (!json_is_number(number)) {
        fail_msg("there is no number %s", name);
    }
    return json_number_value(number);
}

/* --- arrays -------------------------------------------------------------------------------------
 */

static void make_path(const char *folder, const char *name, char path[PATH_BYTES])
{
    int length = snprintf(path, PATH_BYTES, "%s/%s", folder, name);
    assert_true(length > 0 && length < PATH_BYTES);
}

/* The NPY format, version 1.0 (NumPy Enhancement Proposal 1): "\x93NUMPY", two bytes of version,
 * two of the header's length, the header as a Python literal, the numbers. */
static void map_array(const char *folder, const char *name, const char *type,
                      struct snapshot_array *ret_array)
{
    char path[PATH_BYTES];
    char header[HEADER_BYTES] = "";
    struct stat status = {0};
    make_path(folder, name, path);
    int fd = open(path, O_RDONLY | O_CLOEXEC);
    assert_true(fd >= 0 && fstat(fd, &status) == 0);
    size_t bytes = (size_t)status.st_size;
    unsigned char *map = mmap(NULL, bytes, PROT_READ, MAP_PRIVATE, fd, 0);
    assert_true(map != MAP_FAILED && close(fd) == 0);
    assert_true(bytes > PREAMBLE_BYTES && memcmp(map, "\x93NUMPY\x01\x00", 8) == 0);
    size_t header_bytes = map[8] + 256U * map[9];
    assert_true(header_bytes < sizeof header && PREAMBLE_BYTES + header_bytes <= bytes);
    memcpy(header, map + PREAMBLE_BYTES, header_bytes);
    const char *descr = strstr(header, "'descr': '<");
    const char *shape = strstr(header, "'shape': (");
    assert_non_null(descr);
    assert_non_null(shape);
    assert_non_null(strchr(type, descr[11])); /* f, or i */
    size_t number_bytes = (size_t)(descr[12] - '0');
    size_t count = (size_t)strtoull(shape + strlen("'shape': ("), NULL, 10);
    assert_int_equal(PREAMBLE_BYTES + header_bytes + count * number_bytes, bytes);
    *ret_array = (struct snapshot_array){.numbers = map + PREAMBLE_BYTES + header_bytes,
                                         .count = count,
                                         .number_bytes = number_bytes,
                                         .map = map,
                                         .map_bytes = bytes};
}

static void unmap_array(struct snapshot_array *array)
{
    assert_int_equal(munmap(array->map, array->map_bytes), 0);
}

static size_t whole_at(const struct snapshot_array *array, size_t at)
{
    return array->number_bytes == sizeof(int32_t) ? (size_t)((const int32_t *)array->numbers)[at]
                                                  : (size_t)((const int64_t *)array->numbers)[at];
}

/* --- JSON ---------------------------------------------------------------------------------------
 */

static json_t *read_json(const char *folder, const char *name)
{
    char path[PATH_BYTES];
    json_error_t error;
    make_path(folder, name, path);
    json_t *value = json_load_file(path, JSON_REJECT_DUPLICATES, &error);
    if (!value) {
        fail_msg("%s: %s", path, error.text);
    }
    return value;
}

/* The lines of a file as an array. */
static json_t *read_lines(const char *folder, const char *name)
{
    char path[PATH_BYTES];
    char *line = NULL;
    size_t room = 0;
    make_path(folder, name, path);
    json_t *lines = json_array();
    FILE *file = fopen(path, "r");
    assert_true(file && lines);
    while (getline(&line, &room, file) > 0) {
        assert_int_equal(
            json_array_append_new(lines, json_loads(line, JSON_REJECT_DUPLICATES, NULL)), 0);
    }
    free(line);
    assert_int_equal(fclose(file), 0);
    return lines;
}

/* Where each line is, by one of its members. */
static json_t *index_lines(const json_t *lines, const char *member)
{
    json_t *places = json_object();
    for (size_t i = 0; i < json_array_size(lines); i++) {
        const char *name = json_string_value(json_object_get(json_array_get(lines, i), member));
        assert_non_null(name);
        assert_int_equal(json_object_set_new(places, name, json_integer((json_int_t)i)), 0);
    }
    assert_int_equal(json_object_size(places), json_array_size(lines));
    return places;
}

static void read_tags(struct snapshot_files *files, const char *folder)
{
    files->tag_lines = read_lines(folder, "tags.jsonl");
    files->rows = index_lines(files->tag_lines, "tag");
    files->tag_count = json_array_size(files->tag_lines);
    files->tags = calloc(files->tag_count + 1, sizeof *files->tags);
    assert_non_null(files->tags);
    for (size_t row = 0; row < files->tag_count; row++) {
        const json_t *line = json_array_get(files->tag_lines, row);
        files->tags[row] =
            (struct snapshot_tag){.name = json_string_value(json_object_get(line, "tag")),
                                  .bias = snapshot_number(line, "bias"),
                                  .count = snapshot_number(line, "count"),
                                  .unprompted = snapshot_number(line, "unprompted"),
                                  .p = snapshot_number(json_object_get(line, "propensity"), "p"),
                                  .p_allowed = snapshot_number(line, "p_allowed")};
    }
}

static void read_words(struct snapshot_files *files, const char *folder)
{
    json_t *lines = read_lines(folder, "words.jsonl");
    files->columns = index_lines(lines, "word");
    files->word_count = json_array_size(lines);
    files->holding = calloc(files->word_count + 1, sizeof *files->holding);
    files->x = calloc(files->word_count + 1, sizeof *files->x);
    assert_true(files->holding && files->x);
    for (size_t column = 0; column < files->word_count; column++) {
        files->holding[column] = snapshot_number(json_array_get(lines, column), "documents");
    }
    json_decref(lines);
}

static bool is_on(const json_t *object)
{
    return json_is_true(json_object_get(object, "on"));
}

static void read_text(struct snapshot_files *files, const char *folder)
{
    files->text = read_json(folder, "text.json");
    const json_t *words = json_object_get(files->text, "words");
    const json_t *stemming = json_object_get(words, "stemming");
    const struct features_settings settings = {
        .words = {.stemming = is_on(stemming),
                  .pairs = is_on(json_object_get(words, "pairs")),
                  .language = json_string_value(json_object_get(stemming, "language"))},
        .title_weight = snapshot_number(files->text, "title_weight"),
        .key = {1, 2}};
    assert_int_equal(features_new(&settings, &files->features), 0);
}

/* --- the snapshot -------------------------------------------------------------------------------
 */

void snapshot_files_open(struct snapshot_files *files, const char *folder)
{
    *files = (struct snapshot_files){0};
    map_array(folder, "weights_data.npy", "f", &files->data);
    map_array(folder, "weights_indices.npy", "i", &files->indices);
    map_array(folder, "weights_indptr.npy", "i", &files->indptr);
    read_tags(files, folder);
    read_words(files, folder);
    read_text(files, folder);
    files->calibration = read_json(folder, "calibration.json");
    assert_int_equal(files->indptr.count, files->tag_count + 1);
    assert_int_equal(files->indices.count, files->data.count);
    assert_int_equal(whole_at(&files->indptr, files->tag_count), files->data.count);
}

void snapshot_files_close(struct snapshot_files *files)
{
    unmap_array(&files->data);
    unmap_array(&files->indices);
    unmap_array(&files->indptr);
    features_free(files->features);
    json_decref(files->rows);
    json_decref(files->columns);
    json_decref(files->tag_lines);
    json_decref(files->text);
    json_decref(files->calibration);
    free(files->tags);
    free(files->holding);
    free(files->x);
}

size_t snapshot_files_row(const struct snapshot_files *files, const char *tag)
{
    const json_t *row = json_object_get(files->rows, tag);
    return row ? (size_t)json_integer_value(row) : files->tag_count;
}

/* --- from a draft to scores ---------------------------------------------------------------------
 */

static void extract(struct snapshot_files *files, const json_t *draft, struct field_list *fields)
{
    const char *title = json_string_value(json_object_get(draft, "title"));
    const char *text = json_string_value(json_object_get(draft, "text"));
    const json_t *given = json_object_get(draft, "fields");
    if (given) {
        assert_int_equal(field_list_fill(fields, given), 0);
    }
    const struct features_source source = {
        .title = title,
        .title_bytes = title ? strlen(title) : 0,
        .text = text,
        .text_bytes = text ? strlen(text) : 0,
        .language = json_string_value(json_object_get(draft, "language")),
        .fields = fields->entries,
        .field_count = fields->count};
    assert_int_equal(features_extract(files->features, &source, SIZE_MAX), 0);
}

static const json_t *column_of(const struct snapshot_files *files, const struct feature *feature)
{
    return json_object_getn(files->columns, feature->term, feature->term_bytes);
}

/* x of a term of a draft, before it is divided by the norm. */
static double weigh(const struct snapshot_files *files, const struct feature *feature)
{
    const json_t *column = column_of(files, feature);
    double holding = 1.0 + (column ? files->holding[json_integer_value(column)] : 0.0);
    double documents = 1.0 + snapshot_number(files->text, "documents");
    double share = holding > 1.0 ? 1.0 : snapshot_number(files->text, "unshared_share");
    return share * tfidf_frequency_weight((double)feature->frequency) *
           log(1.0 + documents / holding);
}

/* Fills files->x, or empties it again. */
static void set_x(struct snapshot_files *files, bool fill)
{
    size_t count = features_count(files->features);
    const struct feature *list = features_list(files->features);
    double squares = 0.0;
    for (size_t i = 0; i < count && fill; i++) {
        squares += weigh(files, &list[i]) * weigh(files, &list[i]);
    }
    for (size_t i = 0; i < count; i++) {
        const json_t *column = column_of(files, &list[i]);
        if (column) {
            files->x[json_integer_value(column)] =
                fill ? weigh(files, &list[i]) / sqrt(squares) : 0.0;
        }
    }
}

void snapshot_files_score(struct snapshot_files *files, const json_t *draft, double *ret_scores,
                          bool *ret_speaks)
{
    struct field_list fields = {0};
    const float *data = files->data.numbers;
    extract(files, draft, &fields);
    set_x(files, true);
    *ret_speaks = false;
    for (size_t row = 0; row < files->tag_count; row++) {
        double score = snapshot_number(files->calibration, "base_score") + files->tags[row].bias;
        size_t end = whole_at(&files->indptr, row + 1);
        for (size_t k = whole_at(&files->indptr, row); k < end; k++) {
            double x = files->x[whole_at(&files->indices, k)];
            score += (double)data[k] * x;
            *ret_speaks = *ret_speaks || x > 0.0;
        }
        ret_scores[row] = score;
    }
    set_x(files, false);
    field_list_deinit(&fields);
}
