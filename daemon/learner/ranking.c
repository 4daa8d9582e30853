#include "daemon/learner/ranking.h"

#include <assert.h>

enum {
    DISCOUNTED_PLACES = 5 /* the deepest of the figures that look at the best attainable */
};

/* 1/log2(j + 1). */
static const double discounts[DISCOUNTED_PLACES] = {1.0, 0.6309297535714575, 0.5,
                                                    0.43067655807339306, 0.38685280723454163};

/* Σ_{j<=m} 1/log2(j + 1), by m. */
static const double ideal_gains[DISCOUNTED_PLACES + 1] = {
    0.0, 1.0, 1.6309297535714575, 2.1309297535714578, 2.5616063116448506, 2.9484591188793923};

static const char *const names[RANKING_FIGURES] = {"P@1",   "P@3",      "P@5",      "nDCG@5",
                                                   "PSP@1", "PSP@3",    "PSP@5",    "PSnDCG@5",
                                                   "R@10",  "true P@1", "true P@3", "true P@5"};

const char *ranking_name(enum ranking_figure figure)
{
    return names[figure];
}

/* The least propensities of the truth, rising; returns how many there are. */
static size_t rarest(const struct ranking_truth *truth, double least[DISCOUNTED_PLACES])
{
    size_t count = 0;
    for (size_t i = 0; i < truth->count; i++) {
        double propensity = truth->propensities[i];
        if (count == DISCOUNTED_PLACES && propensity >= least[count - 1]) {
            continue;
        }
        size_t at = count < DISCOUNTED_PLACES ? count++ : count - 1;
        for (; at > 0 && least[at - 1] > propensity; at--) {
            least[at] = least[at - 1];
        }
        least[at] = propensity;
    }
    return count;
}

void ranking_bases(const struct ranking_truth *truth, struct ranking_amounts *ret_bases)
{
    assert(truth->count > 0);
    double least[DISCOUNTED_PLACES] = {0.0};
    size_t count = rarest(truth, least);
    double best[DISCOUNTED_PLACES + 1] = {0.0}; /* Σ 1/p of the j rarest, by j */
    double discounted = 0.0;
    for (size_t j = 0; j < DISCOUNTED_PLACES; j++) {
        double worth = j < count ? 1.0 / least[j] : 0.0;
        best[j + 1] = best[j] + worth;
        discounted += worth * discounts[j];
    }
    *ret_bases = (struct ranking_amounts){.of = {
                                              [RANKING_P1] = 1.0,
                                              [RANKING_P3] = 3.0,
                                              [RANKING_P5] = 5.0,
                                              [RANKING_NDCG5] = 1.0,
                                              [RANKING_PSP1] = best[1],
                                              [RANKING_PSP3] = best[3],
                                              [RANKING_PSP5] = best[5],
                                              [RANKING_PSNDCG5] = discounted,
                                              [RANKING_R10] = 1.0,
                                              [RANKING_TRUE_P1] = 1.0,
                                              [RANKING_TRUE_P3] = 3.0,
                                              [RANKING_TRUE_P5] = 5.0,
                                          }};
}

static double share_of_ideal(double gain, size_t given)
{
    return gain / ideal_gains[given < DISCOUNTED_PLACES ? given : DISCOUNTED_PLACES];
}

void ranking_amounts(const struct ranking_truth *truth, const struct ranking_list *list,
                     struct ranking_amounts *ret_amounts)
{
    assert(truth->count > 0);
    double hits[RANKING_PLACES + 1] = {0.0};  /* by places looked at */
    double worth[RANKING_PLACES + 1] = {0.0}; /* Σ 1/p of the hits, by places looked at */
    double gain = 0.0;
    double worth_gain = 0.0;
    for (size_t j = 0; j < RANKING_PLACES; j++) {
        bool is_hit = j < list->count && list->proposals[j].is_hit;
        double value = is_hit ? 1.0 / list->proposals[j].propensity : 0.0;
        hits[j + 1] = hits[j] + (is_hit ? 1.0 : 0.0);
        worth[j + 1] = worth[j] + value;
        if (is_hit && j < DISCOUNTED_PLACES) {
            gain += discounts[j];
            worth_gain += value * discounts[j];
        }
    }
    *ret_amounts =
        (struct ranking_amounts){.of = {
                                     [RANKING_P1] = hits[1],
                                     [RANKING_P3] = hits[3],
                                     [RANKING_P5] = hits[5],
                                     [RANKING_NDCG5] = share_of_ideal(gain, truth->count),
                                     [RANKING_PSP1] = worth[1],
                                     [RANKING_PSP3] = worth[3],
                                     [RANKING_PSP5] = worth[5],
                                     [RANKING_PSNDCG5] = worth_gain,
                                     [RANKING_R10] = hits[RANKING_PLACES] / (double)truth->count,
                                     [RANKING_TRUE_P1] = worth[1],
                                     [RANKING_TRUE_P3] = worth[3],
                                     [RANKING_TRUE_P5] = worth[5],
                                 }};
}
