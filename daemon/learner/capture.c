#include "daemon/learner/capture.h"

#include <math.h>

#include "daemon/learner/beta.h"

struct capture_estimate capture_total(const struct capture_counts *counts)
{
    double first = counts->first + 1.0;
    double second = counts->second + 1.0;
    double both = counts->both + 1.0;
    double only_first = fmax(first - both, 0.0);
    double only_second = fmax(second - both, 0.0);
    double seen = counts->both + only_first + only_second;
    double unseen = only_first * only_second / both;
    double variance = first * second * only_first * only_second / (both * both * (both + 1.0));
    /* ln unseen has the variance ln(1 + variance/unseen²). */
    double ratio = 1.0;
    if (unseen > 0.0) {
        ratio = exp(INTERVAL_Z * sqrt(log1p(variance / (unseen * unseen))));
    }
    return (struct capture_estimate){
        .total = seen + unseen,
        .variance = variance,
        .low = seen + unseen / ratio,
        .high = seen + unseen * ratio,
    };
}

struct capture_share capture_completeness(const struct capture_counts *counts)
{
    struct capture_estimate estimate = capture_total(counts);
    if (!(estimate.total > 0.0)) {
        return (struct capture_share){.share = 1.0, .low = 0.0, .high = 1.0};
    }
    return (struct capture_share){
        .share = counts->first / estimate.total,
        .low = counts->first / estimate.high,
        .high = counts->first / estimate.low,
    };
}

double capture_consistency_rolling(const struct capture_counts *counts)
{
    double given = counts->first + counts->second;
    return given > 0.0 ? 2.0 * counts->both / given : 1.0;
}

double capture_consistency_hooper(const struct capture_counts *counts)
{
    double seen = counts->first + counts->second - counts->both;
    return seen > 0.0 ? counts->both / seen : 1.0;
}
