/* What is read of a stored model when it is wanted: chunks, words and entries of one moment. */
#include "storage/model_view.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* --- fixture --- */

struct viewed {
    char home[FIXTURE_PATH_BYTES];
    struct model_store *store;
    struct model_view *view;
    struct store_error error;
};

static int set_up(void **state)
{
    struct viewed *viewed = calloc(1, sizeof *viewed);
    assert_non_null(viewed);
    home_make(viewed->home);
    const struct store_settings settings = {.home = viewed->home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(model_store_open(&settings, &viewed->store, &viewed->error), STORE_OK);
    *state = viewed;
    return 0;
}

static int tear_down(void **state)
{
    struct viewed *viewed = *state;
    model_view_close(viewed->view);
    model_store_close(viewed->store);
    home_remove(viewed->home);
    free(viewed);
    return 0;
}

/* A view of now in the place of the one before. */
static void look(struct viewed *viewed)
{
    model_view_close(viewed->view);
    viewed->view = NULL;
    assert_int_equal(model_view_open(viewed->store, &viewed->view, &viewed->error), STORE_OK);
}

/* --- writing --- */

static struct model_store_writing *begin(struct viewed *viewed)
{
    struct model_store_writing *writing = NULL;
    assert_int_equal(model_store_begin(viewed->store, &writing, &viewed->error), STORE_OK);
    return writing;
}

static void commit(struct viewed *viewed, struct model_store_writing *writing)
{
    assert_int_equal(model_store_commit(writing, &viewed->error), STORE_OK);
}

static void put_chunk(struct viewed *viewed, struct model_store_writing *writing, uint32_t word,
                      uint32_t number, const char *bytes)
{
    const struct model_store_chunk chunk = {
        .word = word, .number = number, .bytes = kv_bytes_of(bytes, strlen(bytes))};
    assert_int_equal(model_store_put_chunk(writing, &chunk, &viewed->error), STORE_OK);
}

static struct model_store_word word_of(const char *term, uint32_t number, uint32_t count)
{
    return (struct model_store_word){
        .term = term, .term_bytes = strlen(term), .number = number, .count = count};
}

static void put_word(struct viewed *viewed, struct model_store_writing *writing, const char *term,
                     uint32_t number, uint32_t count)
{
    const struct model_store_word word = word_of(term, number, count);
    assert_int_equal(model_store_put_word(writing, &word, &viewed->error), STORE_OK);
}

/* An entry of one gap and two pairs. */
static void put_entry(struct viewed *viewed, struct model_store_writing *writing, uint64_t number,
                      uint64_t scored)
{
    static const uint32_t tags[] = {4, 9};
    static const float scores[] = {0.5F};
    static const float values[] = {-0.25F, 0.125F, 0.0F, -1.0F};
    const struct model_store_entry entry = {.number = number,
                                            .scored = scored,
                                            .counted = 3,
                                            .promise = 0.75F,
                                            .gaps = {1, tags, scores},
                                            .pairs = {2, tags, values}};
    assert_int_equal(model_store_put_entry(writing, &entry, &viewed->error), STORE_OK);
}

/* Words 3, 5 and 7 with three chunks, two and one; 8 without its first; "fog" and "gale"; entries
 * 10, 20 and 300. */
static void put_some(struct viewed *viewed)
{
    struct model_store_writing *writing = begin(viewed);
    put_chunk(viewed, writing, 3, 0, "3.0");
    put_chunk(viewed, writing, 3, 1, "3.1");
    put_chunk(viewed, writing, 3, 2, "3.2");
    put_chunk(viewed, writing, 5, 0, "5.0");
    put_chunk(viewed, writing, 5, 1, "5.1");
    put_chunk(viewed, writing, 7, 0, "7.0");
    put_chunk(viewed, writing, 8, 1, "8.1");
    put_word(viewed, writing, "fog", 3, 12);
    put_word(viewed, writing, "gale", 5, 1);
    put_entry(viewed, writing, 10, 1000);
    put_entry(viewed, writing, 20, 1001);
    put_entry(viewed, writing, 300, 1002);
    commit(viewed, writing);
}

static int set_up_some(void **state)
{
    (void)set_up(state);
    put_some(*state);
    look(*state);
    return 0;
}

/* --- reading --- */

static void assert_chunk(struct viewed *viewed, uint32_t word, uint32_t number, const char *bytes)
{
    struct kv_bytes found = {0};
    assert_int_equal(model_view_chunk(viewed->view, word, number, &found, &viewed->error),
                     STORE_OK);
    assert_int_equal(found.size, strlen(bytes));
    assert_memory_equal(found.data, bytes, found.size);
}

static void assert_no_chunk(struct viewed *viewed, uint32_t word, uint32_t number)
{
    struct kv_bytes found = {.size = 77};
    assert_int_equal(model_view_chunk(viewed->view, word, number, &found, &viewed->error),
                     STORE_NOT_FOUND);
    assert_int_equal(found.size, 77);
    assert_int_equal(viewed->error.code, STORE_OK);
}

static int find_word(struct viewed *viewed, const char *term, struct model_store_word *ret_word)
{
    return model_view_word(viewed->view, term, strlen(term), ret_word, &viewed->error);
}

static uint32_t count_of(struct viewed *viewed, const char *term)
{
    struct model_store_word word = {0};
    assert_int_equal(find_word(viewed, term, &word), STORE_OK);
    return word.count;
}

/* The number of the entry behind another; 0: there is none. */
static uint64_t after(struct viewed *viewed, uint64_t number)
{
    struct model_store_entry entry = {.number = 77};
    int result = model_view_entry_after(viewed->view, number, &entry, &viewed->error);
    if (result != STORE_OK) {
        assert_int_equal(result, STORE_NOT_FOUND);
        assert_int_equal(entry.number, 77);
        assert_int_equal(viewed->error.code, STORE_OK);
        return 0;
    }
    return entry.number;
}

static uint64_t scored(struct viewed *viewed, uint64_t number)
{
    struct model_store_entry entry = {0};
    assert_int_equal(model_view_entry(viewed->view, number, &entry, &viewed->error), STORE_OK);
    assert_int_equal(entry.number, number);
    return entry.scored;
}

/* --- chunks --- */

static void the_chunks_of_a_word_come_in_their_order_and_end(void **state)
{
    struct viewed *viewed = *state;
    assert_chunk(viewed, 3, 0, "3.0");
    assert_chunk(viewed, 3, 1, "3.1");
    assert_chunk(viewed, 3, 2, "3.2");
    assert_no_chunk(viewed, 3, 3); /* what follows is of word 5 */
}

static void chunks_come_in_any_order(void **state)
{
    struct viewed *viewed = *state;
    assert_chunk(viewed, 5, 1, "5.1");
    assert_chunk(viewed, 3, 2, "3.2");
    assert_chunk(viewed, 3, 0, "3.0");
    assert_chunk(viewed, 3, 0, "3.0");
    assert_chunk(viewed, 7, 0, "7.0");
    assert_chunk(viewed, 3, 1, "3.1");
}

static void between_words_there_is_no_chunk(void **state)
{
    struct viewed *viewed = *state;
    assert_no_chunk(viewed, 0, 0);
    assert_no_chunk(viewed, 4, 0);
    assert_no_chunk(viewed, 5, 2);
    assert_no_chunk(viewed, 6, 1);
    assert_no_chunk(viewed, UINT32_MAX, UINT32_MAX);
}

/* The cursor has gone on to another word's chunk, or beyond all, when it is asked again. */
static void after_a_chunk_that_is_not_there_others_are_found(void **state)
{
    struct viewed *viewed = *state;
    assert_chunk(viewed, 3, 2, "3.2");
    assert_no_chunk(viewed, 3, 3);
    assert_no_chunk(viewed, 3, 4);
    assert_chunk(viewed, 5, 0, "5.0");
    assert_chunk(viewed, 7, 0, "7.0");
    assert_no_chunk(viewed, 7, 1);
    assert_no_chunk(viewed, 7, 2);
    assert_chunk(viewed, 7, 0, "7.0");
    assert_chunk(viewed, 3, 1, "3.1");
    assert_no_chunk(viewed, 8, 0);
    assert_chunk(viewed, 8, 1, "8.1");
}

static void an_empty_store_has_nothing_of_anything(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_word word = {.number = 77};
    struct model_store_entry entry = {.number = 77};
    look(viewed);
    assert_no_chunk(viewed, 0, 0);
    assert_no_chunk(viewed, 0, 1);
    assert_int_equal(find_word(viewed, "fog", &word), STORE_NOT_FOUND);
    assert_int_equal(model_view_entry(viewed->view, 1, &entry, &viewed->error), STORE_NOT_FOUND);
    assert_int_equal(after(viewed, 0), 0);
    assert_int_equal(word.number, 77);
    assert_int_equal(entry.number, 77);
    assert_int_equal(viewed->error.code, STORE_OK);
}

/* --- words --- */

static void a_word_has_its_number_and_count(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_word word = {0};
    assert_int_equal(find_word(viewed, "fog", &word), STORE_OK);
    assert_int_equal(word.number, 3);
    assert_int_equal(word.count, 12);
    assert_int_equal(word.term_bytes, 3);
    assert_memory_equal(word.term, "fog", 3);
}

static void a_part_of_a_word_is_another_word(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_word word = {.number = 77};
    assert_int_equal(find_word(viewed, "fo", &word), STORE_NOT_FOUND);
    assert_int_equal(find_word(viewed, "foghorn", &word), STORE_NOT_FOUND);
    assert_int_equal(word.number, 77);
    assert_int_equal(viewed->error.code, STORE_OK);
}

/* --- entries --- */

static void an_entry_is_read_as_it_was_put(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_entry entry = {0};
    assert_int_equal(model_view_entry(viewed->view, 20, &entry, &viewed->error), STORE_OK);
    assert_int_equal(entry.number, 20);
    assert_int_equal(entry.scored, 1001);
    assert_int_equal(entry.counted, 3);
    assert_true(entry.promise == 0.75F);
    assert_int_equal(entry.gaps.count, 1);
    assert_int_equal(entry.gaps.tags[0], 4);
    assert_true(entry.gaps.values[0] == 0.5F);
    assert_int_equal(entry.pairs.count, 2);
    assert_int_equal(entry.pairs.tags[1], 9);
    assert_true(entry.pairs.values[1] == 0.125F && entry.pairs.values[3] == -1.0F);
}

static void an_entry_that_is_not_there_is_not_found(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_entry entry = {.number = 77};
    assert_int_equal(model_view_entry(viewed->view, 11, &entry, &viewed->error), STORE_NOT_FOUND);
    assert_int_equal(entry.number, 77);
    assert_int_equal(viewed->error.code, STORE_OK);
}

/* 300 is behind 20 as a number, though not as a text or in little-endian bytes. */
static void the_entries_after_one_another_are_all_of_them_by_number(void **state)
{
    struct viewed *viewed = *state;
    assert_int_equal(after(viewed, 0), 10);
    assert_int_equal(after(viewed, 10), 20);
    assert_int_equal(after(viewed, 20), 300);
    assert_int_equal(after(viewed, 300), 0);
}

static void the_entry_after_any_number_is_found_in_any_order(void **state)
{
    struct viewed *viewed = *state;
    assert_int_equal(after(viewed, 20), 300);
    assert_int_equal(after(viewed, 299), 300);
    assert_int_equal(after(viewed, 19), 20);
    assert_int_equal(after(viewed, 20), 300);
    assert_int_equal(after(viewed, 300), 0);
    assert_int_equal(after(viewed, 9), 10);
    assert_int_equal(after(viewed, 9), 10);
    assert_int_equal(after(viewed, 11), 20);
    assert_int_equal(after(viewed, UINT64_MAX - 1), 0);
    assert_int_equal(after(viewed, UINT64_MAX), 0);
}

/* What is read in between by its number does not disturb the walk. */
static void an_entry_may_be_read_while_others_follow_one_another(void **state)
{
    struct viewed *viewed = *state;
    assert_int_equal(after(viewed, 0), 10);
    assert_int_equal(scored(viewed, 300), 1002);
    assert_int_equal(after(viewed, 10), 20);
}

/* --- one moment --- */

static void what_is_committed_later_is_not_in_a_view(void **state)
{
    struct viewed *viewed = *state;
    const struct model_store_word gale = word_of("gale", 5, 1);
    struct model_store_word word = {0};
    assert_chunk(viewed, 3, 0, "3.0");
    struct model_store_writing *writing = begin(viewed);
    put_chunk(viewed, writing, 3, 1, "new");
    put_chunk(viewed, writing, 3, 3, "3.3");
    put_word(viewed, writing, "fog", 3, 13);
    assert_int_equal(model_store_forget_word(writing, &gale, &viewed->error), STORE_OK);
    put_entry(viewed, writing, 15, 5);
    put_entry(viewed, writing, 20, 2002);
    assert_int_equal(model_store_remove_entry(writing, 10, &viewed->error), STORE_OK);
    commit(viewed, writing);
    assert_chunk(viewed, 3, 1, "3.1");
    assert_no_chunk(viewed, 3, 3);
    assert_chunk(viewed, 5, 1, "5.1");
    assert_int_equal(count_of(viewed, "fog"), 12);
    assert_int_equal(count_of(viewed, "gale"), 1);
    assert_int_equal(after(viewed, 0), 10);
    assert_int_equal(after(viewed, 10), 20);
    assert_int_equal(scored(viewed, 20), 1001);
    look(viewed);
    assert_chunk(viewed, 3, 1, "new");
    assert_chunk(viewed, 3, 3, "3.3");
    assert_no_chunk(viewed, 5, 1);
    assert_int_equal(count_of(viewed, "fog"), 13);
    assert_int_equal(find_word(viewed, "gale", &word), STORE_NOT_FOUND);
    assert_int_equal(after(viewed, 0), 15);
    assert_int_equal(after(viewed, 15), 20);
    assert_int_equal(scored(viewed, 20), 2002);
}

static void bytes_stay_valid_until_the_view_is_closed(void **state)
{
    struct viewed *viewed = *state;
    struct kv_bytes first = {0};
    assert_int_equal(model_view_chunk(viewed->view, 3, 0, &first, &viewed->error), STORE_OK);
    struct model_store_writing *writing = begin(viewed);
    put_chunk(viewed, writing, 3, 0, "new");
    commit(viewed, writing);
    assert_chunk(viewed, 7, 0, "7.0");
    assert_memory_equal(first.data, "3.0", first.size);
}

/* --- damage --- */

/* Changes the byte behind a text in the file, which an open view sees at once. */
static void damage_behind(struct viewed *viewed, const char *text)
{
    static char bytes[1 << 20];
    char path[FIXTURE_PATH_BYTES + 32];
    size_t count = 0;
    (void)snprintf(path, sizeof path, "%s/model/data.mdb", viewed->home);
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

static void a_damaged_chunk_is_told_and_the_others_are_read(void **state)
{
    struct viewed *viewed = *state;
    struct kv_bytes found = {.size = 77};
    struct model_store_writing *writing = begin(viewed);
    put_chunk(viewed, writing, 3, 1, "schoonerwreckage");
    commit(viewed, writing);
    damage_behind(viewed, "schoonerwreckag");
    look(viewed);
    assert_chunk(viewed, 3, 0, "3.0");
    assert_int_equal(model_view_chunk(viewed->view, 3, 1, &found, &viewed->error), STORE_CORRUPT);
    assert_string_equal(viewed->error.text, "a stored chunk of the model is damaged");
    assert_int_equal(found.size, 77);
    viewed->error = (struct store_error){0};
    assert_chunk(viewed, 3, 2, "3.2");
}

/* A word is a key, and what is stored of it stands right behind it in LMDB's pages. */
static void a_damaged_word_is_told_and_the_others_are_read(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_word word = {.number = 77};
    struct model_store_writing *writing = begin(viewed);
    put_word(viewed, writing, "schoonerwreckage", 8, 1);
    commit(viewed, writing);
    damage_behind(viewed, "schoonerwreckage");
    look(viewed);
    assert_int_equal(find_word(viewed, "schoonerwreckage", &word), STORE_CORRUPT);
    assert_string_equal(viewed->error.text, "a stored word of the model is damaged");
    assert_int_equal(word.number, 77);
    viewed->error = (struct store_error){0};
    assert_int_equal(count_of(viewed, "fog"), 12);
}

/* The seq of its scores is, byte by byte, the word "lighters". */
static void a_damaged_entry_is_told_however_it_is_reached(void **state)
{
    struct viewed *viewed = *state;
    struct model_store_entry entry = {.number = 77};
    struct model_store_writing *writing = begin(viewed);
    put_entry(viewed, writing, 20, 0x737265746867696C);
    commit(viewed, writing);
    damage_behind(viewed, "lighter");
    look(viewed);
    assert_int_equal(model_view_entry(viewed->view, 20, &entry, &viewed->error), STORE_CORRUPT);
    assert_string_equal(viewed->error.text, "a stored entry of the model is damaged");
    viewed->error = (struct store_error){0};
    assert_int_equal(after(viewed, 0), 10);
    assert_int_equal(model_view_entry_after(viewed->view, 10, &entry, &viewed->error),
                     STORE_CORRUPT);
    assert_string_equal(viewed->error.text, "a stored entry of the model is damaged");
    assert_int_equal(entry.number, 77);
    viewed->error = (struct store_error){0};
    assert_int_equal(after(viewed, 20), 300);
}

static void closing_no_view_does_nothing(void **state)
{
    (void)state;
    model_view_close(NULL);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up_some, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_chunks_of_a_word_come_in_their_order_and_end),
        TEST(chunks_come_in_any_order),
        TEST(between_words_there_is_no_chunk),
        TEST(after_a_chunk_that_is_not_there_others_are_found),
        cmocka_unit_test_setup_teardown(an_empty_store_has_nothing_of_anything, set_up, tear_down),
        TEST(a_word_has_its_number_and_count),
        TEST(a_part_of_a_word_is_another_word),
        TEST(an_entry_is_read_as_it_was_put),
        TEST(an_entry_that_is_not_there_is_not_found),
        TEST(the_entries_after_one_another_are_all_of_them_by_number),
        TEST(the_entry_after_any_number_is_found_in_any_order),
        TEST(an_entry_may_be_read_while_others_follow_one_another),
        TEST(what_is_committed_later_is_not_in_a_view),
        TEST(bytes_stay_valid_until_the_view_is_closed),
        TEST(a_damaged_chunk_is_told_and_the_others_are_read),
        TEST(a_damaged_word_is_told_and_the_others_are_read),
        TEST(a_damaged_entry_is_told_however_it_is_reached),
        cmocka_unit_test(closing_no_view_does_nothing),
    };
    return cmocka_run_group_tests_name("model view", tests, NULL, NULL);
}
