/*
 * standing_fixture: a new standing a test, and drawn items: the same number gives the same item, so
 * that a test can count again what it has added.
 */
#ifndef UNDERTAG_TESTS_STANDING_FIXTURE_H
#define UNDERTAG_TESTS_STANDING_FIXTURE_H

#include "daemon/learner/standing.h"

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    DRAWN_GIVEN = 7 /* most given tags of a drawn item in a band */
};

struct drawn_list {
    struct ranking_proposal proposals[RANKING_PLACES];
};

struct drawn_item {
    double given[STANDING_BANDS][DRAWN_GIVEN];
    struct drawn_list proposed[2][STANDING_BANDS];
    struct ranking_truth truths[STANDING_BANDS];
    struct ranking_list with[STANDING_BANDS];
    struct ranking_list without[STANDING_BANDS];
};

/* A list of up to ten, in which some of the given tags are hit in places by chance. */
static inline struct ranking_list
drawn_list(struct repeatable *random, const struct ranking_truth *truth, struct drawn_list *list)
{
    size_t count = repeatable_below(random, RANKING_PLACES + 1);
    size_t hit = 0;
    for (size_t i = 0; i < count; i++) {
        bool is_hit = hit < truth->count && repeatable_below(random, 3) == 0;
        double propensity = is_hit ? truth->propensities[hit++] : 0.5;
        list->proposals[i] = (struct ranking_proposal){propensity, is_hit};
    }
    return (struct ranking_list){list->proposals, count};
}

/* The bands of a drawn item have nothing to do with each other; some have no given tag. */
static inline void draw_item(uint64_t number, struct drawn_item *item)
{
    struct repeatable random = {number * 7919 + 1};
    for (size_t band = 0; band < STANDING_BANDS; band++) {
        size_t count = repeatable_below(&random, DRAWN_GIVEN + 1);
        for (size_t i = 0; i < count; i++) {
            item->given[band][i] = 0.05 + 0.95 * repeatable_share(&random);
        }
        item->truths[band] = (struct ranking_truth){item->given[band], count};
        item->with[band] = drawn_list(&random, &item->truths[band], &item->proposed[0][band]);
        item->without[band] = drawn_list(&random, &item->truths[band], &item->proposed[1][band]);
    }
}

/* Adds the drawn items numbered from `from` to below `to`. */
static inline void add_drawn(struct standing *standing, uint64_t from, uint64_t to)
{
    for (uint64_t number = from; number < to; number++) {
        struct drawn_item item;
        draw_item(number, &item);
        standing_add(standing, item.truths, item.with, item.without);
    }
}

/* Adds an item of one given tag of propensity .5, in the band "tail" and so in all, which both
 * learners propose first or not at all; without a shadow learner when `without` is below 0. */
static inline void add_one_tag(struct standing *standing, bool is_hit, int without)
{
    static const double half = 0.5;
    static const struct ranking_proposal hit = {0.5, true};
    struct ranking_truth truths[STANDING_BANDS] = {
        [STANDING_ALL] = {&half, 1}, [STANDING_TAIL] = {&half, 1}};
    struct ranking_list found[STANDING_BANDS] = {
        [STANDING_ALL] = {&hit, 1}, [STANDING_TAIL] = {&hit, 1}};
    struct ranking_list none[STANDING_BANDS] = {{NULL, 0}};
    const struct ranking_list *shadow = without > 0 ? found : none;
    standing_add(standing, truths, is_hit ? found : none, without < 0 ? NULL : shadow);
}

/* An answer's figures of all bands together. */
static inline struct standing_in_band ask_all(const struct standing *standing, uint64_t window)
{
    struct standing_answer answer;
    standing_ask(standing, window, &answer);
    return answer.bands[STANDING_ALL];
}

static inline int set_up(void **state)
{
    struct standing *standing = NULL;
    assert_int_equal(standing_new(&standing), 0);
    *state = standing;
    return 0;
}

static inline int tear_down(void **state)
{
    standing_free(*state);
    return 0;
}

#endif
