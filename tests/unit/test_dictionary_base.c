/* Words that are stored in a base and need not be in memory. */
#include "daemon/text/dictionary.h"

#include <stdio.h>

#include "tests/unit/dictionary_fixture.h"
#include "tests/unit/repeatable.h"

/* Lets all clean words go. */
static void empty(struct fixture *fixture)
{
    dictionary_trim(fixture->dictionary, 0);
}

/* What a restart does: only the totals are put back. */
static void restart(struct fixture *fixture, const struct siphash_key *key)
{
    struct dictionary_totals totals = {0};
    dictionary_totals(fixture->dictionary, &totals);
    dictionary_free(fixture->dictionary);
    fixture->dictionary = NULL;
    assert_int_equal(dictionary_new(key, &fixture->dictionary), 0);
    assert_int_equal(dictionary_restore_totals(fixture->dictionary, &totals), 0);
}

/* Stored: fog 0 (in 3 items), bell 1 (in 4); nothing is in memory. */
static int set_up_stored(void **state)
{
    if (fixture_set_up(state) != 0) {
        return -1;
    }
    (void)intern_counted(*state, "fog", 3);
    (void)intern_counted(*state, "bell", 4);
    store(*state);
    restart(*state, &FIXTURE_KEY);
    return 0;
}

/* --- looking up ---------------------------------------------------------------------------------
 */

static void what_is_not_in_memory_is_found_in_the_base(void **state)
{
    struct base_word bell = find(*state, "bell");
    assert_int_equal(bell.number, 1);
    assert_int_equal(bell.count, 4);
    assert_int_equal(find(*state, "lamp").number, DICTIONARY_NONE);
}

static void to_find_a_word_takes_nothing_into_memory(void **state)
{
    struct fixture *fixture = *state;
    uint64_t before = dictionary_bytes(fixture->dictionary);
    (void)find(fixture, "bell");
    assert_false(is_in_memory(fixture, "bell"));
    assert_int_equal(dictionary_bytes(fixture->dictionary), before);
}

static void an_interned_word_has_the_number_and_count_of_the_base(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(intern(fixture, "bell"), 1);
    assert_int_equal(dictionary_count(fixture->dictionary, 1), 4);
    assert_true(is_in_memory(fixture, "bell"));
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 0);
}

static void the_base_is_not_asked_for_what_is_in_memory(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "bell");
    size_t lookups = fixture->list->lookups;
    (void)intern(fixture, "bell");
    assert_int_equal(find(fixture, "bell").number, 1);
    assert_int_equal(fixture->list->lookups, lookups);
    (void)find(fixture, "fog");
    assert_int_equal(fixture->list->lookups, lookups + 1);
}

static void the_base_is_not_asked_for_an_unknown_word_while_all_are_in_memory(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "bell");
    (void)intern(fixture, "fog");
    size_t lookups = fixture->list->lookups;
    assert_int_equal(find(fixture, "lamp").number, DICTIONARY_NONE);
    assert_int_equal(intern(fixture, "lamp"), 2);
    assert_int_equal(fixture->list->lookups, lookups);
    empty(fixture);
    assert_int_equal(find(fixture, "gale").number, DICTIONARY_NONE);
    assert_int_equal(find(fixture, "bell").number, 1);
    assert_int_equal(fixture->list->lookups, lookups + 2);
}

static void what_changed_in_memory_counts_and_not_what_the_base_has(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "bell", 5);
    assert_int_equal(find(fixture, "bell").count, 5);
    tell_list(fixture);
    assert_int_equal(fixture->list->told_count, 1);
    assert_told(fixture, 0, false, "bell", 1, 5);
}

/* --- forgetting ---------------------------------------------------------------------------------
 */

static void a_forgotten_word_is_not_found_though_the_base_has_it(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    empty(fixture);
    assert_int_equal(find(fixture, "bell").number, DICTIONARY_NONE);
    assert_int_equal(dictionary_size(fixture->dictionary), 1);
    store(fixture);
    assert_int_equal(find(fixture, "bell").number, DICTIONARY_NONE);
    assert_int_equal(find(fixture, "fog").number, 0);
}

static void a_word_forgotten_since_it_was_stored_gets_a_new_number(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    assert_int_equal(intern(fixture, "bell"), 2);
    assert_int_equal(dictionary_count(fixture->dictionary, 2), 0);
    store(fixture);
    empty(fixture);
    assert_int_equal(find(fixture, "bell").number, 2);
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
}

static void a_word_that_came_again_and_was_forgotten_again_stays_unknown(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    assert_int_equal(find(fixture, "bell").number, DICTIONARY_NONE);
    store(fixture);
    assert_int_equal(find(fixture, "bell").number, DICTIONARY_NONE);
    assert_int_equal(intern(fixture, "bell"), 3);
}

/* --- a base that fails --------------------------------------------------------------------------
 */

static void assert_fails_and_changes_nothing(struct fixture *fixture, const char *term, int error)
{
    struct base_word found = {.number = 70, .count = 71};
    uint32_t word = 72;
    uint64_t before = dictionary_bytes(fixture->dictionary);
    size_t size = dictionary_size(fixture->dictionary);
    struct dictionary *dictionary = fixture->dictionary;
    assert_int_equal(dictionary_find(dictionary, &fixture->base, term, strlen(term), &found),
                     error);
    assert_int_equal(dictionary_intern(dictionary, &fixture->base, term, strlen(term), &word),
                     error);
    assert_int_equal(found.number, 70);
    assert_int_equal(found.count, 71);
    assert_int_equal(word, 72);
    assert_int_equal(dictionary_bytes(dictionary), before);
    assert_int_equal(dictionary_size(dictionary), size);
    assert_false(is_in_memory(fixture, term));
}

static void a_base_that_cannot_be_read_is_no_base_without_the_word(void **state)
{
    struct fixture *fixture = *state;
    fixture->list->error = -EIO;
    assert_fails_and_changes_nothing(fixture, "lamp", -EIO);
    fixture->list->error = -ENOMEM;
    assert_fails_and_changes_nothing(fixture, "lamp", -ENOMEM);
    fixture->list->error = 0;
    assert_int_equal(intern(fixture, "lamp"), 2);
}

static void a_stored_number_that_was_never_given_out_is_damage(void **state)
{
    struct fixture *fixture = *state;
    fixture->list->words[1].number = 2;
    assert_fails_and_changes_nothing(fixture, "bell", -EIO);
}

static void a_stored_number_that_another_word_has_is_damage(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "fog");
    fixture->list->words[1].number = 0;
    assert_fails_and_changes_nothing(fixture, "bell", -EIO);
    assert_int_equal(find(fixture, "fog").number, 0);
}

/* --- trimming -----------------------------------------------------------------------------------
 */

static void trimmed_words_are_found_in_the_base_as_they_were(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "bell", 9);
    store(fixture);
    empty(fixture);
    assert_false(is_in_memory(fixture, "bell"));
    assert_int_equal(find(fixture, "bell").number, 1);
    assert_int_equal(find(fixture, "bell").count, 9);
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
}

static void changed_words_are_not_trimmed(void **state)
{
    struct fixture *fixture = *state;
    (void)intern_counted(fixture, "bell", 9);
    (void)intern(fixture, "lamp");
    (void)intern(fixture, "fog");
    empty(fixture);
    assert_true(is_in_memory(fixture, "bell"));
    assert_true(is_in_memory(fixture, "lamp"));
    assert_false(is_in_memory(fixture, "fog"));
}

static void trimming_ends_when_there_is_room_enough(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "fog");
    (void)intern(fixture, "bell");
    uint64_t both = dictionary_bytes(fixture->dictionary);
    dictionary_trim(fixture->dictionary, both);
    assert_true(is_in_memory(fixture, "fog"));
    dictionary_trim(fixture->dictionary, both - 1);
    assert_false(is_in_memory(fixture, "fog")); /* it came first */
    assert_true(is_in_memory(fixture, "bell"));
    assert_true(dictionary_bytes(fixture->dictionary) < both);
}

static void a_word_that_was_interned_again_lately_stays_longer(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "fog");
    (void)intern(fixture, "bell");
    (void)intern(fixture, "fog");
    dictionary_trim(fixture->dictionary, dictionary_bytes(fixture->dictionary) - 1);
    assert_true(is_in_memory(fixture, "fog"));
    assert_false(is_in_memory(fixture, "bell"));
}

static void a_second_chance_is_used_up(void **state)
{
    struct fixture *fixture = *state;
    (void)intern(fixture, "fog");
    (void)intern(fixture, "fog");
    (void)intern(fixture, "bell");
    dictionary_trim(fixture->dictionary, dictionary_bytes(fixture->dictionary) - 1);
    assert_true(is_in_memory(fixture, "fog"));
    (void)intern(fixture, "bell"); /* behind fog */
    dictionary_trim(fixture->dictionary, dictionary_bytes(fixture->dictionary) - 1);
    assert_false(is_in_memory(fixture, "fog"));
    assert_true(is_in_memory(fixture, "bell"));
}

static void memory_stays_within_the_budget_whatever_comes(void **state)
{
    struct fixture *fixture = *state;
    enum {
        BUDGET = 5000,
        WORDS = 400
    };
    uint64_t most = 0;
    for (uint32_t i = 0; i < WORDS; i++) {
        char term[TERM_ROOM];
        (void)snprintf(term, sizeof term, "berth%u", i);
        (void)intern(fixture, term);
        store(fixture);
        dictionary_trim(fixture->dictionary, BUDGET);
        most = dictionary_bytes(fixture->dictionary) > most ? dictionary_bytes(fixture->dictionary)
                                                            : most;
    }
    assert_true(most <= BUDGET && most > BUDGET / 2);
    assert_int_equal(dictionary_size(fixture->dictionary), WORDS + 2);
    assert_int_equal(find(fixture, "berth0").number, 2);
}

static void what_grew_for_many_words_shrinks_with_them(void **state)
{
    struct fixture *fixture = *state;
    uint64_t before = dictionary_bytes(fixture->dictionary);
    for (uint32_t i = 0; i < 400; i++) {
        char term[TERM_ROOM];
        (void)snprintf(term, sizeof term, "berth%u", i);
        (void)intern(fixture, term);
    }
    store(fixture);
    empty(fixture);
    assert_int_equal(dictionary_bytes(fixture->dictionary), before);
}

/* --- starting again -----------------------------------------------------------------------------
 */

static void totals_are_the_next_number_and_the_words_held(void **state)
{
    struct fixture *fixture = *state;
    struct dictionary_totals totals = {0};
    dictionary_remove(fixture->dictionary, intern(fixture, "fog"));
    (void)intern(fixture, "lamp"); /* 2 */
    (void)intern(fixture, "oil");  /* 3 */
    dictionary_totals(fixture->dictionary, &totals);
    assert_int_equal(totals.next_number, 4);
    assert_int_equal(totals.size, 3); /* bell, lamp, oil */
}

static void with_its_totals_a_new_dictionary_goes_on(void **state)
{
    struct fixture *fixture = *state;
    dictionary_remove(fixture->dictionary, intern(fixture, "bell"));
    store(fixture);
    restart(fixture, &(struct siphash_key){33, 44});
    assert_int_equal(dictionary_size(fixture->dictionary), 1);
    assert_int_equal(intern(fixture, "bell"), 2);
    assert_int_equal(intern(fixture, "fog"), 0);
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
}

static void more_words_than_numbers_are_not_put_back(void **state)
{
    struct fixture *fixture = *state;
    const struct dictionary_totals totals = {.next_number = 4, .size = 5};
    assert_int_equal(dictionary_restore_totals(fixture->dictionary, &totals), -EINVAL);
    assert_int_equal(dictionary_size(fixture->dictionary), 2);
    assert_int_equal(intern(fixture, "lamp"), 2);
}

/* --- a walk with little memory, beside the same one with much -----------------------------------
 */

enum {
    WALK_TERMS = 300,
    WALK_STEPS = 30000
};

/* One walks with another key, is trimmed all the time and restarted now and then. */
struct walk {
    struct fixture roomy;
    struct fixture cramped;
    struct repeatable random;
    size_t trimmed; /* times that a word was let go */
};

static void assert_same_word(struct walk *walk, const char *term)
{
    struct base_word roomy = find(&walk->roomy, term);
    struct base_word cramped = find(&walk->cramped, term);
    assert_int_equal(cramped.number, roomy.number);
    assert_int_equal(cramped.count, roomy.count);
}

static void assert_same_told(const struct walk *walk)
{
    assert_int_equal(walk->cramped.list->told_count, walk->roomy.list->told_count);
    assert_memory_equal(walk->cramped.list->told, walk->roomy.list->told,
                        walk->roomy.list->told_count * sizeof(struct listed_word));
}

static void assert_same_totals(const struct walk *walk)
{
    struct dictionary_totals roomy = {0};
    struct dictionary_totals cramped = {0};
    dictionary_totals(walk->roomy.dictionary, &roomy);
    dictionary_totals(walk->cramped.dictionary, &cramped);
    assert_int_equal(cramped.next_number, roomy.next_number);
    assert_int_equal(cramped.size, roomy.size);
}

/* Interns a term, sets its count or removes it, in both. */
static void walk_one(struct walk *walk, const char *term)
{
    uint32_t word = intern(&walk->roomy, term);
    assert_int_equal(intern(&walk->cramped, term), word);
    uint32_t count = dictionary_count(walk->roomy.dictionary, word);
    assert_int_equal(dictionary_count(walk->cramped.dictionary, word), count);
    switch (repeatable_below(&walk->random, 5)) {
    case 0:
    case 1:
        dictionary_set_count(walk->roomy.dictionary, word, count + 1);
        dictionary_set_count(walk->cramped.dictionary, word, count + 1);
        break;
    case 2:
    case 3:
        dictionary_remove(walk->roomy.dictionary, word);
        dictionary_remove(walk->cramped.dictionary, word);
        break;
    default:
        break;
    }
}

static void walk_trim(struct walk *walk)
{
    uint64_t before = dictionary_bytes(walk->cramped.dictionary);
    dictionary_trim(walk->cramped.dictionary, repeatable_below(&walk->random, 6000));
    walk->trimmed += dictionary_bytes(walk->cramped.dictionary) < before ? 1 : 0;
}

static void walk_store(struct walk *walk)
{
    store(&walk->roomy);
    store(&walk->cramped);
    assert_same_told(walk);
    if (repeatable_below(&walk->random, 8) == 0) {
        restart(&walk->cramped, &(struct siphash_key){repeatable_next(&walk->random), 5});
    }
}

static void a_walk_with_little_memory_is_the_same_as_one_with_much(void **state)
{
    (void)state;
    struct walk walk = {.random = {7}};
    assert_int_equal(fixture_init(&walk.roomy, &FIXTURE_KEY), 0);
    assert_int_equal(fixture_init(&walk.cramped, &(struct siphash_key){33, 44}), 0);
    for (int step = 0; step < WALK_STEPS; step++) {
        char term[TERM_ROOM];
        (void)snprintf(term, sizeof term, "berth%u", repeatable_below(&walk.random, WALK_TERMS));
        walk_one(&walk, term);
        (void)snprintf(term, sizeof term, "berth%u", repeatable_below(&walk.random, WALK_TERMS));
        assert_same_word(&walk, term);
        assert_same_totals(&walk);
        if (repeatable_below(&walk.random, 3) == 0) {
            walk_trim(&walk);
        }
        if (repeatable_below(&walk.random, 60) == 0) {
            walk_store(&walk);
        }
    }
    assert_true(walk.trimmed > 1000);
    fixture_deinit(&walk.roomy);
    fixture_deinit(&walk.cramped);
}

int main(void)
{
#define base_test(name) cmocka_unit_test_setup_teardown(name, set_up_stored, fixture_tear_down)
    const struct CMUnitTest tests[] = {
        base_test(what_is_not_in_memory_is_found_in_the_base),
        base_test(to_find_a_word_takes_nothing_into_memory),
        base_test(an_interned_word_has_the_number_and_count_of_the_base),
        base_test(the_base_is_not_asked_for_what_is_in_memory),
        base_test(the_base_is_not_asked_for_an_unknown_word_while_all_are_in_memory),
        base_test(what_changed_in_memory_counts_and_not_what_the_base_has),
        base_test(a_forgotten_word_is_not_found_though_the_base_has_it),
        base_test(a_word_forgotten_since_it_was_stored_gets_a_new_number),
        base_test(a_word_that_came_again_and_was_forgotten_again_stays_unknown),
        base_test(a_base_that_cannot_be_read_is_no_base_without_the_word),
        base_test(a_stored_number_that_was_never_given_out_is_damage),
        base_test(a_stored_number_that_another_word_has_is_damage),
        base_test(trimmed_words_are_found_in_the_base_as_they_were),
        base_test(changed_words_are_not_trimmed),
        base_test(trimming_ends_when_there_is_room_enough),
        base_test(a_word_that_was_interned_again_lately_stays_longer),
        base_test(a_second_chance_is_used_up),
        base_test(memory_stays_within_the_budget_whatever_comes),
        base_test(what_grew_for_many_words_shrinks_with_them),
        base_test(totals_are_the_next_number_and_the_words_held),
        base_test(with_its_totals_a_new_dictionary_goes_on),
        base_test(more_words_than_numbers_are_not_put_back),
        cmocka_unit_test(a_walk_with_little_memory_is_the_same_as_one_with_much),
    };
    return cmocka_run_group_tests_name("dictionary_base", tests, NULL, NULL);
}
