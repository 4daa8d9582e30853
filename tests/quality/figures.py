"""The figures of ranked proposals against the tags given: P@k, nDCG@k, PSP@k, recall@k, by band.

Sources: precision and recall at k, common practice; discounted cumulated gain over that of the best order,
Järvelin & Kekäläinen, ACM TOIS 2002, here with gains of 0 and 1 and the discount log2(place + 1), which also
discounts the second place (common practice; scikit-learn's too); propensities and propensity-scored precision, Jain, Prabhu & Varma, KDD 2016.

Shapes: `truth` is a sparse matrix of booleans, items × tags. `ranked` is a matrix of tag numbers, items ×
depth, best first, -1 where an item has no more proposals. `counts` holds each tag's training positives.
"""

import numpy as np
from scipy import sparse

BANDS = {"head": (1000, np.inf), "torso": (30, 1000), "tail": (0, 30)}  # training positives, from, below
CURVE_A, CURVE_B = 0.55, 1.5


def propensities(counts, items, a=CURVE_A, b=CURVE_B):
    """p = 1 / (1 + C (N_l + B)^-A), C = (ln N - 1)(B + 1)^A; ln N - 1 is at least 1, p is within [.01, 1]."""
    c = max(np.log(items) - 1.0, 1.0) * (b + 1.0) ** a
    p = 1.0 / (1.0 + c * (np.asarray(counts, dtype=float) + b) ** -a)
    return np.clip(p, 0.01, 1.0)


def band_mask(counts, band):
    """Which tags are of the band; all for "all"."""
    if band == "all":
        return np.ones(len(counts), dtype=bool)
    low, high = BANDS[band]
    return (counts >= low) & (counts < high)


def inside(truth, mask):
    """The truth with the tags of `mask` only; the others are not even stored as False."""
    kept = sparse.csr_matrix(truth.multiply(mask[np.newaxis, :]))
    kept.eliminate_zeros()
    return kept


def restricted(truth, ranked, mask):
    """Truth and ranked lists with the tags of `mask` only; items that then have no true tag are left out."""
    truth = inside(truth, mask)
    kept = np.flatnonzero(truth.getnnz(axis=1) > 0)
    truth, ranked = truth[kept], ranked[kept]
    outside = (ranked < 0) | ~mask[ranked]
    order = np.argsort(outside, axis=1, kind="stable")  # what stays moves up, in its order
    ranked = np.take_along_axis(np.where(outside, -1, ranked), order, axis=1)
    return truth, ranked


def hit_matrix(truth, ranked):
    """Which proposals are true, items × depth."""
    rows = np.arange(len(ranked))[:, np.newaxis]
    return np.asarray(truth[np.broadcast_to(rows, ranked.shape), ranked].todense(), dtype=bool) & (ranked >= 0)


def precision(hits, k):
    """Mean over items of the share of true tags among k places; an empty place is a miss."""
    return hits[:, :k].sum(axis=1).mean() / k


def recall(hits, sizes, k):
    """Mean over items of the share of their true tags that stand in the first k places."""
    return (hits[:, :k].sum(axis=1) / sizes).mean()


def discounts(places):
    """1 / log2(place + 1) for the places from 1."""
    return 1.0 / np.log2(np.arange(2, places + 2))


def cumulated(gains, discount):
    """The discounted gain cumulated up to each place; `gains` may be a matrix, items × places."""
    return np.cumsum(gains * discount, axis=-1)


def ndcg(hits, sizes, k):
    """Mean over items of the discounted cumulated gain of k places, over that of the best order."""
    hits = hits[:, :k]
    best = cumulated(np.ones(k), discounts(k))[np.minimum(sizes, k) - 1]
    return (cumulated(hits, discounts(hits.shape[1]))[:, -1] / best).mean()


def psp(truth, ranked, hits, p, k):
    """The sum of 1/p over all hits in the first k places, over the best sum that k places could hold."""
    gained, best = psp_sums(truth, ranked, hits, p, k)
    return gained.sum() / best.sum()


def psp_sums(truth, ranked, hits, p, k):
    """By item, the sum of 1/p over the hits in the first k places, and the best sum that k places could hold."""
    gained = np.where(hits[:, :k], 1.0 / p[ranked[:, :k]], 0.0).sum(axis=1)
    return gained, np.array([best_sum(1.0 / p[truth.indices[start:end]], k)
                             for start, end in zip(truth.indptr, truth.indptr[1:])])


def best_sum(values, k):
    """The sum of the k largest values."""
    return np.sort(values)[-k:].sum()


def of_lists(truth, ranked, p):
    """P, nDCG and PSP of lists that may have been restricted to a band."""
    hits, sizes = hit_matrix(truth, ranked), truth.getnnz(axis=1)
    figures = {f"P@{k}": precision(hits, k) for k in (1, 3, 5)}
    figures["nDCG@5"] = ndcg(hits, sizes, 5)
    figures.update({f"PSP@{k}": psp(truth, ranked, hits, p, k) for k in (1, 3, 5)})
    return figures


def found(truth, ranked, mask, k=10):
    """How many of the band's tags stand in the first k places of the whole list.

    R@k: mean over the items that have such a tag; found@k: over all pairs of item and tag alike. For the band
    "tail" the latter is the figure called 'tail'. macro R@k: mean over the tags that an item has.
    """
    true = inside(truth, mask)
    sizes = true.getnnz(axis=1)
    hits = hit_matrix(truth, ranked) & mask[ranked]
    kept = sizes > 0
    return {f"R@{k}": recall(hits[kept], sizes[kept], k), f"found@{k}": hits[:, :k].sum() / sizes.sum(),
            f"macro R@{k}": macro_recall(true, ranked, hits, k)}


def macro_recall(truth, ranked, hits, k):
    """Mean over the tags that an item has of the share of these items where it stands in the first k places."""
    pairs = truth.getnnz(axis=0)
    placed = np.bincount(ranked[:, :k][hits[:, :k]], minlength=len(pairs))
    return (placed[pairs > 0] / pairs[pairs > 0]).mean()


def of_band(truth, ranked, counts, items, band):
    """All figures of one band, with the number of items and pairs they rest on; None where there is no pair."""
    mask = band_mask(counts, band)
    true, lists = restricted(truth, ranked, mask)
    if true.nnz == 0:
        return None
    return {"items": true.shape[0], "pairs": int(true.nnz),
            **of_lists(true, lists, propensities(counts, items)), **found(truth, ranked, mask)}


def by_band(truth, ranked, counts, items):
    """All figures, overall and by band. `items` is the number of training items. Items without tags do not count.

    P, nDCG and PSP of a band: truth and list are both restricted to its tags, over the items that have one.
    """
    truth = inside(truth.astype(bool), np.ones(truth.shape[1], dtype=bool))
    return {band: of_band(truth, ranked, counts, items, band) for band in ("all", *BANDS)}


def calibration_error(chances, targets, bins=20):
    """ECE: the mean of |mean chance - mean target| over bins of equal width, weighted by their size.

    Naeini, Cooper & Hauskrecht, AAAI 2015. A target is 0 or 1, or y/p (Horvitz & Thompson 1952).
    """
    place = np.minimum((chances * bins).astype(int), bins - 1)
    difference = np.bincount(place, weights=chances - targets, minlength=bins)
    return np.abs(difference).sum() / len(chances)
