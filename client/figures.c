#include "client/figures.h"

const struct figure FIGURES[] = {{"P@1", "precision at 1"},
                                 {"P@3", "precision at 3"},
                                 {"P@5", "precision at 5"},
                                 {"true P@1", "true precision at 1"},
                                 {"true P@3", "true precision at 3"},
                                 {"true P@5", "true precision at 5"},
                                 {"PSP@1", "propensity-scored precision at 1"},
                                 {"PSP@3", "propensity-scored precision at 3"},
                                 {"PSP@5", "propensity-scored precision at 5"},
                                 {"nDCG@5", "normalised gain at 5"},
                                 {"PSnDCG@5", "propensity-scored gain at 5"},
                                 {"R@10", "recall at 10"}};

const size_t FIGURES_COUNT = sizeof FIGURES / sizeof FIGURES[0];

const char FIGURES_MEANING[] =
    "Precision at k: the share of the first k proposals that the item's editor gave too. True "
    "precision: the same against all true tags, the forgotten ones included, as estimated by "
    "counting each hit 1 / p times. Propensity-scored: hits count 1 / p times, compared with the "
    "best that could be reached, so that rare tags weigh more. Gain: hits further up count more "
    "(nDCG). Recall at 10: the share of the item's tags among the first ten proposals.";
