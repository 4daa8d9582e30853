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
#include "storage/items_examine.h"
#include "storage/store.h"
#include "storage/vocabulary.h"

enum {
    FIXTURE_MAP_BYTES = 64 << 20,
    FIXTURE_PATH_BYTES = 512,
    FIXTURE_TAGS = 8, /* in a list of names */
    FIXTURE_TEXT_BYTES = 256
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

/* Adds a name to a text of FIXTURE_TEXT_BYTES, with a space between two. */
static inline void fixture_add_name(char *names, const char *name)
{
    size_t used = strlen(names);
    int length =
        snprintf(names + used, FIXTURE_TEXT_BYTES - used, "%s%s", used > 0 ? " " : "", name);
    assert_true(length > 0 && (size_t)length < FIXTURE_TEXT_BYTES - used);
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

/* The item of an id as it is now; its texts are valid until the next one is read. */
static inline struct item_record fixture_item(struct fixture *fixture, const char *id)
{
    struct store_error error = {0};
    uint64_t seq = 0;
    struct store_view *view = fixture_read(fixture);
    int result = items_find(view, text_of(id), &seq, &error);
    store_end(view);
    if (result != STORE_OK) {
        fail_msg("item %s: %d %s", id, result, error.text);
    }
    return fixture_record(fixture, seq);
}

static inline struct vocabulary_counts fixture_counts(struct fixture *fixture, const char *name)
{
    return fixture_tag(fixture, name).counts;
}

static inline void fixture_retire(struct fixture *fixture, const char *name)
{
    struct store_error error = {0};
    struct vocabulary_tag tag = fixture_tag(fixture, name);
    tag.state = VOCABULARY_RETIRED;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_put(view, &tag, &error), STORE_OK);
    fixture_commit(view);
}

/* That a set is that of the names in `expected`, in the order in which they were opened, with a
 * space between two. */
static inline void assert_names(struct fixture *fixture, struct numbers numbers,
                                const char *expected)
{
    char names[FIXTURE_TEXT_BYTES] = "";
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    for (size_t i = 0; i < numbers.count; i++) {
        struct vocabulary_tag tag = {0};
        assert_int_equal(vocabulary_get(view, numbers.list[i], &tag, &error), STORE_OK);
        fixture_add_name(names, tag.name);
    }
    store_end(view);
    assert_string_equal(names, expected);
}

/* --- what is said of items: each in a view of its own, committed whatever came of it --- */

struct said {
    int result;
    struct item_filed filed;
    struct item_refusal refusal;
    char missed[FIXTURE_TEXT_BYTES]; /* by a check: names with a space between two */
    char extra[FIXTURE_TEXT_BYTES];
};

static inline struct item_saying said_by(const char *who, const char *id)
{
    return (struct item_saying){.id = text_of(id), .who = text_of(who)};
}

struct rulings {
    const char *belongs[FIXTURE_TAGS];
    const char *denied[FIXTURE_TAGS];
};

static inline struct said fixture_rule(struct fixture *fixture, struct item_saying saying,
                                       struct rulings rulings)
{
    struct store_error error = {0};
    struct store_text texts[2][FIXTURE_TAGS];
    struct said said = {0};
    struct item_names belongs = {texts[0], texts_of(rulings.belongs, texts[0])};
    struct item_names denied = {texts[1], texts_of(rulings.denied, texts[1])};
    struct store_view *view = fixture_write(fixture);
    said.result = items_rule(view, &saying, belongs, denied, &fixture->buffer, &said.filed,
                             &said.refusal, &error);
    fixture_commit(view);
    return said;
}

/* A check says the tags of `names`. */
static inline struct said fixture_check(struct fixture *fixture, struct item_saying saying,
                                        bool is_random, struct names names)
{
    struct store_error error = {0};
    struct store_text texts[FIXTURE_TAGS];
    struct item_checked checked = {0};
    struct said said = {0};
    struct item_names tags = {texts, texts_of(names.tags, texts)};
    struct store_view *view = fixture_write(fixture);
    said.result = items_check(view, &saying, tags, is_random, &fixture->buffer, &said.filed,
                              &checked, &said.refusal, &error);
    fixture_commit(view);
    for (size_t i = 0; i < checked.missed_count; i++) {
        fixture_add_name(said.missed, checked.missed[i].name);
    }
    for (size_t i = 0; i < checked.extra_count; i++) {
        fixture_add_name(said.extra, checked.extra[i].name);
    }
    free(checked.missed);
    free(checked.extra);
    return said;
}

/* A second tagging with the tags of `names`; `filed_at` is its time. */
static inline struct said fixture_tag_again(struct fixture *fixture, struct item_saying saying,
                                            const char *filed_at, bool open_unknown,
                                            struct names names)
{
    struct store_error error = {0};
    struct store_text texts[FIXTURE_TAGS];
    struct said said = {0};
    struct item_names tags = {texts, texts_of(names.tags, texts)};
    struct store_view *view = fixture_write(fixture);
    said.result = items_tag_again(view, &saying, tags, text_of(filed_at), open_unknown,
                                  &fixture->buffer, &said.filed, &said.refusal, &error);
    fixture_commit(view);
    return said;
}

#endif
