/* Which words' numbers are not stored yet: a word that is stored already tells its count alone. */
#include "daemon/text/dictionary.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

/* --- fixture: a dictionary whose base has "gale", number 0, if anything is asked of it --- */

struct fixture {
    struct dictionary *dictionary;
    struct base base;
    char told[128]; /* the terms, those of new words with a star */
};

static int base_word(void *user, const char *term, size_t bytes, struct base_word *ret_word)
{
    (void)user;
    assert_int_equal(bytes, 4);
    assert_memory_equal(term, "gale", 4);
    *ret_word = (struct base_word){.number = 0, .count = 7};
    return 0;
}

static int set_up(void **state)
{
    static const struct siphash_key key = {1, 2};
    struct fixture *fixture = calloc(1, sizeof *fixture);
    assert_non_null(fixture);
    fixture->base.word = base_word;
    assert_int_equal(dictionary_new(&key, &fixture->dictionary), 0);
    *state = fixture;
    return 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    dictionary_free(fixture->dictionary);
    free(fixture);
    return 0;
}

/* An item more holds it. */
static uint32_t count_one(struct fixture *fixture, const struct base *base, const char *term)
{
    uint32_t word = 0;
    assert_int_equal(dictionary_intern(fixture->dictionary, base, term, strlen(term), &word), 0);
    dictionary_set_count(fixture->dictionary, word,
                         dictionary_count(fixture->dictionary, word) + 1);
    return word;
}

static int tell(void *user, const struct dictionary_word *word)
{
    struct fixture *fixture = user;
    strncat(fixture->told, word->term, word->term_bytes);
    strcat(fixture->told, word->is_new ? "* " : " ");
    return 0;
}

static int tell_nothing(void *user, const struct dictionary_word *word)
{
    (void)user;
    (void)word;
    return 0;
}

static void assert_tells(struct fixture *fixture, const char *expected, size_t new_terms)
{
    fixture->told[0] = '\0';
    assert_int_equal(dictionary_changes(fixture->dictionary, tell, tell_nothing, fixture), 0);
    assert_string_equal(fixture->told, expected);
    assert_int_equal(dictionary_changed_terms(fixture->dictionary), new_terms);
}

/* --- tests --- */

static void a_word_is_new_until_it_is_stored(void **state)
{
    struct fixture *fixture = *state;
    (void)count_one(fixture, NULL, "fog");
    assert_tells(fixture, "fog* ", 1);
    assert_false(dictionary_seal(fixture->dictionary));
    assert_tells(fixture, "fog* ", 1); /* it may not have arrived */
    assert_false(dictionary_stored(fixture->dictionary));
    (void)count_one(fixture, NULL, "fog");
    assert_tells(fixture, "fog ", 0);
}

/* Whether its number came to be stored is not looked at then: putting it again does no harm. */
static void a_word_that_changes_while_it_is_stored_is_told_as_new_once_more(void **state)
{
    struct fixture *fixture = *state;
    (void)count_one(fixture, NULL, "fog");
    assert_false(dictionary_seal(fixture->dictionary));
    (void)count_one(fixture, NULL, "fog");
    assert_false(dictionary_stored(fixture->dictionary));
    assert_tells(fixture, "fog* ", 1);
    dictionary_clean(fixture->dictionary);
    (void)count_one(fixture, NULL, "fog");
    assert_tells(fixture, "fog ", 0);
}

static void a_word_of_the_base_is_not_new(void **state)
{
    struct fixture *fixture = *state;
    const struct dictionary_totals totals = {.next_number = 1, .size = 1};
    assert_int_equal(dictionary_restore_totals(fixture->dictionary, &totals), 0);
    (void)count_one(fixture, &fixture->base, "gale");
    assert_tells(fixture, "gale ", 0);
}

static void a_word_that_is_forgotten_changes_terms_until_that_is_stored(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = count_one(fixture, NULL, "fog");
    uint32_t bell = count_one(fixture, NULL, "bell");
    dictionary_remove(fixture->dictionary, fog); /* never stored */
    assert_tells(fixture, "bell* ", 2);
    dictionary_clean(fixture->dictionary);
    assert_tells(fixture, "", 0);
    dictionary_remove(fixture->dictionary, bell);
    assert_tells(fixture, "", 1);
    dictionary_clean(fixture->dictionary);
    assert_tells(fixture, "", 0);
}

static void a_term_that_comes_again_is_new(void **state)
{
    struct fixture *fixture = *state;
    uint32_t fog = count_one(fixture, NULL, "fog");
    dictionary_clean(fixture->dictionary);
    dictionary_remove(fixture->dictionary, fog);
    (void)count_one(fixture, NULL, "fog");
    assert_tells(fixture, "fog* ", 2); /* one gone, one new */
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_word_is_new_until_it_is_stored),
        TEST(a_word_that_changes_while_it_is_stored_is_told_as_new_once_more),
        TEST(a_word_of_the_base_is_not_new),
        TEST(a_word_that_is_forgotten_changes_terms_until_that_is_stored),
        TEST(a_term_that_comes_again_is_new),
    };
    return cmocka_run_group_tests_name("dictionary, new words", tests, NULL, NULL);
}
