#include "daemon/text/dictionary.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

static const struct siphash_key KEY = {11, 22};

static int set_up(void **state)
{
    struct dictionary *dictionary = NULL;
    if (dictionary_new(&KEY, &dictionary) < 0) {
        return -1;
    }
    *state = dictionary;
    return 0;
}

static int tear_down(void **state)
{
    dictionary_free(*state);
    return 0;
}

static uint32_t intern(struct dictionary *dictionary, const char *term)
{
    uint32_t word = DICTIONARY_NONE;
    assert_int_equal(dictionary_intern(dictionary, term, strlen(term), &word), 0);
    return word;
}

static uint32_t find(const struct dictionary *dictionary, const char *term)
{
    return dictionary_find(dictionary, term, strlen(term));
}

static void assert_term(const struct dictionary *dictionary, uint32_t word, const char *expected)
{
    size_t bytes = 0;
    const char *term = dictionary_term(dictionary, word, &bytes);
    assert_int_equal(bytes, strlen(expected));
    assert_memory_equal(term, expected, bytes);
}

/* --- coming and going ---------------------------------------------------------------------------
 */

static void an_empty_dictionary_knows_no_word(void **state)
{
    assert_int_equal(dictionary_size(*state), 0);
    assert_int_equal(find(*state, "fog"), DICTIONARY_NONE);
}

static void words_are_numbered_from_zero_as_they_come(void **state)
{
    assert_int_equal(intern(*state, "fog"), 0);
    assert_int_equal(intern(*state, "bell"), 1);
    assert_int_equal(intern(*state, "lamp"), 2);
    assert_int_equal(dictionary_size(*state), 3);
    assert_int_equal(find(*state, "bell"), 1);
    assert_term(*state, 1, "bell");
}

static void a_word_that_comes_again_keeps_its_number(void **state)
{
    uint32_t fog = intern(*state, "fog");
    (void)intern(*state, "bell");
    assert_int_equal(intern(*state, "fog"), fog);
    assert_int_equal(dictionary_size(*state), 2);
}

static void a_new_word_counts_no_item(void **state)
{
    uint32_t fog = intern(*state, "fog");
    assert_int_equal(dictionary_count(*state, fog), 0);
    dictionary_set_count(*state, fog, 41);
    assert_int_equal(dictionary_count(*state, fog), 41);
}

static void words_are_told_apart_by_all_their_bytes(void **state)
{
    uint32_t with_nul = 0;
    uint32_t longer = 0;
    uint32_t empty = 0;
    assert_int_equal(dictionary_intern(*state, "a\0b", 3, &with_nul), 0);
    assert_int_equal(dictionary_intern(*state, "a\0c", 3, &longer), 0);
    assert_int_equal(dictionary_intern(*state, "", 0, &empty), 0);
    assert_int_equal(dictionary_size(*state), 3);
    assert_int_equal(dictionary_find(*state, "a\0b", 3), with_nul);
    assert_int_equal(dictionary_find(*state, "", 0), empty);
    assert_int_equal(dictionary_find(*state, "a", 1), DICTIONARY_NONE);
}

static void a_forgotten_word_is_not_found(void **state)
{
    uint32_t fog = intern(*state, "fog");
    uint32_t bell = intern(*state, "bell");
    assert_int_equal(dictionary_remove(*state, fog), 0);
    assert_int_equal(find(*state, "fog"), DICTIONARY_NONE);
    assert_int_equal(find(*state, "bell"), bell);
    assert_int_equal(dictionary_size(*state), 1);
}

static void the_number_of_a_forgotten_word_is_used_again_with_count_zero(void **state)
{
    uint32_t fog = intern(*state, "fog");
    (void)intern(*state, "bell");
    dictionary_set_count(*state, fog, 7);
    assert_int_equal(dictionary_remove(*state, fog), 0);
    assert_int_equal(intern(*state, "lamp"), fog);
    assert_int_equal(dictionary_count(*state, fog), 0);
    assert_term(*state, fog, "lamp");
    assert_int_equal(intern(*state, "oil"), 2);
}

static void a_forgotten_word_gives_its_bytes_back(void **state)
{
    assert_int_equal(dictionary_remove(*state, intern(*state, "fog")), 0);
    uint64_t without = dictionary_bytes(*state);
    uint32_t bell = intern(*state, "bellman");
    assert_int_equal(dictionary_bytes(*state), without + 7);
    assert_int_equal(dictionary_remove(*state, bell), 0);
    assert_int_equal(dictionary_bytes(*state), without);
}

/* --- a great many words, against a plain list of them -------------------------------------------
 */

enum {
    MANY = 5000,
    CHANGES = 60000,
    TERM_ROOM = 16
};

static void name_of(uint32_t number, char term[TERM_ROOM])
{
    (void)snprintf(term, TERM_ROOM, "berth%u", number);
}

static void assert_is_as_listed(const struct dictionary *dictionary, const uint32_t *listed)
{
    size_t held = 0;
    for (uint32_t i = 0; i < MANY; i++) {
        char term[TERM_ROOM];
        name_of(i, term);
        assert_int_equal(find(dictionary, term), listed[i]);
        if (listed[i] != DICTIONARY_NONE) {
            assert_term(dictionary, listed[i], term);
            held++;
        }
    }
    assert_int_equal(dictionary_size(dictionary), held);
}

static void whatever_comes_and_goes_the_rest_is_found(void **state)
{
    uint32_t *listed = malloc(MANY * sizeof *listed);
    assert_non_null(listed);
    for (size_t i = 0; i < MANY; i++) {
        listed[i] = DICTIONARY_NONE;
    }
    struct repeatable random = {1};
    for (int change = 0; change < CHANGES; change++) {
        uint32_t number = repeatable_below(&random, MANY);
        char term[TERM_ROOM];
        name_of(number, term);
        if (listed[number] == DICTIONARY_NONE) {
            listed[number] = intern(*state, term);
            assert_true(listed[number] < MANY); /* dense: numbers are used again */
        } else {
            assert_int_equal(dictionary_remove(*state, listed[number]), 0);
            listed[number] = DICTIONARY_NONE;
        }
        if (change % 10000 == 0) {
            assert_is_as_listed(*state, listed);
        }
    }
    assert_is_as_listed(*state, listed);
    free(listed);
}

static void the_key_changes_no_number(void **state)
{
    const struct siphash_key other_key = {33, 44};
    struct dictionary *other = NULL;
    assert_int_equal(dictionary_new(&other_key, &other), 0);
    for (uint32_t i = 0; i < MANY; i++) {
        char term[TERM_ROOM];
        name_of(i, term);
        assert_int_equal(intern(*state, term), i);
        assert_int_equal(intern(other, term), i);
    }
    dictionary_free(other);
}

/* --- stored and put back ------------------------------------------------------------------------
 */

static void a_word_is_put_back_under_its_number_with_its_count(void **state)
{
    assert_int_equal(dictionary_restore(*state, "bell", 4, 6, 12), 0);
    assert_int_equal(dictionary_restore(*state, "fog", 3, 2, 9), 0);
    assert_int_equal(dictionary_restored(*state), 0);
    assert_int_equal(find(*state, "bell"), 6);
    assert_int_equal(dictionary_count(*state, 6), 12);
    assert_int_equal(find(*state, "fog"), 2);
    assert_int_equal(dictionary_size(*state), 2);
}

static void numbers_that_none_took_are_given_out_before_new_ones(void **state)
{
    assert_int_equal(dictionary_restore(*state, "bell", 4, 3, 1), 0);
    assert_int_equal(dictionary_restore(*state, "fog", 3, 1, 1), 0);
    assert_int_equal(dictionary_restored(*state), 0);
    assert_int_equal(intern(*state, "lamp"), 0);
    assert_int_equal(intern(*state, "oil"), 2);
    assert_int_equal(intern(*state, "wick"), 4);
}

static void a_word_or_a_number_that_is_taken_is_not_put_back(void **state)
{
    assert_int_equal(dictionary_restore(*state, "bell", 4, 0, 5), 0);
    assert_int_equal(dictionary_restore(*state, "fog", 3, 0, 1), -EINVAL);
    assert_int_equal(dictionary_restore(*state, "bell", 4, 1, 1), -EINVAL);
    assert_int_equal(dictionary_restore(*state, "fog", 3, DICTIONARY_NONE, 1), -EINVAL);
    assert_int_equal(dictionary_size(*state), 1);
    assert_int_equal(dictionary_count(*state, 0), 5);
}

int main(void)
{
#define dictionary_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        dictionary_test(an_empty_dictionary_knows_no_word),
        dictionary_test(words_are_numbered_from_zero_as_they_come),
        dictionary_test(a_word_that_comes_again_keeps_its_number),
        dictionary_test(a_new_word_counts_no_item),
        dictionary_test(words_are_told_apart_by_all_their_bytes),
        dictionary_test(a_forgotten_word_is_not_found),
        dictionary_test(the_number_of_a_forgotten_word_is_used_again_with_count_zero),
        dictionary_test(a_forgotten_word_gives_its_bytes_back),
        dictionary_test(whatever_comes_and_goes_the_rest_is_found),
        dictionary_test(the_key_changes_no_number),
        dictionary_test(a_word_is_put_back_under_its_number_with_its_count),
        dictionary_test(numbers_that_none_took_are_given_out_before_new_ones),
        dictionary_test(a_word_or_a_number_that_is_taken_is_not_put_back),
    };
    return cmocka_run_group_tests_name("dictionary", tests, NULL, NULL);
}
