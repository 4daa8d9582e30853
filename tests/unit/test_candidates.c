/* The few tags with the best scores. */
#include "daemon/learner/candidates.h"

#include <stdlib.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

static void assert_candidate(const struct candidates *candidates, size_t at, uint32_t tag,
                             float score)
{
    assert_true(at < candidates->count);
    assert_int_equal(candidates->tags[at], tag);
    assert_true(candidates->scores[at] == score);
}

static void the_best_stand_first(void **state)
{
    struct candidates candidates = {0};
    (void)state;
    candidates_add(&candidates, 5, -0.5F);
    candidates_add(&candidates, 6, 0.75F);
    candidates_add(&candidates, 7, 0.25F);
    assert_int_equal(candidates.count, 3);
    assert_candidate(&candidates, 0, 6, 0.75F);
    assert_candidate(&candidates, 1, 7, 0.25F);
    assert_candidate(&candidates, 2, 5, -0.5F);
}

static void of_equal_scores_the_lower_number_stands_first(void **state)
{
    struct candidates candidates = {0};
    (void)state;
    candidates_add(&candidates, 7, 0.5F);
    candidates_add(&candidates, 9, 0.5F);
    candidates_add(&candidates, 5, 0.5F);
    assert_candidate(&candidates, 0, 5, 0.5F);
    assert_candidate(&candidates, 1, 7, 0.5F);
    assert_candidate(&candidates, 2, 9, 0.5F);
}

/* Tags 100, 101 … by falling scores from 0. */
static struct candidates full(void)
{
    struct candidates candidates = {0};
    for (uint32_t i = 0; i < CANDIDATES_MOST; i++) {
        candidates_add(&candidates, 100 + i, -(float)i);
    }
    return candidates;
}

static void a_full_list_turns_away_what_is_worse_than_its_last(void **state)
{
    struct candidates candidates = full();
    (void)state;
    candidates_add(&candidates, 1, -(float)CANDIDATES_MOST);
    assert_int_equal(candidates.count, CANDIDATES_MOST);
    assert_candidate(&candidates, CANDIDATES_MOST - 1, 100 + CANDIDATES_MOST - 1,
                     -(float)(CANDIDATES_MOST - 1));
}

static void what_is_better_pushes_the_last_one_out(void **state)
{
    struct candidates candidates = full();
    (void)state;
    candidates_add(&candidates, 1, -0.5F);
    assert_int_equal(candidates.count, CANDIDATES_MOST);
    assert_candidate(&candidates, 0, 100, 0.0F);
    assert_candidate(&candidates, 1, 1, -0.5F);
    assert_candidate(&candidates, 2, 101, -1.0F);
    assert_candidate(&candidates, CANDIDATES_MOST - 1, 100 + CANDIDATES_MOST - 2,
                     -(float)(CANDIDATES_MOST - 2));
}

static void as_good_as_the_last_one_the_number_decides(void **state)
{
    const float last = -(float)(CANDIDATES_MOST - 1);
    struct candidates candidates = full();
    (void)state;
    candidates_add(&candidates, 500, last);
    assert_candidate(&candidates, CANDIDATES_MOST - 1, 100 + CANDIDATES_MOST - 1, last);
    candidates_add(&candidates, 50, last);
    assert_candidate(&candidates, CANDIDATES_MOST - 1, 50, last);
}

/* --- against sorting them all -------------------------------------------------------------------
 */

enum {
    MANY = 200
};

struct scored {
    uint32_t tag;
    float score;
};

static int compare(const void *left, const void *right)
{
    const struct scored *a = left;
    const struct scored *b = right;
    if (a->score != b->score) {
        return a->score > b->score ? -1 : 1;
    }
    return (a->tag > b->tag) - (a->tag < b->tag);
}

/* Forty scores among two hundred tags, in an order of chance. */
static void deal(struct repeatable *random, struct scored *scored)
{
    for (uint32_t i = 0; i < MANY; i++) {
        scored[i] =
            (struct scored){.tag = i, .score = (float)repeatable_below(random, 40) / 8.0F - 1.0F};
    }
    for (uint32_t i = MANY - 1; i > 0; i--) {
        uint32_t other = repeatable_below(random, i + 1);
        struct scored kept = scored[i];
        scored[i] = scored[other];
        scored[other] = kept;
    }
}

static void they_are_the_best_in_whatever_order_they_come(void **state)
{
    struct scored scored[MANY];
    struct repeatable random = {.state = 8};
    (void)state;
    for (int round = 0; round < 50; round++) {
        struct candidates candidates = {0};
        deal(&random, scored);
        for (size_t i = 0; i < MANY; i++) {
            candidates_add(&candidates, scored[i].tag, scored[i].score);
        }
        qsort(scored, MANY, sizeof *scored, compare);
        assert_int_equal(candidates.count, CANDIDATES_MOST);
        for (size_t i = 0; i < CANDIDATES_MOST; i++) {
            assert_candidate(&candidates, i, scored[i].tag, scored[i].score);
        }
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_best_stand_first),
        cmocka_unit_test(of_equal_scores_the_lower_number_stands_first),
        cmocka_unit_test(a_full_list_turns_away_what_is_worse_than_its_last),
        cmocka_unit_test(what_is_better_pushes_the_last_one_out),
        cmocka_unit_test(as_good_as_the_last_one_the_number_decides),
        cmocka_unit_test(they_are_the_best_in_whatever_order_they_come),
    };
    return cmocka_run_group_tests_name("candidates", tests, NULL, NULL);
}
