"""Makes tests/reference/standing_values.h: the standing's figures of drawn items, by numpy, scikit-learn and ours.

    python3 tests/reference/standing_values.py > tests/reference/standing_values.h

P, nDCG, PSP and R@10 are those of tests/quality/figures.py (truth and list restricted to the band), checked there
against scikit-learn; nDCG@5 and PSnDCG@5 here are scikit-learn's ndcg_score and dcg_score, the latter with gains of
1/p over that of the best order; true P@k is computed directly. The items are drawn by the generator of
tests/unit/repeatable.h, in the same order as test_standing_reference.c draws them.
"""
import numpy as np
from scipy import sparse
from sklearn.metrics import dcg_score, ndcg_score

import python_tests  # noqa: F401, says where figures is
import figures

ITEMS, TAGS, LEARNED, SEED = 400, 40, 5000, 11
WORD = (1 << 64) - 1


class Repeatable:
    """tests/unit/repeatable.h: Steele, Lea & Flood 2014."""

    def __init__(self, seed):
        self.state = seed

    def below(self, count):
        self.state = (self.state + 0x9E3779B97F4A7C15) & WORD
        mixed = self.state
        mixed = ((mixed ^ (mixed >> 30)) * 0xBF58476D1CE4E5B9) & WORD
        mixed = ((mixed ^ (mixed >> 27)) * 0x94D049BB133111EB) & WORD
        return (mixed ^ (mixed >> 31)) % count


def tag_counts():
    """A fifth of the tags are head, two fifths torso, two fifths tail."""
    tags = np.arange(TAGS)
    return np.where(tags < 8, 1000 + 300 * tags, np.where(tags < 24, 30 + 60 * (tags - 8), 1 + tags - 24))


def drawn():
    """Truth, scores without ties (a tag's number is the last digit), each item with one tag at least."""
    random = Repeatable(SEED)
    truth = np.zeros((ITEMS, TAGS), dtype=bool)
    scores = np.zeros((ITEMS, TAGS))
    for item in range(ITEMS):
        truth[item, random.below(TAGS)] = True
        for tag in range(TAGS):
            truth[item, tag] |= random.below(8) == 0
            scores[item, tag] = (random.below(1000) + (random.below(1500) if truth[item, tag] else 0)) * TAGS + tag
    return truth, scores


def of_band(truth, scores, counts, band):
    """The figures by the names of the standing, in its order."""
    mask, p = figures.band_mask(counts, band), figures.propensities(counts, LEARNED)
    true, ranked = figures.restricted(sparse.csr_matrix(truth), np.argsort(-scores, axis=1), mask)
    kept = (truth & mask).any(axis=1)
    inside, inside_scores = (truth & mask)[kept][:, mask], scores[kept][:, mask]
    worth = inside / p[mask]
    hits, sizes = figures.hit_matrix(true, ranked), true.getnnz(axis=1)
    made = figures.of_lists(true, ranked, p)
    made["nDCG@5"] = ndcg_score(inside, inside_scores, k=5)
    made["PSnDCG@5"] = dcg_score(worth, inside_scores, k=5) / dcg_score(worth, worth, k=5)
    made["R@10"] = figures.recall(hits, sizes, 10)
    for k in (1, 3, 5):
        made[f"true P@{k}"] = np.where(hits[:, :k], 1.0 / p[ranked[:, :k]], 0.0).sum() / k / len(ranked)
    return len(ranked), made


def header():
    """The lines of the header."""
    truth, scores = drawn()
    counts = tag_counts()
    lines = ["/* Made by tests/reference/standing_values.py, which says how. */",
             "/* clang-format off */",
             "/* band, items, figures by enum ranking_figure */"]
    for band in ("all", *figures.BANDS):
        items, made = of_band(truth, scores, counts, band)
        names = [f"P@{k}" for k in (1, 3, 5)] + ["nDCG@5"] + [f"PSP@{k}" for k in (1, 3, 5)]
        names += ["PSnDCG@5", "R@10"] + [f"true P@{k}" for k in (1, 3, 5)]
        lines.append(f"STANDING_VALUES({band.upper()}, {items},")
        lines.append("    " + ", ".join(f"{made[name]:.15f}" for name in names) + ")")
    return "\n".join(lines) + "\n"


if __name__ == "__main__":
    print(header(), end="")
