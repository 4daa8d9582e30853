/*
 * Items drawn at random for a check: which can be drawn, and that each has the same chance, both
 * where seqs are drawn and where all items are walked. All seeds are fixed.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/items_sample.h"
#include "tests/unit/store_fixture.h"

/* The seqs drawn with a seed; returns how many. */
static size_t sample(struct fixture *fixture, uint64_t seed, size_t most, uint64_t *seqs)
{
    struct store_error error = {0};
    size_t count = SIZE_MAX;
    struct store_view *view = fixture_read(fixture);
    int result = items_sample(view, seed, most, &fixture->reading, seqs, &count, &error);
    store_end(view);
    if (result != STORE_OK) {
        fail_msg("%d: %s", result, error.text);
    }
    assert_true(count <= most);
    return count;
}

static const char *id_of(unsigned number)
{
    static char id[32];
    (void)snprintf(id, sizeof id, "log/%u", number);
    return id;
}

/* Files "log/1" to "log/COUNT" in one view, under the next seqs. */
static void file_items(struct fixture *fixture, unsigned count)
{
    struct store_error error = {0};
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    struct store_view *view = fixture_write(fixture);
    for (unsigned i = 1; i <= count; i++) {
        struct item_filing filing = {.id = text_of(id_of(i)), .text = text_of("lamp lit at dusk")};
        assert_int_equal(items_file(view, &filing, &fixture->buffer, &filed, &refusal, &error),
                         STORE_OK);
    }
    fixture_commit(view);
}

static void check_item(struct fixture *fixture, unsigned number, bool is_random)
{
    struct said said = fixture_check(fixture, said_by("c.lerk", id_of(number)), is_random,
                                     (struct names){.tags = {NULL}});
    assert_int_equal(said.result, STORE_OK);
}

/* Makes changes of one checked item until the store's seq is `seq`, and erases what they passed. */
static void use_up_seqs(struct fixture *fixture, unsigned number, uint64_t seq)
{
    struct store_error error = {0};
    struct item_filed filed = {0};
    struct item_refusal refusal = {0};
    struct item_saying saying = said_by("e.ditor", id_of(number));
    struct store_view *view = fixture_write(fixture);
    while (store_view_totals(view).seq < seq) {
        assert_int_equal(items_rule(view, &saying, (struct item_names){0}, (struct item_names){0},
                                    &fixture->buffer, &filed, &refusal, &error),
                         STORE_OK);
    }
    fixture_commit(view);
    while (fixture_erase(fixture, seq) > 0) {
    }
}

static bool holds(const uint64_t *seqs, size_t count, uint64_t seq)
{
    for (size_t i = 0; i < count; i++) {
        if (seqs[i] == seq) {
            return true;
        }
    }
    return false;
}

/* --- what can be drawn --- */

static void where_there_are_fewer_all_are_drawn_once(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[ITEMS_SAMPLE_MOST];
    file_items(fixture, 30);
    assert_int_equal(sample(fixture, 7, ITEMS_SAMPLE_MOST, seqs), 30);
    for (uint64_t seq = 1; seq <= 30; seq++) {
        assert_true(holds(seqs, 30, seq));
    }
}

static void as_many_are_drawn_as_are_wanted_and_none_twice(void **state)
{
    struct fixture *fixture = *state;
    file_items(fixture, 30);
    for (uint64_t seed = 0; seed < 200; seed++) {
        uint64_t seqs[20];
        assert_int_equal(sample(fixture, seed, 20, seqs), 20);
        for (size_t i = 0; i < 20; i++) {
            assert_in_range(seqs[i], 1, 30);
            assert_false(holds(seqs, i, seqs[i]));
        }
    }
}

static void an_empty_store_has_nothing_to_draw(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[1];
    assert_int_equal(sample(fixture, 1, 1, seqs), 0);
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_withdraw(fixture, "log/1");
    assert_int_equal(sample(fixture, 1, 1, seqs), 0);
}

static void none_is_drawn_where_none_is_wanted(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[1] = {99};
    (void)fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(sample(fixture, 1, 0, seqs), 0);
    assert_int_equal(seqs[0], 99);
}

/*
 * Seqs 1 to 6 file six items. log/1 is checked at random (7), log/2 by somebody's pick (8), log/3
 * withdrawn (9), log/4 revised (10), log/5 tagged again (11): 6, 10 and 11 are left.
 */
static void make_all_kinds(struct fixture *fixture)
{
    file_items(fixture, 6);
    check_item(fixture, 1, true);
    check_item(fixture, 2, false);
    (void)fixture_withdraw(fixture, "log/3");
    (void)fixture_file_text(fixture, "log/4", "fog and gale");
    (void)fixture_tag_again(fixture, said_by("o.reed", "log/5"), "", true,
                            (struct names){.tags = {"fog"}});
}

static void checked_withdrawn_and_superseded_items_are_not_drawn(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[ITEMS_SAMPLE_MOST];
    make_all_kinds(fixture);
    for (uint64_t seed = 0; seed < 100; seed++) {
        /* Two are found by drawing; a thousand by walking. */
        assert_int_equal(sample(fixture, seed, 2, seqs), 2);
        assert_true(seqs[0] == 6 || seqs[0] == 10 || seqs[0] == 11);
        assert_true(seqs[1] == 6 || seqs[1] == 10 || seqs[1] == 11);
    }
    assert_int_equal(sample(fixture, 1, ITEMS_SAMPLE_MOST, seqs), 3);
    assert_true(holds(seqs, 3, 6) && holds(seqs, 3, 10) && holds(seqs, 3, 11));
}

static void erased_seqs_are_passed_over(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[ITEMS_SAMPLE_MOST];
    make_all_kinds(fixture);
    assert_true(fixture_erase(fixture, 11) > 0);
    for (uint64_t seed = 0; seed < 100; seed++) {
        assert_int_equal(sample(fixture, seed, 2, seqs), 2);
        assert_true(seqs[0] == 6 || seqs[0] == 10 || seqs[0] == 11);
    }
    assert_int_equal(sample(fixture, 1, ITEMS_SAMPLE_MOST, seqs), 3);
}

static void an_item_filed_again_after_its_withdrawal_can_be_drawn_again(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[4];
    file_items(fixture, 1);
    check_item(fixture, 1, true);
    assert_int_equal(sample(fixture, 1, 4, seqs), 0);
    (void)fixture_withdraw(fixture, "log/1");
    (void)fixture_file_text(fixture, "log/1", "fog");
    assert_int_equal(sample(fixture, 1, 4, seqs), 1);
    assert_int_equal(seqs[0], 4);
}

static void a_revision_of_a_checked_item_stays_checked(void **state)
{
    struct fixture *fixture = *state;
    uint64_t seqs[4];
    file_items(fixture, 2);
    check_item(fixture, 1, true);
    (void)fixture_file_text(fixture, "log/1", "fog and gale");
    assert_int_equal(sample(fixture, 1, 4, seqs), 1);
    assert_int_equal(seqs[0], 2);
}

/* --- seeds --- */

static void the_same_seed_draws_the_same(void **state)
{
    struct fixture *fixture = *state;
    file_items(fixture, 50);
    static const uint64_t SEEDS[] = {0, 1, 1911, INT64_MAX, UINT64_MAX};
    for (size_t i = 0; i < sizeof SEEDS / sizeof SEEDS[0]; i++) {
        uint64_t once[10];
        uint64_t again[10];
        assert_int_equal(sample(fixture, SEEDS[i], 10, once), 10);
        assert_int_equal(sample(fixture, SEEDS[i], 10, again), 10);
        assert_memory_equal(once, again, sizeof once);
    }
}

static void the_same_seed_walks_the_same(void **state)
{
    struct fixture *fixture = *state;
    uint64_t once[60];
    uint64_t again[60];
    file_items(fixture, 50);
    assert_int_equal(sample(fixture, 1911, 60, once), 50);
    assert_int_equal(sample(fixture, 1911, 60, again), 50);
    assert_memory_equal(once, again, 50 * sizeof once[0]);
}

static void another_seed_draws_others(void **state)
{
    struct fixture *fixture = *state;
    uint64_t first[10];
    file_items(fixture, 50);
    (void)sample(fixture, 1, 10, first);
    for (uint64_t seed = 2; seed < 20; seed++) {
        uint64_t other[10];
        (void)sample(fixture, seed, 10, other);
        assert_memory_not_equal(first, other, sizeof first);
    }
}

/* --- the same chance --- */

enum {
    ITEMS = 12, /* with the seqs 1 to 12 */
    DRAWN = 3,
    SEEDS = 4000
};

/* The 99.9 % point of chi-square with 11 degrees of freedom (NIST/SEMATECH e-Handbook 1.3.6.7.4).
 */
static const double MOST_CHI_SQUARE = 31.264;

/* How often each item was drawn at all, and how often it came first. */
struct tally {
    double drawn[ITEMS];
    double first[ITEMS];
};

static void count_draws(struct fixture *fixture, struct tally *tally)
{
    for (uint64_t seed = 0; seed < SEEDS; seed++) {
        uint64_t seqs[DRAWN];
        assert_int_equal(sample(fixture, seed, DRAWN, seqs), DRAWN);
        for (size_t i = 0; i < DRAWN; i++) {
            assert_in_range(seqs[i], 1, ITEMS);
            tally->drawn[seqs[i] - 1] += 1.0;
        }
        tally->first[seqs[0] - 1] += 1.0;
    }
}

static double chi_square(const double counts[ITEMS], double expected)
{
    double sum = 0.0;
    for (size_t i = 0; i < ITEMS; i++) {
        sum += (counts[i] - expected) * (counts[i] - expected) / expected;
    }
    return sum;
}

/*
 * Draws without replacement vary less: an item is drawn with p = 3/12, so the sum has the mean
 * 12 (1 - p) = 9 instead of 11, and is scaled by 11/9 to be compared.
 */
static void assert_even(const struct tally *tally)
{
    double drawn = chi_square(tally->drawn, (double)SEEDS * DRAWN / ITEMS);
    double first = chi_square(tally->first, (double)SEEDS / ITEMS);
    drawn *= (ITEMS - 1.0) / (ITEMS - DRAWN);
    if (drawn > MOST_CHI_SQUARE || first > MOST_CHI_SQUARE) {
        fail_msg("chi-square %.1f of those drawn, %.1f of those drawn first", drawn, first);
    }
}

static void where_seqs_are_drawn_each_item_has_the_same_chance(void **state)
{
    struct fixture *fixture = *state;
    struct tally tally = {0};
    file_items(fixture, ITEMS);
    count_draws(fixture, &tally);
    assert_even(&tally);
}

/* A hole in the middle must not favour a neighbour: half of the seqs behind the items are none. */
static void gaps_between_seqs_favour_nobody(void **state)
{
    struct fixture *fixture = *state;
    struct tally tally = {0};
    file_items(fixture, ITEMS + 1);
    check_item(fixture, ITEMS + 1, false);
    use_up_seqs(fixture, ITEMS + 1, 2 * (uint64_t)ITEMS);
    count_draws(fixture, &tally);
    assert_even(&tally);
}

/*
 * Of 20,000 seqs 12 are unchecked items. Three are looked for with 192 tries, of which each finds
 * one with a chance of 12/20,000: the mean is .12, and three are found once in some 4,000 times.
 */
static void where_all_items_are_walked_each_has_the_same_chance(void **state)
{
    struct fixture *fixture = *state;
    struct tally tally = {0};
    file_items(fixture, ITEMS + 1);
    check_item(fixture, ITEMS + 1, false);
    use_up_seqs(fixture, ITEMS + 1, 20000);
    count_draws(fixture, &tally);
    assert_even(&tally);
}

/* All of 400 items but two are checked; drawing alone would miss them, walking finds both. */
static void where_nearly_all_are_checked_the_rest_is_found(void **state)
{
    struct fixture *fixture = *state;
    file_items(fixture, 400);
    for (unsigned number = 1; number <= 400; number++) {
        if (number != 7 && number != 393) {
            check_item(fixture, number, true);
        }
    }
    bool came_first[2] = {false, false};
    for (uint64_t seed = 0; seed < 50; seed++) {
        uint64_t seqs[3];
        assert_int_equal(sample(fixture, seed, 3, seqs), 2);
        assert_true(holds(seqs, 2, 7) && holds(seqs, 2, 393));
        came_first[seqs[0] == 7] = true;
    }
    assert_true(came_first[0] && came_first[1]); /* a walk leaves no order either */
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(where_there_are_fewer_all_are_drawn_once),
        TEST(as_many_are_drawn_as_are_wanted_and_none_twice),
        TEST(an_empty_store_has_nothing_to_draw),
        TEST(none_is_drawn_where_none_is_wanted),
        TEST(checked_withdrawn_and_superseded_items_are_not_drawn),
        TEST(erased_seqs_are_passed_over),
        TEST(an_item_filed_again_after_its_withdrawal_can_be_drawn_again),
        TEST(a_revision_of_a_checked_item_stays_checked),
        TEST(the_same_seed_draws_the_same),
        TEST(the_same_seed_walks_the_same),
        TEST(another_seed_draws_others),
        TEST(where_seqs_are_drawn_each_item_has_the_same_chance),
        TEST(gaps_between_seqs_favour_nobody),
        TEST(where_all_items_are_walked_each_has_the_same_chance),
        TEST(where_nearly_all_are_checked_the_rest_is_found),
    };
    return cmocka_run_group_tests_name("sample of items", tests, NULL, NULL);
}
