#!/usr/bin/python3
"""The figures of tests/quality against scikit-learn and published examples, PSP against a direct recomputation."""
import itertools
import sys
import unittest

import numpy as np
from scipy import sparse
from sklearn.metrics import ndcg_score, precision_score, recall_score

import python_tests
import figures

ITEMS, TAGS, DEPTH, LEARNED = 200, 60, 20, 5000


def drawn(seed=1):
    """Random truth (every item has a tag), scores without ties, the lists by them, and counts from all bands."""
    random = np.random.default_rng(seed)
    truth = random.random((ITEMS, TAGS)) < 0.1
    truth[np.arange(ITEMS), random.integers(TAGS, size=ITEMS)] = True
    scores = random.random((ITEMS, TAGS)) + truth * random.random((ITEMS, TAGS))
    ranked = np.argsort(-scores, axis=1)[:, :DEPTH]
    counts = np.where(np.arange(TAGS) < 20, 2000, np.where(np.arange(TAGS) < 40, 200, 10)) + np.arange(TAGS) % 20
    return truth, scores, ranked, counts


def first(ranked, k):
    """The first k of each list as an indicator matrix."""
    chosen = np.zeros((len(ranked), TAGS), dtype=bool)
    np.put_along_axis(chosen, ranked[:, :k], True, axis=1)
    return chosen


def computed(truth, ranked, counts, band="all"):
    return figures.by_band(sparse.csr_matrix(truth), ranked, counts, LEARNED)[band]


class Ranking(unittest.TestCase):
    """Overall figures."""

    def setUp(self):
        self.truth, self.scores, self.ranked, self.counts = drawn()
        self.figures = computed(self.truth, self.ranked, self.counts)

    def test_precision_at_k_is_that_of_scikit_learn(self):
        for k in (1, 3, 5):
            expected = precision_score(self.truth, first(self.ranked, k), average="samples")
            self.assertAlmostEqual(self.figures[f"P@{k}"], expected, places=12)

    def test_recall_at_ten_is_that_of_scikit_learn(self):
        expected = recall_score(self.truth, first(self.ranked, 10), average="samples")
        self.assertAlmostEqual(self.figures["R@10"], expected, places=12)

    def test_ndcg_at_five_is_that_of_scikit_learn(self):
        self.assertAlmostEqual(self.figures["nDCG@5"], ndcg_score(self.truth, self.scores, k=5), places=12)

    def test_found_at_ten_is_the_pooled_recall_of_scikit_learn(self):
        expected = recall_score(self.truth, first(self.ranked, 10), average="micro")
        self.assertAlmostEqual(self.figures["found@10"], expected, places=12)

    def test_macro_recall_at_ten_is_that_of_scikit_learn_over_the_tags_that_an_item_has(self):
        self.assertTrue(self.truth.any(axis=0).all())
        expected = recall_score(self.truth, first(self.ranked, 10), average="macro")
        self.assertAlmostEqual(self.figures["macro R@10"], expected, places=12)

    def test_a_tag_that_no_item_has_does_not_count_in_the_macro_recall(self):
        self.truth[:, :7] = False
        expected = recall_score(self.truth, first(self.ranked, 10), average="macro", labels=range(7, TAGS))
        self.assertAlmostEqual(computed(self.truth, self.ranked, self.counts)["macro R@10"], expected, places=12)

    def test_a_perfect_list_has_ndcg_psp_and_recall_of_one(self):
        p = figures.propensities(self.counts, LEARNED)
        ranked = np.argsort(-(self.truth / p), axis=1)[:, :DEPTH]
        perfect = computed(self.truth, ranked, self.counts)
        for name in ("nDCG@5", "PSP@1", "PSP@3", "PSP@5"):
            self.assertAlmostEqual(perfect[name], 1.0, places=12)

    def test_an_empty_place_counts_as_a_miss(self):
        short = self.ranked.copy()
        short[:, 2:] = -1
        cut = computed(self.truth, short, self.counts)
        self.assertAlmostEqual(cut["P@5"] * 5, self.truth[np.arange(ITEMS)[:, None], self.ranked[:, :2]].sum() / ITEMS)
        self.assertEqual(cut["P@1"], self.figures["P@1"])

    def test_a_list_shorter_than_k_has_the_figures_of_one_with_empty_places(self):
        filled = np.hstack([self.ranked[:, :2], np.full((ITEMS, 8), -1)])
        self.assertEqual(computed(self.truth, self.ranked[:, :2], self.counts), computed(self.truth, filled, self.counts))

    def test_items_without_any_tag_change_no_figure(self):
        truth = np.vstack([self.truth, np.zeros((7, TAGS), dtype=bool)])
        ranked = np.vstack([self.ranked, self.ranked[:7]])
        self.assertEqual(computed(truth, ranked, self.counts), self.figures)


class CumulatedGain(unittest.TestCase):
    """The worked example of Järvelin & Kekäläinen, ACM TOIS 20(4), 2002, section 2 (from memory).

    Their discount is log2(place) from the second place on; their figures are cut to two decimals here and there.
    """

    GAINS = np.array([3, 2, 3, 0, 0, 1, 2, 2, 3, 0])
    BEST = np.array([3, 3, 3, 2, 2, 2, 1, 1, 1, 1])
    DISCOUNT = 1 / np.log2(np.maximum(np.arange(1, 11), 2))

    def test_gain_without_discount_is_cumulated_as_published(self):
        self.assertEqual(figures.cumulated(self.GAINS, 1).tolist(), [3, 5, 8, 8, 8, 9, 11, 13, 16, 16])

    def test_discounted_gain_is_cumulated_as_published(self):
        np.testing.assert_allclose(figures.cumulated(self.GAINS, self.DISCOUNT),
                                   [3, 5, 6.89, 6.89, 6.89, 7.28, 7.99, 8.66, 9.61, 9.61], atol=0.01)
        np.testing.assert_allclose(figures.cumulated(self.BEST, self.DISCOUNT),
                                   [3, 6, 7.89, 8.89, 9.75, 10.52, 10.88, 11.21, 11.53, 11.83], atol=0.01)

    def test_gain_over_the_best_is_as_published(self):
        over_best = figures.cumulated(self.GAINS, self.DISCOUNT) / figures.cumulated(self.BEST, self.DISCOUNT)
        np.testing.assert_allclose(over_best, [1, .83, .87, .77, .71, .69, .73, .77, .83, .81], atol=0.01)

    def test_ndcg_of_a_list_by_hand(self):
        """Hits at places 1 and 3 of three true tags: (1 + 1/2) / (1 + 1/log2(3) + 1/2) = 1.5 / 2.1309 = .7039."""
        self.assertAlmostEqual(figures.ndcg(np.array([[True, False, True, False]]), np.array([3]), 5), 0.7039, places=4)


class PropensityScored(unittest.TestCase):
    """PSP@k, always over the best attainable sum."""

    def test_psp_equals_a_direct_recomputation_that_tries_every_choice_of_k_true_tags(self):
        truth, _, ranked, counts = drawn()
        p = 1 / (1 + (np.log(LEARNED) - 1) * 2.5 ** .55 * (counts + 1.5) ** -.55)
        for k in (1, 3, 5):
            gained = best = 0.0
            for item in range(ITEMS):
                tags = np.flatnonzero(truth[item])
                gained += sum(1 / p[tag] for tag in ranked[item, :k] if truth[item, tag])
                best += max(sum(1 / p[tag] for tag in choice) for choice in itertools.combinations(tags, min(k, len(tags))))
            self.assertAlmostEqual(computed(truth, ranked, counts)[f"PSP@{k}"], gained / best, places=12)

    def test_a_tag_given_once_in_1000_items_has_p_of_145_thousandths(self):
        """By hand: C = 5.908 * 1.655 = 9.779, 2.5^-.55 = .6041, 1 / (1 + 5.908) = .1448."""
        self.assertAlmostEqual(float(figures.propensities([1], 1000)[0]), 0.1448, places=4)

    def test_a_tag_given_76_times_in_76000_items_has_p_of_392_thousandths(self):
        """By hand: C = 10.238 * 1.655 = 16.95, 77.5^-.55 = .0914, 1 / (1 + 1.549) = .392."""
        self.assertAlmostEqual(float(figures.propensities([76], 76000)[0]), 0.392, places=3)

    def test_propensities_of_tiny_corpora_stay_within_a_hundredth_and_one(self):
        for items in (1, 2, 10):
            p = figures.propensities(np.arange(items + 1), items)
            self.assertTrue(((p >= 0.01) & (p <= 1)).all())


class Bands(unittest.TestCase):
    """Figures by band."""

    def setUp(self):
        self.truth, self.scores, self.ranked, self.counts = drawn(2)

    def test_the_bands_part_at_30_and_at_1000_training_positives(self):
        counts = np.array([0, 29, 30, 999, 1000, 5000])
        members = {band: np.flatnonzero(figures.band_mask(counts, band)).tolist() for band in ("tail", "torso", "head")}
        self.assertEqual(members, {"tail": [0, 1], "torso": [2, 3], "head": [4, 5]})

    def test_a_band_has_the_figures_of_a_corpus_that_holds_its_tags_only(self):
        torso = (self.counts >= 30) & (self.counts < 1000)
        items = self.truth[:, torso].any(axis=1)
        full = np.argsort(-self.scores, axis=1)
        numbers = np.cumsum(torso) - 1
        alone = np.array([[numbers[tag] for tag in row if torso[tag]] for row in full[items]])
        expected = computed(self.truth[items][:, torso], alone, self.counts[torso])
        result = computed(self.truth, full, self.counts, "torso")
        for name in ("P@1", "P@3", "P@5", "nDCG@5", "PSP@1", "PSP@3", "PSP@5"):
            self.assertAlmostEqual(result[name], expected[name], places=12)
        self.assertEqual(result["items"], items.sum())

    def test_tail_is_the_share_of_rare_pairs_in_the_top_ten_of_the_whole_list(self):
        pairs = [(item, tag) for item, tag in zip(*np.nonzero(self.truth)) if self.counts[tag] < 30]
        hits = sum(tag in self.ranked[item, :10] for item, tag in pairs)
        result = computed(self.truth, self.ranked, self.counts, "tail")
        self.assertAlmostEqual(result["found@10"], hits / len(pairs), places=12)
        self.assertEqual(result["pairs"], len(pairs))

    def test_a_tag_never_seen_in_training_belongs_to_the_tail_and_counts(self):
        self.counts[59] = 0
        result = computed(self.truth, self.ranked, self.counts, "tail")
        self.assertEqual(result["pairs"], self.truth[:, 40:].sum())

    def test_recall_of_a_band_is_over_the_items_that_have_such_a_tag(self):
        head = self.counts >= 1000
        items = self.truth[:, head].any(axis=1)
        expected = recall_score(self.truth[items][:, head], first(self.ranked, 10)[items][:, head], average="samples")
        self.assertAlmostEqual(computed(self.truth, self.ranked, self.counts, "head")["R@10"], expected, places=12)

    def test_a_band_without_a_pair_has_no_figures(self):
        self.assertIsNone(computed(self.truth, self.ranked, np.full(TAGS, 500), "head"))


class Calibration(unittest.TestCase):
    """The error of chances (ECE)."""

    def test_chances_that_come_true_at_their_rate_have_no_error(self):
        chances = np.repeat([0.25, 0.75], 4)
        self.assertAlmostEqual(figures.calibration_error(chances, np.array([1, 0, 0, 0, 1, 1, 1, 0.])), 0.0)

    def test_the_error_is_the_mean_distance_of_the_bins_by_their_size(self):
        """By hand: 3 of 4 are .9 and one comes true (|.9 - 1/3|), 1 of 4 is .4 and comes true (.6): .425 + .15."""
        self.assertAlmostEqual(figures.calibration_error(np.array([.9, .9, .9, .4]), np.array([0, 1, 0, 1.])), 0.575)

    def test_a_bin_is_a_twentieth_wide(self):
        """.51 and .54 share a bin and make up for each other (|1.05 - 1| / 2); .51 and .56 do not (.49 + .56) / 2."""
        self.assertAlmostEqual(figures.calibration_error(np.array([.51, .54]), np.array([1, 0.])), 0.025)
        self.assertAlmostEqual(figures.calibration_error(np.array([.51, .56]), np.array([1, 0.])), 0.525)

    def test_a_chance_of_one_falls_into_the_last_bin(self):
        """1 and .96 share it: their targets .96 and 1 make up for each other."""
        self.assertAlmostEqual(figures.calibration_error(np.array([1.0, .96]), np.array([.96, 1.0])), 0.0)


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
