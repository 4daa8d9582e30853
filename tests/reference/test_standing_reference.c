/*
 * The standing against scikit-learn (nDCG, and PSnDCG by its dcg_score), against the direct
 * recomputation of tests/quality/figures.py (P, PSP, recall) and its propensities (Jain, Prabhu &
 * Varma, KDD 2016). The values are in standing_values.h, made by standing_values.py beside it,
 * which draws the same items; test_standing_values.py makes them again.
 */
#include "daemon/learner/standing.h"

#include <string.h>

#include "daemon/learner/propensity.h"
#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    ITEMS = 400,
    TAGS = 40,
    LEARNED = 5000,
    SEED = 11
};

struct expected {
    enum standing_band band;
    uint64_t items;
    double value[RANKING_FIGURES];
};

#define STANDING_VALUES(band, items, ...) {STANDING_##band, items, {__VA_ARGS__}},
static const struct expected expected[] = {
#include "tests/reference/standing_values.h"
};

struct drawn {
    bool is_given[TAGS];
    uint32_t scores[TAGS];
};

static uint32_t tag_count(uint32_t tag)
{
    if (tag < 8) {
        return 1000 + 300 * tag;
    }
    return tag < 24 ? 30 + 60 * (tag - 8) : 1 + tag - 24;
}

static double tag_propensity(uint32_t tag)
{
    struct propensity_curve curve = propensity_curve_default();
    return propensity_of_curve(&curve, tag_count(tag), LEARNED);
}

/* The order of the draws is that of standing_values.py. */
static void draw(struct repeatable *random, struct drawn *item)
{
    memset(item, 0, sizeof *item);
    item->is_given[repeatable_below(random, TAGS)] = true;
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        if (repeatable_below(random, 8) == 0) {
            item->is_given[tag] = true;
        }
        uint32_t score = repeatable_below(random, 1000);
        score += item->is_given[tag] ? repeatable_below(random, 1500) : 0;
        item->scores[tag] = score * TAGS + tag;
    }
}

static bool is_in(enum standing_band band, uint32_t tag)
{
    return band == STANDING_ALL || standing_band_of(tag_count(tag)) == band;
}

/* The band's given tags; returns how many. */
static size_t given_of(const struct drawn *item, enum standing_band band, double *ret_propensities)
{
    size_t count = 0;
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        if (item->is_given[tag] && is_in(band, tag)) {
            ret_propensities[count++] = tag_propensity(tag);
        }
    }
    return count;
}

/* How many tags of the band have a better score: a tag's place in the list, from 0. */
static size_t place_of(const struct drawn *item, enum standing_band band, uint32_t tag)
{
    size_t better = 0;
    for (uint32_t other = 0; other < TAGS; other++) {
        better += is_in(band, other) && item->scores[other] > item->scores[tag] ? 1 : 0;
    }
    return better;
}

/* The band's first ten; returns how many. */
static size_t proposed_of(const struct drawn *item, enum standing_band band,
                          struct ranking_proposal *ret_proposals)
{
    size_t count = 0;
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        size_t place = is_in(band, tag) ? place_of(item, band, tag) : RANKING_PLACES;
        if (place < RANKING_PLACES) {
            ret_proposals[place] =
                (struct ranking_proposal){tag_propensity(tag), item->is_given[tag]};
            count++;
        }
    }
    return count;
}

static void add(struct standing *standing, const struct drawn *item)
{
    double given[STANDING_BANDS][TAGS];
    struct ranking_proposal proposed[STANDING_BANDS][RANKING_PLACES];
    struct ranking_truth truths[STANDING_BANDS];
    struct ranking_list lists[STANDING_BANDS];
    for (unsigned band = 0; band < STANDING_BANDS; band++) {
        truths[band] = (struct ranking_truth){given[band], given_of(item, band, given[band])};
        lists[band] =
            (struct ranking_list){proposed[band], proposed_of(item, band, proposed[band])};
    }
    standing_add(standing, truths, lists, NULL);
}

static void check_band(const struct standing_answer *answer, const struct expected *reference)
{
    const struct standing_in_band *band = &answer->bands[reference->band];
    assert_int_equal(band->items, reference->items);
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        print_message("%s %s\n", standing_band_name(reference->band), ranking_name(i));
        assert_near(band->with[i].value, reference->value[i], 1e-12);
    }
}

static void every_figure_of_every_band_is_the_reference_s(void **state)
{
    (void)state;
    struct standing *standing = NULL;
    struct repeatable random = {SEED};
    struct standing_answer answer;
    assert_int_equal(standing_new(&standing), 0);
    for (int i = 0; i < ITEMS; i++) {
        struct drawn item;
        draw(&random, &item);
        add(standing, &item);
    }
    standing_ask(standing, 0, &answer);
    for (size_t i = 0; i < STANDING_BANDS; i++) {
        check_band(&answer, &expected[i]);
    }
    standing_free(standing);
}

/* Järvelin & Kekäläinen's worked example has gains of 0 to 3 and a discount from the third place
 * on, so it cannot be put to binary gains (tests/reference/test_figures.py works it). Its list, a
 * gain of any size taken as given, at five places by scikit-learn:
 *   python3 -c "from sklearn.metrics import ndcg_score as n; print(n([[1,1,1,0,0,1,1,1,1,0]],
 *   [list(range(10, 0, -1))], k=5))" */
static void the_list_of_the_worked_example_with_binary_gains(void **state)
{
    (void)state;
    static const double given[7] = {0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 0.5};
    static const bool hits[RANKING_PLACES] = {true, true, true, false, false,
                                              true, true, true, true,  false};
    struct ranking_proposal proposals[RANKING_PLACES];
    for (size_t i = 0; i < RANKING_PLACES; i++) {
        proposals[i] = (struct ranking_proposal){0.5, hits[i]};
    }
    struct ranking_truth truth = {given, 7};
    struct ranking_list list = {proposals, RANKING_PLACES};
    struct ranking_amounts amounts;
    ranking_amounts(&truth, &list, &amounts);
    assert_near(amounts.of[RANKING_NDCG5], 0.7227265726449519, 1e-12);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_figure_of_every_band_is_the_reference_s),
        cmocka_unit_test(the_list_of_the_worked_example_with_binary_gains),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
