/* The stored model as the base that the learner reads. */
#include "daemon/model_base.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "daemon/learner/worklist.h"
#include "tests/unit/store_fixture.h"

/* --- fixture --- */

struct stored {
    char home[FIXTURE_PATH_BYTES];
    struct model_store *store;
    struct model_base base;
    struct store_error error;
};

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

static void put_word(struct stored *stored, const char *term, uint32_t number, uint32_t count)
{
    const struct model_store_word word = {
        .term = term, .term_bytes = strlen(term), .number = number, .count = count};
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_put_word(writing, &word, &stored->error), STORE_OK);
    commit(stored, writing);
}

static void put_chunk(struct stored *stored, uint32_t word, uint32_t number, const char *bytes)
{
    const struct model_store_chunk chunk = {
        .word = word, .number = number, .bytes = kv_bytes_of(bytes, strlen(bytes))};
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_put_chunk(writing, &chunk, &stored->error), STORE_OK);
    commit(stored, writing);
}

/* An entry with so many gaps and pairs: tags 100, 101, … with scores .5, 1.5, … and so on. */
static void put_entry(struct stored *stored, uint64_t number, uint32_t gaps, uint32_t pairs)
{
    uint32_t tags[MODEL_STORE_ENTRY_TAGS];
    float scores[MODEL_STORE_ENTRY_TAGS];
    float values[MODEL_STORE_ENTRY_TAGS * MODEL_STORE_PAIR_VALUES];
    for (uint32_t i = 0; i < MODEL_STORE_ENTRY_TAGS; i++) {
        tags[i] = 100 + i;
        scores[i] = 0.5F + (float)i;
        values[2 * i] = -0.25F - (float)i;
        values[2 * i + 1] = 0.125F + (float)i;
    }
    const struct model_store_entry entry = {.number = number,
                                            .scored = 1000 + number,
                                            .counted = 7,
                                            .promise = 0.75F,
                                            .gaps = {gaps, tags, scores},
                                            .pairs = {pairs, tags, values}};
    struct model_store_writing *writing = begin(stored);
    assert_int_equal(model_store_put_entry(writing, &entry, &stored->error), STORE_OK);
    commit(stored, writing);
}

static int set_up(void **state)
{
    struct stored *stored = calloc(1, sizeof *stored);
    assert_non_null(stored);
    home_make(stored->home);
    const struct store_settings settings = {.home = stored->home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&settings, &stored->store, &stored->error), STORE_OK);
    put_word(stored, "fog", 3, 12);
    put_chunk(stored, 3, 0, "harbour");
    put_entry(stored, 20, 1, 2);
    model_base_enter(&stored->base, stored->store);
    *state = stored;
    return 0;
}

static int tear_down(void **state)
{
    struct stored *stored = *state;
    model_base_leave(&stored->base);
    model_store_close(stored->store);
    home_remove(stored->home);
    free(stored);
    return 0;
}

/* --- reading --- */

static int word(struct stored *stored, const char *term, struct base_word *ret_word)
{
    const struct base *base = &stored->base.base;
    return base->word(base->user, term, strlen(term), ret_word);
}

static int chunk(struct stored *stored, uint32_t of, uint32_t number, struct base_bytes *ret_bytes)
{
    const struct base *base = &stored->base.base;
    return base->chunk(base->user, of, number, ret_bytes);
}

static int entry(struct stored *stored, uint64_t number, struct worklist_entry *ret_entry)
{
    const struct base *base = &stored->base.base;
    return base->entry(base->user, number, ret_entry);
}

static int entry_after(struct stored *stored, uint64_t number, struct worklist_entry *ret_entry)
{
    const struct base *base = &stored->base.base;
    return base->entry_after(base->user, number, ret_entry);
}

static uint32_t count_of(struct stored *stored, const char *term)
{
    struct base_word found = {0};
    assert_int_equal(word(stored, term, &found), 0);
    return found.count;
}

/* --- the view --- */

static void a_base_looks_into_the_store_only_when_something_is_wanted(void **state)
{
    struct stored *stored = *state;
    assert_null(stored->base.view);
    put_word(stored, "fog", 3, 13);
    assert_int_equal(count_of(stored, "fog"), 13); /* of the moment when it was wanted */
    assert_non_null(stored->base.view);
    put_word(stored, "fog", 3, 14);
    assert_int_equal(count_of(stored, "fog"), 13);
}

static void what_is_read_is_of_one_moment_until_the_base_is_left(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry found;
    assert_int_equal(count_of(stored, "fog"), 12);
    put_entry(stored, 21, 1, 1);
    assert_int_equal(entry(stored, 21, &found), -ENOENT);
    model_base_leave(&stored->base);
    assert_null(stored->base.view);
    model_base_enter(&stored->base, stored->store);
    assert_int_equal(entry(stored, 21, &found), 0);
}

static void a_base_may_be_left_without_having_been_read(void **state)
{
    struct stored *stored = *state;
    model_base_leave(&stored->base);
    model_base_leave(&stored->base);
    assert_null(stored->base.view);
    assert_int_equal(stored->base.error.code, STORE_OK);
}

/* A view that was forgotten would keep this writer from the pages for ever. */
static void a_store_can_be_scrubbed_once_the_base_is_left(void **state)
{
    struct stored *stored = *state;
    size_t left = 1;
    put_word(stored, "schoonerwreckage", 4, 1);
    assert_int_equal(count_of(stored, "fog"), 12);
    struct model_store_writing *writing = begin(stored);
    const struct model_store_word gone = {.term = "schoonerwreckage", .term_bytes = 16};
    assert_int_equal(model_store_forget_word(writing, &gone, &stored->error), STORE_OK);
    commit(stored, writing);
    model_base_leave(&stored->base);
    for (int calls = 0; left > 0; calls++) {
        assert_true(calls < 1000);
        assert_int_equal(model_store_scrub(stored->store, 64, &left, &stored->error), STORE_OK);
    }
    assert_int_equal(home_occurrences(stored->home, "model/data.mdb", "schoonerwreckage"), 0);
}

/* --- the three kinds --- */

static void a_word_is_read(void **state)
{
    struct stored *stored = *state;
    struct base_word found = {0};
    assert_int_equal(word(stored, "fog", &found), 0);
    assert_int_equal(found.number, 3);
    assert_int_equal(found.count, 12);
}

static void a_chunk_is_read(void **state)
{
    struct stored *stored = *state;
    struct base_bytes found = {0};
    assert_int_equal(chunk(stored, 3, 0, &found), 0);
    assert_int_equal(found.size, 7);
    assert_memory_equal(found.data, "harbour", 7);
}

static void an_entry_is_read_as_the_learner_has_it(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry found = {0};
    assert_int_equal(entry(stored, 20, &found), 0);
    assert_int_equal(found.number, 20);
    assert_int_equal(found.scored, 1020);
    assert_int_equal(found.counted, 7);
    assert_true(found.promise == 0.75F);
    assert_int_equal(found.gap_count, 1);
    assert_int_equal(found.gaps[0].tag, 100);
    assert_true(found.gaps[0].score == 0.5F);
    assert_int_equal(found.pair_count, 2);
    assert_int_equal(found.pairs[1].tag, 101);
    assert_true(found.pairs[1].counted == -1.25F);
    assert_true(found.pairs[1].own == 1.125F);
}

static void an_entry_may_hold_as_much_as_the_worklist_has_room_for(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry found = {0};
    put_entry(stored, 30, WORKLIST_GAPS, WORKLIST_GAPS);
    assert_int_equal(entry(stored, 30, &found), 0);
    assert_int_equal(found.gap_count, WORKLIST_GAPS);
    assert_true(found.gaps[WORKLIST_GAPS - 1].score == (float)WORKLIST_GAPS - 0.5F);
    assert_int_equal(found.pairs[WORKLIST_GAPS - 1].tag, 99 + WORKLIST_GAPS);
}

static void the_entry_after_a_number_is_read(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry found = {0};
    put_entry(stored, 30, 0, 1);
    assert_int_equal(entry_after(stored, 0, &found), 0);
    assert_int_equal(found.number, 20);
    assert_int_equal(entry_after(stored, 20, &found), 0);
    assert_int_equal(found.number, 30);
    assert_int_equal(found.scored, 1030);
    assert_int_equal(found.pair_count, 1);
    assert_int_equal(entry_after(stored, 30, &found), -ENOENT);
}

/* --- what is not there, or cannot be read --- */

static void what_is_not_there_is_an_answer_without_a_reason(void **state)
{
    struct stored *stored = *state;
    struct base_word found_word;
    struct base_bytes found_bytes;
    struct worklist_entry found_entry = {.number = 77};
    assert_int_equal(word(stored, "gale", &found_word), -ENOENT);
    assert_int_equal(chunk(stored, 3, 1, &found_bytes), -ENOENT);
    assert_int_equal(chunk(stored, 4, 0, &found_bytes), -ENOENT);
    assert_int_equal(entry(stored, 19, &found_entry), -ENOENT);
    assert_int_equal(entry_after(stored, 20, &found_entry), -ENOENT);
    assert_int_equal(found_entry.number, 77);
    assert_int_equal(stored->base.error.code, STORE_OK);
    assert_string_equal(stored->base.error.text, "");
}

/* Changes the byte behind a text in the file, which an open store sees at once. */
static void damage_behind(struct stored *stored, const char *text)
{
    static char bytes[1 << 20];
    char path[FIXTURE_PATH_BYTES + 32];
    size_t count = 0;
    (void)snprintf(path, sizeof path, "%s/model/data.mdb", stored->home);
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    char *at = bytes;
    while ((at = memmem(at, size - (size_t)(at - bytes), text, strlen(text)))) {
        at += strlen(text);
        assert_int_equal(fseek(file, at - bytes, SEEK_SET), 0);
        assert_int_not_equal(fputc(*at ^ 1, file), EOF);
        count++;
    }
    assert_int_equal(fclose(file), 0);
    assert_true(count > 0);
}

static void a_damaged_chunk_cannot_be_read_and_the_reason_is_kept(void **state)
{
    struct stored *stored = *state;
    struct base_bytes found;
    damage_behind(stored, "harbou");
    assert_int_equal(chunk(stored, 3, 0, &found), -EIO);
    assert_int_equal(stored->base.error.code, STORE_CORRUPT);
    assert_string_equal(stored->base.error.text, "a stored chunk of the model is damaged");
}

static void a_damaged_word_cannot_be_read_and_the_reason_is_kept(void **state)
{
    struct stored *stored = *state;
    struct base_word found;
    put_word(stored, "schoonerwreckage", 4, 1);
    damage_behind(stored, "schoonerwreckage");
    assert_int_equal(word(stored, "schoonerwreckage", &found), -EIO);
    assert_string_equal(stored->base.error.text, "a stored word of the model is damaged");
}

/* The store has room for more tags in an entry than the worklist. */
static void an_entry_with_more_than_the_worklist_has_room_for_is_damage(void **state)
{
    struct stored *stored = *state;
    struct worklist_entry found = {.number = 77};
    put_entry(stored, 30, WORKLIST_GAPS + 1, 0);
    put_entry(stored, 40, 0, WORKLIST_GAPS + 1);
    assert_int_equal(entry(stored, 30, &found), -EIO);
    assert_string_equal(stored->base.error.text, "a stored entry of the model is damaged");
    assert_int_equal(entry_after(stored, 20, &found), -EIO);
    assert_int_equal(entry_after(stored, 30, &found), -EIO);
    assert_int_equal(found.number, 77);
}

/* The first reason stands, and with it what the learner is told; a new base has none. */
static void a_reason_stays_until_the_next_base_is_entered(void **state)
{
    struct stored *stored = *state;
    struct base_bytes found;
    struct base_word found_word;
    put_word(stored, "schoonerwreckage", 4, 1);
    damage_behind(stored, "harbou");
    damage_behind(stored, "schoonerwreckage");
    assert_int_equal(chunk(stored, 3, 0, &found), -EIO);
    assert_int_equal(word(stored, "schoonerwreckage", &found_word), -EIO);
    assert_string_equal(stored->base.error.text, "a stored chunk of the model is damaged");
    model_base_leave(&stored->base);
    assert_string_equal(stored->base.error.text, "a stored chunk of the model is damaged");
    model_base_enter(&stored->base, stored->store);
    assert_string_equal(stored->base.error.text, "");
}

/* As where memory ran out when the view was to be opened. */
static void want_of_memory_is_told_apart_from_damage(void **state)
{
    struct stored *stored = *state;
    struct base_bytes found;
    damage_behind(stored, "harbou");
    (void)store_fail(&stored->base.error, STORE_NO_MEMORY, "out of memory");
    assert_int_equal(chunk(stored, 3, 0, &found), -ENOMEM);
    assert_string_equal(stored->base.error.text, "out of memory");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_base_looks_into_the_store_only_when_something_is_wanted),
        TEST(what_is_read_is_of_one_moment_until_the_base_is_left),
        TEST(a_base_may_be_left_without_having_been_read),
        TEST(a_store_can_be_scrubbed_once_the_base_is_left),
        TEST(a_word_is_read),
        TEST(a_chunk_is_read),
        TEST(an_entry_is_read_as_the_learner_has_it),
        TEST(an_entry_may_hold_as_much_as_the_worklist_has_room_for),
        TEST(the_entry_after_a_number_is_read),
        TEST(what_is_not_there_is_an_answer_without_a_reason),
        TEST(a_damaged_chunk_cannot_be_read_and_the_reason_is_kept),
        TEST(a_damaged_word_cannot_be_read_and_the_reason_is_kept),
        TEST(an_entry_with_more_than_the_worklist_has_room_for_is_damage),
        TEST(a_reason_stays_until_the_next_base_is_entered),
        TEST(want_of_memory_is_told_apart_from_damage),
    };
    return cmocka_run_group_tests_name("model base", tests, NULL, NULL);
}
