/*
 * capture: what two independent taggings of the same items say. Pure functions; any thread.
 */
#ifndef UNDERTAG_CAPTURE_H
#define UNDERTAG_CAPTURE_H

/* Pairs given by the first tagging, by the second, and by both; both <= first and second. */
struct capture_counts {
    double first;
    double second;
    double both;
};

struct capture_estimate {
    double total;    /* pairs that belong, found by nobody included */
    double variance; /* of `total` */
    double low;      /* 90 % interval of `total`; never below the pairs seen */
    double high;
};

/*
 * Chapman's estimator (Chapman 1951), (A + 1)(B + 1)/(C + 1) - 1, with Seber's variance (Seber
 * 1970), (A + 1)(B + 1)(A - C)(B - C)/((C + 1)²(C + 2)); the interval is log-normal in the number
 * that nobody found (Chao 1987). Assumes that the taggings are independent and pairs equally hard:
 * shared difficulty makes it too low.
 */
struct capture_estimate capture_total(const struct capture_counts *counts);

/* The first tagging's completeness, first/total, from the interval of the total. */
struct capture_share {
    double share;
    double low;
    double high;
};
struct capture_share capture_completeness(const struct capture_counts *counts);

/* Inter-indexer consistency: 2C/(A + B) (Rolling 1981); 1 where neither gave anything. */
double capture_consistency_rolling(const struct capture_counts *counts);

/* C/(A + B - C) (Hooper 1965); 1 where neither gave anything. */
double capture_consistency_hooper(const struct capture_counts *counts);

#endif
