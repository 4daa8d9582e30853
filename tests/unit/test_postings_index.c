/* The index of words against a plain array of what is known of each. */
#include "daemon/learner/postings_index.h"

#include <stdbool.h>
#include <string.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    WORDS = 4000, /* so that the first 1,024 slots are left behind twice */
    MOST_CHUNKS = 20,
    CHANGES = 60000
};

struct plain {
    bool is_known;
    uint32_t chunk_count;
    uint32_t places[MOST_CHUNKS];
};

struct both {
    struct postings_index index;
    struct plain plain[WORDS];
};

static int set_up(void **state)
{
    static struct both both;
    memset(&both, 0, sizeof both);
    *state = &both;
    return 0;
}

static int tear_down(void **state)
{
    struct both *both = *state;
    index_deinit(&both->index);
    return 0;
}

/* Some of them lie far apart, the last at the end of all numbers that words may have. */
static uint32_t number_of(uint32_t word)
{
    return word % 3 == 0 ? UINT32_MAX - 1 - word * 4096 : word;
}

static void check_word(const struct both *both, uint32_t word)
{
    const struct plain *plain = &both->plain[word];
    const struct index_word *entry = index_find(&both->index, number_of(word));
    assert_int_equal(entry != NULL, plain->is_known);
    if (!entry) {
        return;
    }
    uint32_t held = 0;
    assert_int_equal(entry->chunk_count, plain->chunk_count);
    for (uint32_t number = 0; number < plain->chunk_count; number++) {
        assert_int_equal(index_places(entry)[number], plain->places[number]);
        held += plain->places[number] != 0;
    }
    assert_int_equal(entry->held, held);
}

static void check_all(const struct both *both)
{
    size_t known = 0;
    for (uint32_t word = 0; word < WORDS; word++) {
        check_word(both, word);
        known += both->plain[word].is_known;
    }
    assert_int_equal(both->index.size, known);
}

static void add_word(struct both *both, uint32_t word)
{
    struct index_word *entry = NULL;
    assert_int_equal(index_add(&both->index, number_of(word), &entry), 0);
    assert_non_null(entry);
    assert_ptr_equal(entry, index_find(&both->index, number_of(word)));
    both->plain[word].is_known = true;
}

static void remove_word(struct both *both, uint32_t word)
{
    index_remove(&both->index, number_of(word));
    both->plain[word] = (struct plain){0};
}

static void add_chunk(struct both *both, uint32_t word)
{
    struct plain *plain = &both->plain[word];
    struct index_word *entry = index_find(&both->index, number_of(word));
    if (entry && plain->chunk_count < MOST_CHUNKS) {
        assert_int_equal(index_add_chunk(&both->index, entry), 0);
        plain->places[plain->chunk_count++] = 0;
    }
}

static void set_place(struct both *both, uint32_t word, uint32_t number, uint32_t place)
{
    struct plain *plain = &both->plain[word];
    if (plain->chunk_count > 0) {
        number %= plain->chunk_count;
        index_set_place(index_find(&both->index, number_of(word)), number, place);
        plain->places[number] = place;
    }
}

/* Words come a little more often than they go. */
static void change(struct both *both, struct repeatable *random, uint32_t goings)
{
    uint32_t word = repeatable_below(random, WORDS);
    uint32_t chance = repeatable_below(random, 100);
    if (chance < goings) {
        remove_word(both, word);
    } else if (chance < 40) {
        add_word(both, word);
    } else if (chance < 70) {
        add_chunk(both, word);
    } else {
        uint32_t place = chance < 80 ? 0 : 1 + repeatable_below(random, 1000);
        set_place(both, word, repeatable_below(random, MOST_CHUNKS), place);
    }
    check_word(both, word);
}

static void an_index_is_as_good_as_a_plain_array(void **state)
{
    struct both *both = *state;
    struct repeatable random = {41};
    for (uint32_t i = 1; i <= CHANGES; i++) {
        change(both, &random, i < CHANGES / 2 ? 5 : 30); /* grows, and falls again */
        if (i % 5000 == 0) {
            check_all(both);
        }
    }
}

static void an_index_that_lost_all_its_words_holds_no_lists(void **state)
{
    struct both *both = *state;
    for (uint32_t word = 0; word < WORDS; word++) {
        add_word(both, word);
        add_chunk(both, word);
    }
    uint64_t bytes = index_bytes(&both->index);
    for (uint32_t i = 0; i < WORDS * 5; i++) {
        add_chunk(both, i % WORDS);
    }
    assert_true(index_bytes(&both->index) >= bytes + WORDS * 6 * sizeof(uint32_t));
    check_all(both);
    for (uint32_t word = 0; word < WORDS; word++) {
        remove_word(both, word);
    }
    check_all(both);
    assert_int_equal(index_bytes(&both->index), bytes);
}

static void a_word_that_is_not_there_is_removed_in_peace(void **state)
{
    struct both *both = *state;
    index_remove(&both->index, 5);
    add_word(both, 4);
    remove_word(both, 5);
    check_all(both);
}

int main(void)
{
#define index_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        index_test(an_index_is_as_good_as_a_plain_array),
        index_test(an_index_that_lost_all_its_words_holds_no_lists),
        index_test(a_word_that_is_not_there_is_removed_in_peace),
    };
    return cmocka_run_group_tests_name("the index of postings", tests, NULL, NULL);
}
