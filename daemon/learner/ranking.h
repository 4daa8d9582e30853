/*
 * ranking: the figures of one item's ranked proposals against the tags that it was given.
 *
 * Every figure is a ratio of sums over items, Σ amount / Σ basis, so that it can be added up item
 * by item. With h_j = 1 where the j-th proposal is given and 0 otherwise (an empty place is a
 * miss), p_j its propensity, and the item's given tags in the order of rising propensity,
 * p_(1) <= p_(2) <= …, m of them:
 *
 *                amount                              basis
 *   P@k          Σ_{j<=k} h_j                        k
 *   nDCG@5       Σ_{j<=5} h_j d_j over               1          d_j = 1/log2(j + 1)
 *                Σ_{j<=min(5,m)} d_j
 *   PSP@k        Σ_{j<=k} h_j/p_j                    Σ_{j<=min(k,m)} 1/p_(j)
 *   PSnDCG@5     Σ_{j<=5} h_j d_j/p_j                Σ_{j<=min(5,m)} d_j/p_(j)
 *   R@10         Σ_{j<=10} h_j / m                   1
 *   true P@k     Σ_{j<=k} h_j/p_j                    k
 *
 * Järvelin & Kekäläinen, ACM TOIS 20(4), 2002 (gains of 0 and 1; here the second place is
 * discounted too, common practice); Jain, Prabhu & Varma, KDD 2016, over the best attainable sum.
 * true P@k is the estimate of P@k against all true tags, given or missing (Horvitz & Thompson
 * 1952). Pure functions; any thread.
 */
#ifndef UNDERTAG_RANKING_H
#define UNDERTAG_RANKING_H

#include <stdbool.h>
#include <stddef.h>

enum ranking_figure {
    RANKING_P1,
    RANKING_P3,
    RANKING_P5,
    RANKING_NDCG5,
    RANKING_PSP1,
    RANKING_PSP3,
    RANKING_PSP5,
    RANKING_PSNDCG5,
    RANKING_R10,
    RANKING_TRUE_P1,
    RANKING_TRUE_P3,
    RANKING_TRUE_P5,
    RANKING_FIGURES
};

enum {
    RANKING_PLACES = 10 /* proposals that any figure looks at */
};

/* The propensity of each given tag, in (0, 1], in any order; 1 where the pair was examined. */
struct ranking_truth {
    const double *propensities;
    size_t count;
};

struct ranking_proposal {
    double propensity; /* in (0, 1]; of a hit the same as in the truth */
    bool is_hit;       /* the tag is given */
};

/* Best first; what stands beyond RANKING_PLACES is not looked at. */
struct ranking_list {
    const struct ranking_proposal *proposals;
    size_t count;
};

/* By enum ranking_figure. */
struct ranking_amounts {
    double of[RANKING_FIGURES];
};

/* "P@1" … "true P@5". */
const char *ranking_name(enum ranking_figure figure);

/* The bases of an item with at least one given tag; they are the same for every list. */
void ranking_bases(const struct ranking_truth *truth, struct ranking_amounts *ret_bases);

/* The amounts of a list against a truth with at least one given tag. */
void ranking_amounts(const struct ranking_truth *truth, const struct ranking_list *list,
                     struct ranking_amounts *ret_amounts);

#endif
