"""W with tags hidden on purpose: each tag is kept with a chance p that is known, so that the truth is known too.

W's tags are complete. The true curve gives p from the number of items that visibly have a tag; that number is p times
the complete one in the mean, so p is the root of p = curve(p · N_true), over the items that are learned. Each pair of
item and tag is hidden with 1 - p. An item left without tags is filed with none.
"""

import numpy as np
from scipy import sparse

import figures

SEED = 20_250_801


def published(a, b):
    """The curve of Jain, Prabhu & Varma, KDD 2016, with these A and B."""
    return lambda counts, items: figures.propensities(counts, items, a, b)


def falling(counts, _):
    """No such curve at all: rare tags are given more often than common ones, .7 down to .3."""
    return 0.3 + 0.4 / (1.0 + np.asarray(counts, dtype=float) / 30.0)


# A and B of the two others: Jain, Prabhu & Varma's values for other kinds of corpora (from memory).
CURVES = {"default": published(figures.CURVE_A, figures.CURVE_B), "gentle": published(0.5, 0.4),
          "steep": published(0.6, 2.6), "falling": falling}


def chances(complete, items, curve):
    """The root p = curve(p · N_true) of each tag: one root, since curves rise with falling slope, or fall."""
    complete, place = np.unique(complete, return_inverse=True)
    low, high = np.zeros(len(complete)), np.ones(len(complete))
    for _ in range(60):
        middle = (low + high) / 2
        under = curve(middle * complete, items) > middle
        low, high = np.where(under, middle, low), np.where(under, high, middle)
    return ((low + high) / 2)[place]


def kept_pairs(truth, p, random):
    """The pairs of `truth` that stay visible."""
    truth = truth.sorted_indices()
    kept = random.random(truth.nnz) < p[truth.indices]
    rows = np.repeat(np.arange(truth.shape[0]), np.diff(truth.indptr))
    return sparse.csr_matrix((np.ones(kept.sum(), dtype=bool), (rows[kept], truth.indices[kept])), shape=truth.shape)


def refiled(items, given, tags):
    """The items with the tags of `given` only."""
    rows = np.split(given.indices, given.indptr[1:-1])
    return [{**item, "tags": [tags[number] for number in row]} for item, row in zip(items, rows)]


class Thinned:
    """A split whose items have lost tags: `train` and `test` are what the daemon may see, the rest is the truth.

    `split` is the whole one. Tags are `known` when an item of `train` visibly has them: nothing can be said of the others, and `truth_*` leaves
    them out. `counts` are visible, over `train`; `p` is the true one.
    """

    def __init__(self, split, curve, seed=SEED):
        random = np.random.default_rng(seed)
        self.split = split
        self.tags, self.numbers = split.tags, split.numbers
        self.p = chances(split.counts, len(split.train), curve)
        self.given_train = kept_pairs(split.truth_train, self.p, random)
        self.given_test = kept_pairs(split.truth_test, self.p, random)
        self.train = refiled(split.train, self.given_train, split.tags)
        self.test = refiled(split.test, self.given_test, split.tags)
        self.counts = self.given_train.getnnz(axis=0)
        self.known = self.counts > 0
        self.truth_train = figures.inside(split.truth_train, self.known)
        self.truth_test = figures.inside(split.truth_test, self.known)
        self.hidden_train = without(self.truth_train, self.given_train)
        self.rows = {item["id"]: row for row, item in enumerate(self.train)}

    def __str__(self):
        hidden, bare = self.hidden_train.nnz, (self.given_train.getnnz(axis=1) == 0).sum()
        return (f"{len(self.train):,} items, {self.known.sum():,} known tags, {hidden:,} of {self.truth_train.nnz:,} of "
                f"their pairs hidden, {bare:,} items left without a tag")

    def complete(self, row):
        """The complete list of a learned item, of tags that are known."""
        return [self.tags[number] for number in row_of(self.truth_train, row)]

    def misses(self, row, tag):
        """Whether a learned item has a tag that was hidden."""
        return self.numbers[tag] in row_of(self.hidden_train, row)


def without(all_pairs, given):
    """The pairs that are not given."""
    missing = all_pairs.astype(np.int8) - all_pairs.multiply(given).astype(np.int8)
    missing.eliminate_zeros()
    return sparse.csr_matrix(missing, dtype=bool)


def row_of(pairs, row):
    """The tags of one item, by number."""
    return pairs.indices[pairs.indptr[row]:pairs.indptr[row + 1]]
