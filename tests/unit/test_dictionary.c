/* Words that come and go, and what is told of them, while all of them are in memory. */
#include "daemon/text/dictionary.h"

#include <stdio.h>
#include <stdlib.h>

#include "tests/unit/dictionary_fixture.h"
#include "tests/unit/repeatable.h"

static void assert_term(const struct fixture *fixture, uint32_t word, const char *expected)
{
    size_t bytes = 0;
    const char *term = dictionary_term(fixture->dictionary, word, &bytes);
    assert_int_equal(bytes, strlen(expected));
    assert_memory_equal(term, expected, bytes);
}

/* --- coming and going ---------------------------------------------------------------------------
 */

static void an_empty_dictionary_knows_no_word(void **state)
{
    struct fixture *fixture = *state;
    struct base_word found = {.number = 7, .count = 8};
    assert_int_equal(dictionary_size(fixture->dictionary), 0);
    assert_int_equal(dictionary_find(fixture->dictionary, NULL, "fog", 3, &found), -ENOENT);
    assert_int_equal(found.number, 7);
    assert_int_equal(found.count, 8);
}

static void words_are_numbered_from_zero_as_they_come(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(intern(fixture, "fog"), 0);
    assert_int_equal(intern(fixture, "bell"), 1);
    assert_int_equal(intern(fixture, "lamp"), 2);
    assert_int_equal(dictionary_size(fixture->dictionary), 3);
    assert_int_equal(find(fixture, "bell").number, 1);
    assert_term(fixture, 1, "bell");
}

static void a_word_that_comes_again_keeps_its_number(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern(fixture, "fog");
    (void)intern(fixture, "bell");
    assert_int_equal(intern(fixture, "fog"), fog);
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
}

static void a_new_word_counts_no_item(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern(fixture, "fog");
    assert_int_equal(dictionary_count(fixture->dictionary, fog), 0);
    dictionary_set_count(fixture->dictionary, fog, 41);
    assert_int_equal(dictionary_count(fixture->dictionary, fog), 41);
    assert_int_equal(find(fixture, "fog").count, 41);
}

static void words_are_told_apart_by_all_their_bytes(void **state)
{
    struct dictionary *dictionary = ((struct fixture *)*state)->dictionary;
    uint32_t with_nul = 0;
    uint32_t other = 0;
    uint32_t empty = 0;
    struct base_word found = {0};
    assert_int_equal(dictionary_intern(dictionary, NULL, "a\0b", 3, &with_nul), 0);
    assert_int_equal(dictionary_intern(dictionary, NULL, "a\0c", 3, &other), 0);
    assert_int_equal(dictionary_intern(dictionary, NULL, "", 0, &empty), 0);
    assert_int_equal(dictionary_size(dictionary), 3);
    assert_int_equal(dictionary_find(dictionary, NULL, "a\0b", 3, &found), 0);
    assert_int_equal(found.number, with_nul);
    assert_int_equal(dictionary_find(dictionary, NULL, "", 0, &found), 0);
    assert_int_equal(found.number, empty);
    assert_int_equal(dictionary_find(dictionary, NULL, "a", 1, &found), -ENOENT);
}

/* These two have the same 32 bits of SipHash under FIXTURE_KEY, found by trying. */
static void words_with_the_same_hash_are_told_apart(void **state)
{
    struct fixture *fixture = *state;
    uint32_t one = intern(fixture, "berth105905");
    uint32_t other = intern(fixture, "berth14068");
    assert_int_not_equal(one, other);
    assert_int_equal(find(fixture, "berth105905").number, one);
    dictionary_remove(fixture->dictionary, one);
    store(fixture);
    assert_int_equal(find(fixture, "berth105905").number, DICTIONARY_NONE);
    assert_int_equal(find(fixture, "berth14068").number, other);
}

static void a_forgotten_word_is_not_found(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern(fixture, "fog");
    uint32_t bell = intern(fixture, "bell");
    dictionary_remove(fixture->dictionary, fog);
    assert_int_equal(find(fixture, "fog").number, DICTIONARY_NONE);
    assert_int_equal(find(fixture, "bell").number, bell);
    assert_int_equal(dictionary_size(fixture->dictionary), 1);
}

static void a_forgotten_word_that_comes_again_begins_anew_under_another_number(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern_counted(fixture, "fog", 7);
    (void)intern(fixture, "bell");
    dictionary_remove(fixture->dictionary, fog);
    assert_int_equal(intern(fixture, "fog"), 2);
    assert_int_equal(dictionary_count(fixture->dictionary, 2), 0);
    assert_int_equal(find(fixture, "fog").number, 2);
}

static void the_number_of_a_forgotten_word_is_not_given_out_again(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    assert_int_equal(intern(fixture, "bell"), 1);
    store(fixture);
    dictionary_remove(fixture->dictionary, 1);
    store(fixture);
    assert_int_equal(intern(fixture, "lamp"), 2);
}

static void when_all_numbers_are_given_out_no_word_is_added(void **state)
{
    struct fixture *fixture = *state;
    const struct dictionary_totals totals = {.next_number = DICTIONARY_NONE - 1, .size = 5};
    assert_int_equal(dictionary_restore_totals(fixture->dictionary, &totals), 0);
    assert_int_equal(intern(fixture, "fog"), DICTIONARY_NONE - 1);
    uint32_t word = 77;
    assert_int_equal(dictionary_intern(fixture->dictionary, NULL, "bell", 4, &word), -ENOMEM);
    assert_int_equal(word, 77);
    assert_int_equal(dictionary_size(fixture->dictionary), 6);
    assert_int_equal(find(fixture, "bell").number, DICTIONARY_NONE);
    assert_int_equal(intern(fixture, "fog"), DICTIONARY_NONE - 1); /* is not new */
}

/* --- memory -------------------------------------------------------------------------------------
 */

static void each_byte_of_a_term_counts(void **state)
{
    struct dictionary *dictionary = ((struct fixture *)*state)->dictionary;
    uint64_t empty = dictionary_bytes(dictionary);
    (void)intern(*state, "fog");
    uint64_t fog = dictionary_bytes(dictionary) - empty;
    (void)intern(*state, "foghorn");
    assert_int_equal(dictionary_bytes(dictionary) - empty, fog + fog + 4);
    /* the term, its number, its count and what the allocator adds, at the least */
    assert_true(fog >= 3 + 4 + 4 + 16);
}

static void a_forgotten_word_gives_its_bytes_back_when_that_is_stored(void **state)
{
    struct fixture *fixture = *state;
    uint64_t empty = dictionary_bytes(fixture->dictionary);
    uint32_t fog = intern(fixture, "fog");
    uint64_t with_fog = dictionary_bytes(fixture->dictionary);
    assert_true(with_fog > empty);
    dictionary_remove(fixture->dictionary, fog);
    assert_int_equal(dictionary_bytes(fixture->dictionary), with_fog);
    store(fixture);
    assert_int_equal(dictionary_bytes(fixture->dictionary), empty);
}

/* --- what is told -------------------------------------------------------------------------------
 */

static void changed_words_are_told_in_the_order_of_their_first_change(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "fog"); /* 0; to come is a change, too */
    (void)intern_counted(fixture, "bell", 5);
    (void)intern_counted(fixture, "fog", 9); /* its last change comes after bell's */
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 2);
    assert_told(fixture, 0, false, "fog", 0, 9);
    assert_told(fixture, 1, false, "bell", 1, 5);
}

static void what_is_told_is_told_again_until_it_is_clean(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    (void)intern(fixture, "bell");
    tell_list(fixture);
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 2);
    dictionary_clean(fixture->dictionary);
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 0);
}

static void a_clean_word_whose_count_is_set_is_told_even_if_it_is_the_same(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "fog", 3);
    (void)intern_counted(fixture, "bell", 4);
    store(fixture);
    (void)intern_counted(fixture, "bell", 4);
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 1);
    assert_told(fixture, 0, false, "bell", 1, 4);
}

static void forgotten_words_are_told_before_changed_ones(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern_counted(fixture, "fog", 3);
    uint32_t bell = intern_counted(fixture, "bell", 4);
    store(fixture);
    (void)intern_counted(fixture, "lamp", 1); /* 2 */
    dictionary_remove(fixture->dictionary, bell);
    dictionary_remove(fixture->dictionary, fog);
    (void)intern_counted(fixture, "fog", 8); /* 3 */
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 4);
    assert_told(fixture, 0, true, "bell", bell, 0);
    assert_told(fixture, 1, true, "fog", fog, 0);
    assert_told(fixture, 2, false, "lamp", 2, 1);
    assert_told(fixture, 3, false, "fog", 3, 8);
}

static void a_word_forgotten_twice_is_told_under_both_numbers(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 2);
    assert_told(fixture, 0, true, "fog", 0, 0);
    assert_told(fixture, 1, true, "fog", 1, 0);
}

static void what_is_sealed_is_told_until_it_is_stored(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "fog", 3);
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    assert_false(dictionary_seal(fixture->dictionary));
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 2);
    assert_int_equal(dictionary_changed_count(fixture->dictionary), 2);
    assert_false(dictionary_stored(fixture->dictionary));
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 0);
}

static void a_word_that_changes_while_it_is_stored_is_still_to_be_stored(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "fog", 3);
    uint32_t bell = intern_counted(fixture, "bell", 1);
    assert_false(dictionary_seal(fixture->dictionary));
    (void)intern_counted(fixture, "fog", 4);
    dictionary_remove(fixture->dictionary, bell);
    assert_false(dictionary_stored(fixture->dictionary));
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 2);
    assert_told(fixture, 0, true, "bell", bell, 0);
    assert_told(fixture, 1, false, "fog", 0, 4);
}

static void a_word_on_its_way_out_of_the_base_is_not_found(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = intern_counted(fixture, "fog", 3);
    store(fixture);
    dictionary_remove(fixture->dictionary, fog);
    assert_false(dictionary_seal(fixture->dictionary));
    assert_int_equal(find(fixture, "fog").number, DICTIONARY_NONE); /* the base has it */
    assert_int_equal(intern(fixture, "fog"), 1);
    assert_false(dictionary_stored(fixture->dictionary));
    assert_int_equal(find(fixture, "fog").number, 1);
}

static void a_word_on_its_way_to_the_base_is_not_let_go_of(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "fog", 3);
    assert_false(dictionary_seal(fixture->dictionary));
    for (int i = 0; i < 2; i++) {
        dictionary_trim(fixture->dictionary, 0);
    }
    assert_true(is_in_memory(fixture, "fog"));
    assert_false(dictionary_stored(fixture->dictionary));
    for (int i = 0; i < 2; i++) {
        dictionary_trim(fixture->dictionary, 0);
    }
    assert_false(is_in_memory(fixture, "fog"));
}

/* Counts the calls, and ends at the second. */
static int end_at_second(void *user, const struct dictionary_word *word)
{
    int *calls = user;
    (void)word;
    return ++*calls == 2 ? -EIO : 0;
}

static int count_calls(void *user, const struct dictionary_word *word)
{
    int *calls = user;
    (void)word;
    *calls += 100;
    return 0;
}

static void what_ends_the_telling_of_changed_words_is_returned(void **state)
{
    struct fixture *fixture = *state;
    int calls = 0;
    (void)intern(fixture, "fog");
    (void)intern(fixture, "bell");
    (void)intern(fixture, "lamp");
    assert_int_equal(dictionary_changes(fixture->dictionary, end_at_second, count_calls, &calls),
                     -EIO);
    assert_int_equal(calls, 2);
}

static void what_ends_the_telling_of_forgotten_words_ends_all(void **state)
{
    struct fixture *fixture = *state;
    int calls = 0;
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    (void)intern(fixture, "lamp");
    assert_int_equal(dictionary_changes(fixture->dictionary, count_calls, end_at_second, &calls),
                     -EIO);
    assert_int_equal(calls, 2);
}

/* --- a great many words, against a plain list of them -------------------------------------------
 */

enum {
    MANY = 5000,
    CHANGES = 60000
};

static void name_of(uint32_t number, char term[TERM_ROOM])
{
    (void)snprintf(term, TERM_ROOM, "berth%u", number);
}

/* A step more than two. */
static void many_words_are_sealed_and_stored_by_steps(void **state)
{
    struct fixture *fixture = *state;
    for (uint32_t i = 0; i <= 2 * DICTIONARY_STEP; i++) {
        char term[TERM_ROOM];
        name_of(i, term);
        (void)intern(fixture, term);
    }
    assert_true(dictionary_seal(fixture->dictionary));
    assert_true(dictionary_seal(fixture->dictionary));
    assert_false(dictionary_seal(fixture->dictionary));
    assert_true(dictionary_stored(fixture->dictionary));
    assert_true(dictionary_stored(fixture->dictionary));
    assert_int_equal(dictionary_changed_count(fixture->dictionary), 1);
    assert_false(dictionary_stored(fixture->dictionary));
    assert_int_equal(dictionary_changed_count(fixture->dictionary), 0);
}

static void assert_is_as_listed(const struct fixture *fixture, const uint32_t *listed)
{
    size_t held = 0;
    for (uint32_t i = 0; i < MANY; i++) {
        char term[TERM_ROOM];
        name_of(i, term);
        assert_int_equal(find(fixture, term).number, listed[i]);
        if (listed[i] != DICTIONARY_NONE) {
            assert_term(fixture, listed[i], term);
            held++;
        }
    }
    assert_int_equal(dictionary_size(fixture->dictionary), held);
}

static void whatever_comes_and_goes_the_rest_is_found(void **state)
{
    struct fixture *fixture = *state;
    uint32_t next = 0;
    uint32_t *listed = malloc(MANY * sizeof *listed);
    assert_non_null(listed);
    memset(listed, 0xff, MANY * sizeof *listed); /* DICTIONARY_NONE */
    struct repeatable random = {1};
    for (int change = 0; change < CHANGES; change++) {
        uint32_t number = repeatable_below(&random, MANY);
        char term[TERM_ROOM];
        name_of(number, term);
        if (listed[number] == DICTIONARY_NONE) {
            listed[number] = intern(fixture, term);
            assert_int_equal(listed[number], next++);
        } else {
            dictionary_remove(fixture->dictionary, listed[number]);
            listed[number] = DICTIONARY_NONE;
        }
        if (change % 10000 == 0) {
            assert_is_as_listed(fixture, listed);
            dictionary_clean(fixture->dictionary);
        }
    }
    assert_is_as_listed(fixture, listed);
    free(listed);
}

static void when_all_words_are_gone_so_is_their_memory(void **state)
{
    struct fixture *fixture = *state;
    uint64_t empty = dictionary_bytes(fixture->dictionary);
    char term[TERM_ROOM];
    for (uint32_t i = 0; i < MANY; i++) {
        name_of(i, term);
        (void)intern(fixture, term);
    }
    for (uint32_t i = 0; i < MANY; i++) {
        dictionary_remove(fixture->dictionary, i);
    }
    dictionary_clean(fixture->dictionary);
    assert_int_equal(dictionary_bytes(fixture->dictionary), empty);
}

/* --- the key ------------------------------------------------------------------------------------
 */

enum {
    FEW = 400
};

/* Words that come, and every third of them that goes again. */
static void fill(struct fixture *fixture)
{
    for (uint32_t i = 0; i < FEW; i++) {
        char term[TERM_ROOM];
        name_of(i, term);
        assert_int_equal(intern(fixture, term), i);
    }
    for (uint32_t i = 0; i < FEW; i += 3) {
        dictionary_remove(fixture->dictionary, i);
    }
    tell_list(fixture);
}

static void the_key_changes_nothing_that_is_told(void **state)
{
    struct fixture *fixture = *state;
    struct fixture other;
    assert_int_equal(fixture_init(&other, &(struct siphash_key){33, 44}), 0);
    fill(fixture);
    fill(&other);
    assert_int_equal(fixture->list->told_count, FEW);
    assert_int_equal(other.list->told_count, FEW);
    assert_memory_equal(fixture->list->told, other.list->told, FEW * sizeof fixture->list->told[0]);
    fixture_deinit(&other);
}

int main(void)
{
#define dictionary_test(name)                                                                      \
    cmocka_unit_test_setup_teardown(name, fixture_set_up, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        dictionary_test(an_empty_dictionary_knows_no_word),
        dictionary_test(words_are_numbered_from_zero_as_they_come),
        dictionary_test(a_word_that_comes_again_keeps_its_number),
        dictionary_test(a_new_word_counts_no_item),
        dictionary_test(words_are_told_apart_by_all_their_bytes),
        dictionary_test(words_with_the_same_hash_are_told_apart),
        dictionary_test(a_forgotten_word_is_not_found),
        dictionary_test(a_forgotten_word_that_comes_again_begins_anew_under_another_number),
        dictionary_test(the_number_of_a_forgotten_word_is_not_given_out_again),
        dictionary_test(when_all_numbers_are_given_out_no_word_is_added),
        dictionary_test(each_byte_of_a_term_counts),
        dictionary_test(a_forgotten_word_gives_its_bytes_back_when_that_is_stored),
        dictionary_test(changed_words_are_told_in_the_order_of_their_first_change),
        dictionary_test(what_is_told_is_told_again_until_it_is_clean),
        dictionary_test(a_clean_word_whose_count_is_set_is_told_even_if_it_is_the_same),
        dictionary_test(forgotten_words_are_told_before_changed_ones),
        dictionary_test(a_word_forgotten_twice_is_told_under_both_numbers),
        dictionary_test(what_is_sealed_is_told_until_it_is_stored),
        dictionary_test(a_word_that_changes_while_it_is_stored_is_still_to_be_stored),
        dictionary_test(many_words_are_sealed_and_stored_by_steps),
        dictionary_test(a_word_on_its_way_out_of_the_base_is_not_found),
        dictionary_test(a_word_on_its_way_to_the_base_is_not_let_go_of),
        dictionary_test(what_ends_the_telling_of_changed_words_is_returned),
        dictionary_test(what_ends_the_telling_of_forgotten_words_ends_all),
        dictionary_test(whatever_comes_and_goes_the_rest_is_found),
        dictionary_test(when_all_words_are_gone_so_is_their_memory),
        dictionary_test(the_key_changes_nothing_that_is_told),
    };
    return cmocka_run_group_tests_name("dictionary", tests, NULL, NULL);
}
