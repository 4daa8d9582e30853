/* The learner's model as stored: words, chunks of postings, tags, lists of figures, the worklist
 * and the head over them. What is held in memory is loaded; the rest is read through a view. */
#include "storage/model_store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/kv.h"
#include "storage/model_view.h"
#include "tests/unit/store_fixture.h"

/* --- fixture --- */

struct stored {
    char home[FIXTURE_PATH_BYTES];
    struct store_settings settings;
    struct model_store *store;
    struct store_error error;
    char seen[512]; /* what was read, in words */
    const char *stop_at;
};

static int setup(void **state)
{
    struct stored *stored = calloc(1, sizeof *stored);
    assert_non_null(stored);
    home_make(stored->home);
    stored->settings =
        (struct store_settings){.home = stored->home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&stored->settings, &stored->store, &stored->error), STORE_OK);
    *state = stored;
    return 0;
}

static int teardown(void **state)
{
    struct stored *stored = *state;
    model_store_close(stored->store);
    home_remove(stored->home);
    free(stored);
    return 0;
}

static void reopen(struct stored *stored)
{
    model_store_close(stored->store);
    stored->store = NULL;
    assert_int_equal(model_store_open(&stored->settings, &stored->store, &stored->error), STORE_OK);
}

static struct model_store_writing *begin(struct stored *stored)
{
    struct model_store_writing *writing = NULL;
    assert_int_equal(model_store_begin(stored->store, &writing, &stored->error), STORE_OK);
    return writing;
}

static void commit(struct stored *stored, struct model_store_writing *writing)
{
    assert_int_equal(model_store_commit(writing, &stored->error), STORE_OK);
}

static struct model_store_word word_of(const char *term, uint32_t number, uint32_t count)
{
    return (struct model_store_word){
        .term = term, .term_bytes = strlen(term), .number = number, .count = count};
}

static void put_word(struct stored *stored, struct model_store_writing *writing, const char *term,
                     uint32_t number, uint32_t count)
{
    struct model_store_word word = word_of(term, number, count);
    assert_int_equal(model_store_put_word(writing, &word, &stored->error), STORE_OK);
}

static void put_chunk(struct stored *stored, struct model_store_writing *writing, uint32_t word,
                      uint32_t number, const char *bytes)
{
    const struct model_store_chunk chunk = {
        .word = word, .number = number, .bytes = kv_bytes_of(bytes, strlen(bytes))};
    assert_int_equal(model_store_put_chunk(writing, &chunk, &stored->error), STORE_OK);
}

/* What its lists hold is read in test_model_view. */
static void put_entry(struct stored *stored, struct model_store_writing *writing, uint64_t number)
{
    const struct model_store_entry entry = {.number = number, .scored = 1ULL << 40U};
    assert_int_equal(model_store_put_entry(writing, &entry, &stored->error), STORE_OK);
}

/* --- what is there, in words --- */

__attribute__((format(printf, 2, 3))) static int say(struct stored *stored, const char *format, ...)
{
    size_t used = strlen(stored->seen);
    va_list arguments;
    va_start(arguments, format);
    (void)vsnprintf(stored->seen + used, sizeof stored->seen - used, format, arguments);
    va_end(arguments);
    bool stops = stored->stop_at && strstr(stored->seen, stored->stop_at);
    return stops ? STORE_STOPPED : STORE_OK;
}

static int see_tag(void *user, const struct model_store_tag *tag)
{
    return say(user, "tag %u x%u/%u %u:%u %u %g(%g) %g(%g); ", tag->number, tag->count,
               tag->unprompted, tag->given_halves, tag->trial_halves, tag->last_count,
               (double)tag->bias, (double)tag->bias_accumulator, (double)tag->shadow_bias,
               (double)tag->shadow_bias_accumulator);
}

static int see_figures(void *user, const struct model_store_figures *figures)
{
    int result = say(user, "figures %u/%u", figures->kind, figures->number);
    for (uint32_t i = 0; i < figures->count && result == STORE_OK; i++) {
        result = say(user, " %g", figures->values[i]);
    }
    return result == STORE_OK ? say(user, "; ") : result;
}

/* What is held in memory. */
static int load(struct stored *stored)
{
    struct model_store_sink sink = {.user = stored, .tag = see_tag, .figures = see_figures};
    struct model_view *view = NULL;
    assert_int_equal(model_view_open(stored->store, &view, &stored->error), STORE_OK);
    int result = model_view_load(view, &sink, &stored->error);
    model_view_close(view);
    return result;
}

static void see_words(struct stored *stored, struct model_view *view)
{
    static const char *const terms[] = {"fog", "gale", "ketch", "schoonerwreckage"};
    for (size_t i = 0; i < sizeof terms / sizeof terms[0]; i++) {
        struct model_store_word word;
        int result = model_view_word(view, terms[i], strlen(terms[i]), &word, &stored->error);
        assert_true(result == STORE_OK || result == STORE_NOT_FOUND);
        if (result == STORE_OK) {
            (void)say(stored, "word %.*s %u x%u; ", (int)word.term_bytes, word.term, word.number,
                      word.count);
        }
    }
}

static void see_chunks(struct stored *stored, struct model_view *view, uint32_t word)
{
    struct kv_bytes bytes;
    uint32_t number = 0;
    int result = STORE_OK;
    while ((result = model_view_chunk(view, word, number, &bytes, &stored->error)) == STORE_OK) {
        (void)say(stored, "chunk %u/%u %.*s; ", word, number++, (int)bytes.size,
                  (const char *)bytes.data);
    }
    assert_int_equal(result, STORE_NOT_FOUND);
}

static void see_entries(struct stored *stored, struct model_view *view)
{
    struct model_store_entry entry = {0};
    int result = STORE_OK;
    while ((result = model_view_entry_after(view, entry.number, &entry, &stored->error)) ==
           STORE_OK) {
        (void)say(stored, "entry %llu @%llu; ", (unsigned long long)entry.number,
                  (unsigned long long)entry.scored);
    }
    assert_int_equal(result, STORE_NOT_FOUND);
}

/* Words and chunks, what is held in memory, entries. */
static void assert_holds(struct stored *stored, const char *expected)
{
    struct model_view *view = NULL;
    stored->seen[0] = '\0';
    assert_int_equal(model_view_open(stored->store, &view, &stored->error), STORE_OK);
    see_words(stored, view);
    see_chunks(stored, view, 5);
    see_chunks(stored, view, 300);
    assert_int_equal(load(stored), STORE_OK);
    see_entries(stored, view);
    model_view_close(view);
    assert_string_equal(stored->seen, expected);
}

static void put_some_of_each(struct stored *stored)
{
    const double values[] = {1.5, -1e300};
    struct model_store_tag tag = {.number = 7,
                                  .count = 40,
                                  .unprompted = 31,
                                  .trial_halves = 5,
                                  .given_halves = 3,
                                  .bias = -0.5F,
                                  .bias_accumulator = 3.0F,
                                  .shadow_bias = 0.25F,
                                  .shadow_bias_accumulator = 2.0F,
                                  .last_count = 38};
    struct model_store_figures figures = {.kind = 1, .number = 127, .count = 2, .values = values};
    struct model_store_writing *writing = begin(stored);
    put_entry(stored, writing, 12);
    assert_int_equal(model_store_put_figures(writing, &figures, &stored->error), STORE_OK);
    assert_int_equal(model_store_put_tag(writing, &tag, &stored->error), STORE_OK);
    put_chunk(stored, writing, 5, 1, "second");
    put_chunk(stored, writing, 5, 0, "first");
    put_word(stored, writing, "gale", 5, 9);
    put_word(stored, writing, "fog", 300, 2);
    commit(stored, writing);
}

/* What is there beside words and chunks. */
#define IN_MEMORY "tag 7 x40/31 3:5 38 -0.5(3) 0.25(2); figures 1/127 1.5 -1e+300; "
#define REST IN_MEMORY "entry 12 @1099511627776; "

/* --- tests --- */

static void what_was_put_is_there_when_it_is_opened_again(void **state)
{
    struct stored *stored = *state;
    put_some_of_each(stored);
    reopen(stored);
    assert_holds(stored, "word fog 300 x2; word gale 5 x9; "
                         "chunk 5/0 first; chunk 5/1 second; " REST);
}

static void a_fresh_model_has_neither_head_nor_parts(void **state)
{
    struct stored *stored = *state;
    struct model_store_head head = {.learned = 77};
    assert_int_equal(model_store_read_head(stored->store, &head, &stored->error), STORE_NOT_FOUND);
    assert_int_equal(head.learned, 77);
    assert_holds(stored, "");
}

static void put_head(struct stored *stored, const struct model_store_head *head)
{
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_put_head(writing, head, &stored->error), STORE_OK);
    commit(stored, writing);
}

static void the_head_is_read_as_it_was_put(void **state)
{
    struct stored *stored = *state;
    struct model_store_head head = {.store_uuid = "fifteen letters",
                                    .settings = "loss=squared_hinge\nlanguage=\n",
                                    .learned = UINT64_MAX,
                                    .documents = 30300,
                                    .factor_count = 12,
                                    .factor_sum = 0.1,
                                    .latest = 1ULL << 50U,
                                    .evidence_items = 7,
                                    .curves_items = 6,
                                    .fit_halves = 5,
                                    .evidence_gain = 1e12,
                                    .words = 4000000000,
                                    .next_word = 4000000001,
                                    .postings = 1ULL << 40U,
                                    .pruned_unspecific = 21,
                                    .pruned_tiny = 22};
    struct model_store_head again = {0};
    put_head(stored, &head);
    reopen(stored);
    assert_int_equal(model_store_read_head(stored->store, &again, &stored->error), STORE_OK);
    assert_memory_equal(&again, &head, sizeof head); /* it has no padding */
}

static void the_longest_settings_are_kept_whole(void **state)
{
    struct stored *stored = *state;
    struct model_store_head head = {0};
    struct model_store_head again = {0};
    memset(head.settings, 'x', MODEL_STORE_SETTINGS_BYTES - 1);
    put_head(stored, &head);
    assert_int_equal(model_store_read_head(stored->store, &again, &stored->error), STORE_OK);
    assert_string_equal(again.settings, head.settings);
}

static void a_part_put_again_takes_the_place_of_the_first(void **state)
{
    struct stored *stored = *state;
    put_some_of_each(stored);
    struct model_store_writing *writing = begin(stored);
    put_word(stored, writing, "fog", 300, 3);
    put_chunk(stored, writing, 5, 1, "in its place");
    commit(stored, writing);
    assert_holds(stored, "word fog 300 x3; word gale 5 x9; "
                         "chunk 5/0 first; chunk 5/1 in its place; " REST);
}

static void a_forgotten_word_takes_its_chunks_with_it(void **state)
{
    struct stored *stored = *state;
    struct model_store_word gale = word_of("gale", 5, 9);
    put_some_of_each(stored);
    struct model_store_writing *writing = begin(stored);
    put_chunk(stored, writing, 300, 0, "fog's");
    assert_int_equal(model_store_forget_word(writing, &gale, &stored->error), STORE_OK);
    commit(stored, writing);
    assert_holds(stored, "word fog 300 x2; chunk 300/0 fog's; " REST);
}

static void a_chunk_that_was_cut_off_is_gone(void **state)
{
    struct stored *stored = *state;
    put_some_of_each(stored);
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_remove_chunk(writing, 5, 1, &stored->error), STORE_OK);
    assert_int_equal(model_store_remove_chunk(writing, 5, 7, &stored->error), STORE_OK);
    commit(stored, writing);
    assert_holds(stored, "word fog 300 x2; word gale 5 x9; chunk 5/0 first; " REST);
}

static void a_word_that_was_never_stored_is_forgotten_without_a_fuss(void **state)
{
    struct stored *stored = *state;
    struct model_store_word word = word_of("ketch", 6, 1);
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_forget_word(writing, &word, &stored->error), STORE_OK);
    commit(stored, writing);
    assert_holds(stored, "");
}

static void an_entry_that_was_taken_out_is_gone(void **state)
{
    struct stored *stored = *state;
    struct model_store_writing *writing = begin(stored);
    put_entry(stored, writing, 12);
    put_entry(stored, writing, 13);
    commit(stored, writing);
    writing = begin(stored);
    assert_int_equal(model_store_remove_entry(writing, 12, &stored->error), STORE_OK);
    assert_int_equal(model_store_remove_entry(writing, 99, &stored->error), STORE_OK);
    commit(stored, writing);
    assert_holds(stored, "entry 13 @1099511627776; ");
}

static void clearing_forgets_everything(void **state)
{
    struct stored *stored = *state;
    struct model_store_head head = {.learned = 9};
    put_some_of_each(stored);
    put_head(stored, &head);
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_clear(writing, &stored->error), STORE_OK);
    commit(stored, writing);
    assert_holds(stored, "");
    assert_int_equal(model_store_read_head(stored->store, &head, &stored->error), STORE_NOT_FOUND);
}

static void what_is_aborted_leaves_nothing(void **state)
{
    struct stored *stored = *state;
    struct model_store_writing *writing = begin(stored);
    put_word(stored, writing, "fog", 1, 1);
    model_store_abort(writing);
    model_store_abort(NULL);
    assert_holds(stored, "");
}

static void loading_stops_when_it_is_told_to(void **state)
{
    struct stored *stored = *state;
    put_some_of_each(stored);
    stored->stop_at = "tag 7";
    assert_int_equal(load(stored), STORE_STOPPED);
    assert_null(strstr(stored->seen, "figures"));
}

/* Writes one entry behind the model's back; the tables are named as model_store.c names them. */
static void write_entry(struct stored *stored, const char *table, const char *key,
                        const void *value, size_t size)
{
    char directory[FIXTURE_PATH_BYTES + 8];
    (void)snprintf(directory, sizeof directory, "%s/model", stored->home);
    struct kv_settings settings = {
        .directory = directory, .map_bytes = FIXTURE_MAP_BYTES, .tables = &table, .table_count = 1};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    model_store_close(stored->store);
    stored->store = NULL;
    assert_int_equal(kv_open(&settings, &kv, &stored->error), STORE_OK);
    assert_int_equal(kv_begin(kv, true, &txn, &stored->error), STORE_OK);
    assert_int_equal(
        kv_put(txn, 0, kv_bytes_of(key, strlen(key)), kv_bytes_of(value, size), &stored->error),
        STORE_OK);
    assert_int_equal(kv_commit(txn, &stored->error), STORE_OK);
    kv_close(kv);
    reopen(stored);
}

static void a_model_of_a_newer_version_is_refused_with_a_sentence(void **state)
{
    struct stored *stored = *state;
    const unsigned char newer[] = {MODEL_STORE_FORMAT + 1, 0, 0, 0};
    struct model_store_head head = {0};
    write_entry(stored, "meta", "model", newer, sizeof newer);
    assert_int_equal(model_store_read_head(stored->store, &head, &stored->error), STORE_NEWER);
    assert_string_equal(stored->error.text, "the model was written by a newer version of undertag "
                                            "(format 6, this version reads up to 5)");
}

/* Nobody's: whoever asks whose it is finds neither his store nor his settings. */
static void a_model_of_an_older_version_is_nobody_s(void **state)
{
    struct stored *stored = *state;
    static const unsigned char NOBODY[STORE_UUID_BYTES];
    const unsigned char older[] = {MODEL_STORE_FORMAT - 1, 0, 0, 0, 'o', 'u', 'r', 's'};
    struct model_store_head head = {.store_uuid = "fifteen letters", .learned = 77};
    write_entry(stored, "meta", "model", older, sizeof older);
    assert_int_equal(model_store_read_head(stored->store, &head, &stored->error), STORE_OK);
    assert_memory_equal(head.store_uuid, NOBODY, sizeof NOBODY);
    assert_string_equal(head.settings, "");
    assert_int_equal(head.learned, 0);
}

static void a_head_that_is_cut_short_is_damage(void **state)
{
    struct stored *stored = *state;
    const unsigned char cut[] = {MODEL_STORE_FORMAT, 0, 0, 0, 1, 2, 3};
    struct model_store_head head = {0};
    write_entry(stored, "meta", "model", cut, sizeof cut);
    assert_int_equal(model_store_read_head(stored->store, &head, &stored->error), STORE_CORRUPT);
}

/* The bytes of a key are a number or two here. */
static void a_part_whose_checksum_is_wrong_is_damage(void **state)
{
    struct stored *stored = *state;
    const unsigned char wrong[] = {1, 2, 3, 4, 5, 0, 0, 0, 9, 0, 0, 0};
    write_entry(stored, "figures", "galegale", wrong, sizeof wrong);
    assert_int_equal(load(stored), STORE_CORRUPT);
    assert_string_equal(stored->error.text, "a stored list of figures of the model is damaged");
    stored->error = (struct store_error){0};
    write_entry(stored, "tags", "gale", wrong, sizeof wrong);
    assert_int_equal(load(stored), STORE_CORRUPT);
    assert_string_equal(stored->error.text, "a stored list of tags of the model is damaged");
    assert_string_equal(stored->seen, "");
}

static void damage_in_what_is_not_loaded_is_not_met_by_loading(void **state)
{
    struct stored *stored = *state;
    const unsigned char wrong[] = {1, 2, 3, 4, 5, 0, 0, 0, 9, 0, 0, 0};
    write_entry(stored, "words", "gale", wrong, sizeof wrong);
    write_entry(stored, "chunks", "galegale", wrong, sizeof wrong);
    write_entry(stored, "worklist", "galegale", wrong, sizeof wrong);
    assert_int_equal(load(stored), STORE_OK);
    assert_string_equal(stored->seen, "");
}

static void a_forgotten_word_is_scrubbed_from_the_file(void **state)
{
    struct stored *stored = *state;
    struct model_store_word word = word_of("schoonerwreckage", 1, 1);
    struct model_store_writing *writing = begin(stored);
    put_word(stored, writing, "fog", 2, 1);
    put_word(stored, writing, "schoonerwreckage", 1, 1);
    commit(stored, writing);
    assert_true(home_occurrences(stored->home, "model/data.mdb", "schoonerwreckage") > 0);
    writing = begin(stored);
    assert_int_equal(model_store_forget_word(writing, &word, &stored->error), STORE_OK);
    commit(stored, writing);
    size_t left = 1;
    for (int calls = 0; left > 0; calls++) {
        assert_true(calls < 1000);
        assert_int_equal(model_store_scrub(stored->store, 64, &left, &stored->error), STORE_OK);
    }
    assert_int_equal(home_occurrences(stored->home, "model/data.mdb", "schoonerwreckage"), 0);
    assert_holds(stored, "word fog 2 x1; ");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_was_put_is_there_when_it_is_opened_again),
        TEST(a_fresh_model_has_neither_head_nor_parts),
        TEST(the_head_is_read_as_it_was_put),
        TEST(the_longest_settings_are_kept_whole),
        TEST(a_part_put_again_takes_the_place_of_the_first),
        TEST(a_forgotten_word_takes_its_chunks_with_it),
        TEST(a_chunk_that_was_cut_off_is_gone),
        TEST(a_word_that_was_never_stored_is_forgotten_without_a_fuss),
        TEST(an_entry_that_was_taken_out_is_gone),
        TEST(clearing_forgets_everything),
        TEST(what_is_aborted_leaves_nothing),
        TEST(loading_stops_when_it_is_told_to),
        TEST(a_model_of_a_newer_version_is_refused_with_a_sentence),
        TEST(a_model_of_an_older_version_is_nobody_s),
        TEST(a_head_that_is_cut_short_is_damage),
        TEST(a_part_whose_checksum_is_wrong_is_damage),
        TEST(damage_in_what_is_not_loaded_is_not_met_by_loading),
        TEST(a_forgotten_word_is_scrubbed_from_the_file),
    };
    return cmocka_run_group_tests_name("model store", tests, NULL, NULL);
}
