#!/usr/bin/python3
"""Hiding tags on purpose in tests/quality: against the published curve, by hand, and what the daemon may see of it."""
import json
import os
import sys
import tempfile
import unittest

import numpy as np
from scipy import sparse

import python_tests
import figures
import split as splits
import thinning

ITEMS = 20_000


class OfCounts:
    """A split in which each tag is on as many items as asked, the last fifth like the first four."""

    def __init__(self, counts, items=ITEMS):
        random = np.random.default_rng(3)
        pairs = [(row, tag) for tag, count in enumerate(counts) for row in random.permutation(items)[:count]]
        rows, tags = zip(*pairs)
        self.truth_train = self.truth_test = sparse.csr_matrix((np.ones(len(pairs), dtype=bool), (rows, tags)),
                                                               shape=(items, len(counts)))
        self.tags = [f"tag {number}" for number in range(len(counts))]
        self.numbers = {tag: number for number, tag in enumerate(self.tags)}
        self.counts = self.truth_train.getnnz(axis=0)
        self.train = [{"id": f"entry-{row}", "title": "", "text": "", "tags": [
            self.tags[tag] for tag in thinning.row_of(self.truth_train, row)]} for row in range(items)]
        self.test = [{**item, "id": f"later-{item['id']}"} for item in self.train]


class Chances(unittest.TestCase):
    """The true p of a tag."""

    def test_p_is_what_the_published_curve_gives_for_p_times_the_complete_count(self):
        """Jain, Prabhu & Varma, KDD 2016: p = 1 / (1 + C (N + B)^-A), C = (ln N_items - 1)(B + 1)^A."""
        complete = np.array([0, 1, 7, 100, 5000])
        for a, b in ((.55, 1.5), (.5, .4), (.6, 2.6)):
            p = thinning.chances(complete, ITEMS, thinning.published(a, b))
            c = (np.log(ITEMS) - 1) * (b + 1) ** a
            np.testing.assert_allclose(p, 1 / (1 + c * (p * complete + b) ** -a), atol=1e-12)

    def test_p_of_the_falling_curve_by_hand(self):
        """p = .3 + .4 / (1 + 60 p / 30): at p = .5 both sides are .5."""
        self.assertAlmostEqual(float(thinning.chances(np.array([60]), ITEMS, thinning.falling)[0]), 0.5, places=12)

    def test_rare_tags_are_hidden_most_by_the_published_curves_and_least_by_the_falling_one(self):
        complete = np.array([1, 10, 100, 1000])
        for name, curve in thinning.CURVES.items():
            slopes = np.diff(thinning.chances(complete, ITEMS, curve))
            self.assertTrue((slopes < 0).all() if name == "falling" else (slopes > 0).all(), name)


class Hiding(unittest.TestCase):
    """What is left of the tags."""

    def test_the_curve_holds_on_the_visible_counts_in_the_mean(self):
        """50 tags on 400 items each: the mean visible count has a standard error of about √(400·.25/50) = 1.4."""
        corpus = thinning.Thinned(OfCounts([400] * 50), thinning.CURVES["default"])
        visible = corpus.counts.mean()
        self.assertAlmostEqual(visible / 400, corpus.p[0], delta=0.015)
        self.assertAlmostEqual(float(figures.propensities(visible, ITEMS)), corpus.p[0], delta=0.01)

    def test_the_later_items_are_thinned_by_the_same_p(self):
        corpus = thinning.Thinned(OfCounts([400] * 50), thinning.CURVES["steep"])
        self.assertAlmostEqual(corpus.given_test.nnz / (50 * 400), corpus.p[0], delta=0.015)

    def test_the_same_seed_hides_the_same_pairs_and_another_seed_others(self):
        first, again, other = (thinning.Thinned(OfCounts([60] * 9), thinning.CURVES["default"], seed) for seed in (5, 5, 6))
        self.assertEqual(first.train, again.train)
        self.assertEqual(first.test, again.test)
        self.assertNotEqual(first.train, other.train)

    def test_visible_and_hidden_pairs_make_up_the_truth_of_known_tags(self):
        split = OfCounts([1] * 40 + [60] * 5)
        corpus = thinning.Thinned(split, thinning.CURVES["default"])
        self.assertTrue(0 < corpus.known.sum() < len(corpus.known))
        both = corpus.given_train.toarray().astype(int) + corpus.hidden_train.toarray()
        np.testing.assert_array_equal(both, split.truth_train.toarray() & corpus.known)

    def test_an_item_knows_its_complete_list_and_what_it_misses(self):
        corpus = thinning.Thinned(OfCounts([300] * 6), thinning.CURVES["default"])
        for row in range(200):
            complete = corpus.complete(row)
            self.assertEqual({tag for tag in corpus.tags if corpus.misses(row, tag)},
                             set(complete) - set(corpus.train[row]["tags"]))


class Filed(unittest.TestCase):
    """What goes to the daemon."""

    def setUp(self):
        with tempfile.TemporaryDirectory() as folder:
            path = os.path.join(folder, "W.jsonl")
            python_tests.write_corpus(path, 0)
            self.split = splits.Split(path)
        self.corpus = thinning.Thinned(self.split, lambda counts, _: np.full(len(counts), 0.5))

    def test_a_hidden_tag_stands_in_nothing_that_is_filed(self):
        hidden = [(row, tag) for row, item in enumerate(self.split.train) for tag in item["tags"]
                  if self.corpus.misses(row, tag)]
        self.assertTrue(10 < len(hidden) < 40)
        for row, tag in hidden:
            sent = dict(self.corpus.train[row])
            self.assertNotIn(tag, json.dumps({name: sent[name] for name in sent if name not in ("title", "text")}))

    def test_an_item_left_without_tags_is_filed_with_none(self):
        bare = [item for item in self.corpus.train if item["tags"] == []]
        self.assertEqual(len(bare), self.corpus.hidden_train.nnz)

    def test_everything_but_the_tags_is_filed_as_it_is_and_in_order(self):
        def rest(items):
            return [{name: item[name] for name in item if name != "tags"} for item in items]
        self.assertEqual(rest(self.corpus.train + self.corpus.test), rest(self.split.train + self.split.test))


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
