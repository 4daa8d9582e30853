/*
 * store_fixture: a store of logbook entries in a temporary home, for the tests of storage. Static
 * functions, since each test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TEST_STORE_FIXTURE_H
#define UNDERTAG_TEST_STORE_FIXTURE_H

#include <ftw.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "storage/items.h"
#include "storage/store.h"
#include "storage/vocabulary.h"

enum {
    FIXTURE_MAP_BYTES = 64 << 20,
    FIXTURE_PATH_BYTES = 512,
    FIXTURE_TAGS = 8 /* in a list of names */
};

/* --- temporary homes --- */

static inline void home_make(char home[FIXTURE_PATH_BYTES])
{
    const char *parent = getenv("TMPDIR");
    (void)snprintf(home, FIXTURE_PATH_BYTES, "%s/undertag-test-XXXXXX", parent ? parent : "/tmp");
    assert_non_null(mkdtemp(home));
}

static inline int home_remove_entry(const char *path, const struct stat *status, int kind,
                                    struct FTW *place)
{
    (void)status;
    (void)kind;
    (void)place;
    return remove(path);
}

static inline void home_remove(const char *home)
{
    assert_int_equal(nftw(home, home_remove_entry, 8, FTW_DEPTH | FTW_PHYS), 0);
}

/* How often a text stands in the bytes of a file. */
static inline size_t home_occurrences(const char *home, const char *file, const char *text)
{
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/%s", home, file);
    FILE *stream = fopen(path, "rb");
    assert_non_null(stream);
    assert_int_equal(fseek(stream, 0, SEEK_END), 0);
    size_t size = (size_t)ftell(stream);
    rewind(stream);
    char *bytes = malloc(size);
    assert_non_null(bytes);
    assert_int_equal(fread(bytes, 1, size, stream), size);
    assert_int_equal(fclose(stream), 0);
    size_t count = 0;
    const char *at = bytes;
    while ((at = memmem(at, size - (size_t)(at - bytes), text, strlen(text)))) {
        count++;
        at++;
    }
    free(bytes);
    return count;
}

/* --- a store in one --- */

struct fixture {
    char home[FIXTURE_PATH_BYTES];
    struct store_settings settings;
    struct store *store;
    struct codec_writer buffer;
    struct item_buffer reading;
};

static inline void fixture_open(struct fixture *fixture)
{
    struct store_error error = {0};
    int result = store_open(&fixture->settings, &fixture->store, &error);
    if (result != STORE_OK) {
        fail_msg("%s", error.text);
    }
}

static inline void fixture_close(struct fixture *fixture)
{
    store_close(fixture->store);
    fixture->store = NULL;
}

static inline int fixture_setup(void **state)
{
    struct fixture *fixture = calloc(1, sizeof *fixture);
    assert_non_null(fixture);
    home_make(fixture->home);
    fixture->settings =
        (struct store_settings){.home = fixture->home, .map_bytes = FIXTURE_MAP_BYTES};
    fixture_open(fixture);
    *state = fixture;
    return 0;
}

static inline int fixture_teardown(void **state)
{
    struct fixture *fixture = *state;
    store_close(fixture->store);
    home_remove(fixture->home);
    codec_deinit(&fixture->buffer);
    item_buffer_deinit(&fixture->reading);
    free(fixture);
    return 0;
}

/* --- views --- */

static inline struct store_view *fixture_read(struct fixture *fixture)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    assert_int_equal(store_read(fixture->store, &view, &error), STORE_OK);
    return view;
}

static inline struct store_view *fixture_write(struct fixture *fixture)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    assert_int_equal(store_write(fixture->store, &view, &error), STORE_OK);
    return view;
}

static inline void fixture_commit(struct store_view *view)
{
    struct store_error error = {0};
    if (store_commit(view, &error) != STORE_OK) {
        fail_msg("%s", error.text);
    }
}

static inline struct store_totals fixture_totals(struct fixture *fixture)
{
    struct store_view *view = fixture_read(fixture);
    struct store_totals totals = store_view_totals(view);
    store_end(view);
    return totals;
}

/* --- items and tags --- */

static inline struct store_text text_of(const char *text)
{
    return (struct store_text){.data = text, .size = strlen(text)};
}

static inline bool is_text(struct store_text text, const char *expected)
{
    return text.size == strlen(expected) && memcmp(text.data, expected, text.size) == 0;
}

/* Files in a view of its own; a tag that is not there is opened. */
static inline struct item_filed fixture_file(struct fixture *fixture, struct item_filing filing)
{
    struct store_error error = {0};
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    struct store_view *view = fixture_write(fixture);
    filing.open_unknown = true;
    int result = items_file(view, &filing, &fixture->buffer, &filed, &refusal, &error);
    if (result != STORE_OK) {
        fail_msg("%d: %s", result, error.text);
    }
    fixture_commit(view);
    return filed;
}

/* A filing with names in lists that end at NULL. */
struct names {
    const char *tags[FIXTURE_TAGS];
    const char *prompted[FIXTURE_TAGS];
    const char *declined[FIXTURE_TAGS];
};

static inline size_t texts_of(const char *const *names, struct store_text *texts)
{
    size_t count = 0;
    for (; count < FIXTURE_TAGS && names[count]; count++) {
        texts[count] = text_of(names[count]);
    }
    return count;
}

static inline struct item_filed fixture_file_as(struct fixture *fixture, struct item_filing filing,
                                                struct names names)
{
    struct store_text texts[3][FIXTURE_TAGS];
    filing.tags = texts[0];
    filing.tag_count = texts_of(names.tags, texts[0]);
    filing.prompted = texts[1];
    filing.prompted_count = texts_of(names.prompted, texts[1]);
    filing.declined = texts[2];
    filing.declined_count = texts_of(names.declined, texts[2]);
    return fixture_file(fixture, filing);
}

/* Files an entry that has only an id and a text. */
static inline struct item_filed fixture_file_text(struct fixture *fixture, const char *id,
                                                  const char *text)
{
    return fixture_file(fixture, (struct item_filing){.id = text_of(id), .text = text_of(text)});
}

static inline uint64_t fixture_withdraw(struct fixture *fixture, const char *id)
{
    struct store_error error = {0};
    uint64_t seq = 0;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(items_withdraw(view, text_of(id), 0, 0, &fixture->buffer, &seq, &error),
                     STORE_OK);
    fixture_commit(view);
    return seq;
}

/* Erases what was superseded up to a seq; returns how many records that were. */
static inline size_t fixture_erase(struct fixture *fixture, uint64_t learned)
{
    struct store_error error = {0};
    size_t erased = 0;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(store_erase_passed(view, learned, 1000, &erased, &error), STORE_OK);
    fixture_commit(view);
    return erased;
}

/* The record of a change; its texts are valid until the next one is read. */
static inline struct item_record fixture_record(struct fixture *fixture, uint64_t seq)
{
    struct store_error error = {0};
    struct item_record record = {0};
    struct store_view *view = fixture_read(fixture);
    int result = items_read(view, seq, &fixture->reading, &record, &error);
    store_end(view);
    if (result != STORE_OK) {
        fail_msg("change %llu: %d %s", (unsigned long long)seq, result, error.text);
    }
    return record;
}

static inline struct vocabulary_tag fixture_tag(struct fixture *fixture, const char *name)
{
    struct store_error error = {0};
    struct vocabulary_tag tag = {0};
    struct store_view *view = fixture_read(fixture);
    int result = vocabulary_find(view, name, strlen(name), &tag, &error);
    store_end(view);
    if (result != STORE_OK) {
        fail_msg("tag %s: %d %s", name, result, error.text);
    }
    return tag;
}

#endif
