/* Of many gaps, as many as are asked for. */
#include "daemon/learner/best_gaps.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/repeatable.h"

enum {
    MANY = 200
};

/* Those put in, by falling chance: the tag is the place. */
static void assert_first(const struct model_gap *gaps, size_t count)
{
    for (size_t i = 0; i < count; i++) {
        assert_int_equal(gaps[i].tag, i);
    }
}

static struct model_gap gap_at(size_t place)
{
    return (struct model_gap){.tag = (uint32_t)place, .chance = 1.0 - (double)place / MANY};
}

static void put(struct model_gap *gaps, size_t *count, size_t most, struct model_gap gap)
{
    best_gaps_put(gaps, count, most, &gap);
}

static void the_best_are_kept_when_the_worst_come_first(void **state)
{
    (void)state;
    for (size_t most = 1; most <= MANY; most += 7) {
        struct model_gap gaps[MANY];
        size_t count = 0;
        for (size_t place = MANY; place > 0; place--) {
            put(gaps, &count, most, gap_at(place - 1));
        }
        assert_int_equal(count, most);
        best_gaps_sort(gaps, count);
        assert_first(gaps, count);
    }
}

static void the_best_are_kept_in_whatever_order_they_come(void **state)
{
    struct repeatable random = {.state = 7};
    (void)state;
    for (size_t most = 1; most <= MANY; most += 7) {
        size_t places[MANY] = {0};
        struct model_gap gaps[MANY];
        size_t count = 0;
        for (size_t i = 0; i < MANY; i++) {
            size_t other = repeatable_below(&random, (uint32_t)i + 1);
            places[i] = places[other];
            places[other] = i;
        }
        for (size_t i = 0; i < MANY; i++) {
            put(gaps, &count, most, gap_at(places[i]));
        }
        best_gaps_sort(gaps, count);
        assert_int_equal(count, most);
        assert_first(gaps, count);
    }
}

static void of_equal_chances_the_higher_score_is_better_then_the_lower_tag(void **state)
{
    struct model_gap gaps[2];
    size_t count = 0;
    (void)state;
    put(gaps, &count, 2, (struct model_gap){.tag = 1, .chance = 0.5, .score = 0.25});
    put(gaps, &count, 2, (struct model_gap){.tag = 9, .chance = 0.5, .score = 0.75});
    put(gaps, &count, 2, (struct model_gap){.tag = 0, .chance = 0.5, .score = 0.25});
    best_gaps_sort(gaps, count);
    assert_int_equal(gaps[0].tag, 9);
    assert_int_equal(gaps[1].tag, 0);
}

static void none_are_kept_where_none_are_wanted(void **state)
{
    size_t count = 0;
    (void)state;
    put(NULL, &count, 0, gap_at(0));
    best_gaps_sort(NULL, count);
    assert_int_equal(count, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_best_are_kept_when_the_worst_come_first),
        cmocka_unit_test(the_best_are_kept_in_whatever_order_they_come),
        cmocka_unit_test(of_equal_chances_the_higher_score_is_better_then_the_lower_tag),
        cmocka_unit_test(none_are_kept_where_none_are_wanted),
    };
    return cmocka_run_group_tests_name("best gaps", tests, NULL, NULL);
}
