#!/usr/bin/python3
"""The batch reference of tests/quality: its solver and features against scikit-learn."""
import contextlib
import io
import os
import re
import sys
import tempfile
import unittest
import unittest.mock

import numpy as np
from scipy import sparse
from sklearn.feature_extraction.text import CountVectorizer
from sklearn.preprocessing import normalize
from sklearn.svm import LinearSVC

import python_tests
import batch
import features
import liblinear
import reference
import split as splits


def drawn(items=120, terms=30, tags=8, seed=3):
    """Random features with a column of ones, and tags that follow them with some noise."""
    random = np.random.default_rng(seed)
    x = sparse.random(items, terms, density=0.2, random_state=seed, format="csr")
    truth = (x @ random.normal(size=(terms, tags)) + 0.2 * random.normal(size=(items, tags))) > 0.3
    return features.with_bias(x), truth


class Solver(unittest.TestCase):
    """liblinear through its C interface."""

    def test_weights_are_those_of_linear_svc_with_the_same_factor_on_positives(self):
        x, truth = drawn()
        solver = liblinear.Solver(x, 0.3, 1e-8)
        for tag, factor in ((0, 1.0), (1, 5.0)):
            expected = LinearSVC(C=0.3, tol=1e-8, fit_intercept=False, class_weight={True: factor}, max_iter=100000)
            expected.fit(x, truth[:, tag])
            weights = solver.weights(np.flatnonzero(truth[:, tag]), factor)
            np.testing.assert_allclose(weights, expected.coef_.ravel(), atol=1e-5)

    def test_weights_point_to_the_tag_whether_or_not_the_first_item_has_it(self):
        x, truth = drawn()
        for order in (np.argsort(truth[:, 0]), np.argsort(~truth[:, 0])):
            weights = liblinear.Solver(x[order], 1.0, 0.01).weights(np.flatnonzero(truth[order, 0]), 1.0)
            scores = x @ weights
            self.assertGreater(scores[truth[:, 0]].mean(), scores[~truth[:, 0]].mean())

    def test_items_without_any_feature_are_laid_out_as_empty_rows(self):
        x = sparse.csr_matrix([[0.5, 0.0], [0.0, 0.0], [0.0, 2.0]])
        nodes, _ = liblinear.layout(x)
        self.assertEqual(nodes["index"].tolist(), [1, -1, -1, 2, -1])
        self.assertEqual(nodes["value"].tolist(), [0.5, 0.0, 0.0, 2.0, 0.0])


class Ranking(unittest.TestCase):
    """The lists of the batch solver."""

    def test_chunks_merge_to_the_best_of_all(self):
        scores = np.random.default_rng(4).random((5, 90))
        best = (np.empty((5, 0)), np.empty((5, 0), dtype=int))
        for start in range(0, 90, 40):
            best = batch.merge(best, scores[:, start:start + 40], np.arange(start, min(start + 40, 90)))
        np.testing.assert_array_equal(best[1], np.argsort(-scores, axis=1)[:, :batch.DEPTH])

    def test_lists_follow_the_scores_of_linear_svc_with_factors_2_over_p_minus_1(self):
        x, truth = drawn(items=400)
        counts = truth.sum(axis=0)
        p = 1 / (1 + (np.log(400) - 1) * 2.5 ** .55 * (counts + 1.5) ** -.55)
        scores = np.column_stack([
            LinearSVC(C=0.3, tol=1e-6, fit_intercept=False, class_weight={True: 2 / p[tag] - 1}, max_iter=100000)
            .fit(x, truth[:, tag]).decision_function(x) for tag in range(truth.shape[1])])
        ranked = batch.rank(x, sparse.csr_matrix(truth), x, "weighted")
        self.assertGreater((ranked[:, 0] == scores.argmax(axis=1)).mean(), 0.97)

    def test_a_tag_that_no_training_item_has_is_never_proposed(self):
        x, truth = drawn()
        truth[:, 3] = False
        self.assertNotIn(3, batch.rank(x, sparse.csr_matrix(truth), x, "plain"))


class Features(unittest.TestCase):
    """What the solver sees."""

    TRAIN = [{"title": "Lamp", "text": "lamp oil and a wick"}, {"title": "", "text": "Oil, oil, oil for the LAMP"},
             {"title": "Gale", "text": "a gale from the west"}]
    TEST = [{"title": "Wick", "text": "the oil of an unknown keeper"}]

    def test_features_are_those_of_scikit_learn_where_the_title_counts_like_the_text(self):
        def joined(items):
            return [item["title"] + " " + item["text"] for item in items]
        counter = CountVectorizer(token_pattern=r"\w+")
        train, test = counter.fit_transform(joined(self.TRAIN)), counter.transform(joined(self.TEST))
        idf = np.log1p(3 / (train > 0).sum(axis=0))
        for counts in (train, test):
            counts.data = 1 + np.log(counts.data)
        kept, features.TITLE_WEIGHT = features.TITLE_WEIGHT, 1
        try:
            x_train, x_test = features.extract(self.TRAIN, self.TEST)
        finally:
            features.TITLE_WEIGHT = kept
        np.testing.assert_allclose(x_train.toarray()[:, :-1], normalize(train.multiply(idf)).toarray())
        np.testing.assert_allclose(x_test.toarray()[:, :-1], normalize(test.multiply(idf)).toarray())

    def test_a_word_of_the_title_counts_more_than_one_of_the_text(self):
        self.assertEqual(features.frequencies({"title": "lamp", "text": "lamp oil"}), {"lamp": 2.5, "oil": 1})

    def test_words_keep_inner_points_and_apostrophes_as_uax_29_does(self):
        """UAX #29, rules WB6, WB7, WB11, WB12."""
        self.assertEqual(features.words("Can't open www.light.house, 3.5 m; (v2,000) e.g. lamp-oil"),
                         ["can't", "open", "www.light.house", "3.5", "m", "v2,000", "e.g", "lamp", "oil"])

    def test_words_are_folded_and_in_nfkc(self):
        self.assertEqual(features.words("STRASSE Straße ﬁne ｌａｍｐ"), ["strasse", "strasse", "fine", "lamp"])

    def test_both_apostrophes_make_the_same_word(self):
        self.assertEqual(features.words("keeper’s keeper's"), ["keeper's", "keeper's"])

    def test_a_piece_without_a_letter_or_a_digit_is_no_word(self):
        self.assertEqual(features.words("lamp _ __ -- lamp_oil"), ["lamp", "lamp_oil"])


class Kept(unittest.TestCase):
    """Batch figures kept in a file."""

    def setUp(self):
        self.folder = tempfile.TemporaryDirectory()
        self.addCleanup(self.folder.cleanup)
        self.kept = os.path.join(self.folder.name, "kept", "reference.json")

    def split(self, seed):
        """A corpus of its own for each seed."""
        path = os.path.join(self.folder.name, f"{seed}.jsonl")
        python_tests.write_corpus(path, seed)
        return splits.Split(path)

    def obtain(self, seed, solve):
        """The figures for a corpus; what is said about progress is passed over."""
        with contextlib.redirect_stderr(io.StringIO()):
            return reference.obtain(self.split(seed), self.kept, solve)

    def test_a_split_learns_the_first_eighty_hundredths_and_asks_the_rest(self):
        split = self.split(1)
        self.assertEqual([item["id"] for item in split.train], [f"entry-{i}" for i in range(48)])
        self.assertEqual([item["id"] for item in split.test], [f"entry-{i}" for i in range(48, 60)])
        self.assertEqual(split.truth_train.shape, (48, 3))

    def test_solved_figures_are_read_again_without_solving(self):
        solved = self.obtain(1, True)
        self.assertEqual(solved["plain"]["figures"]["all"]["P@1"], 1.0)
        self.assertEqual(self.obtain(1, False), solved)

    def test_figures_kept_for_another_corpus_are_not_used(self):
        self.obtain(1, True)
        self.assertEqual(self.obtain(2, False), {})

    def test_figures_kept_for_another_checksum_of_the_corpus_are_not_used(self):
        self.obtain(1, True)
        split = self.split(1)
        split.sha256 = split.sha256[::-1]
        self.assertEqual(reference.obtain(split, self.kept, False), {})

    def test_figures_kept_for_other_features_are_not_used(self):
        self.obtain(1, True)
        with unittest.mock.patch.object(features, "WORD", re.compile("[a-z]")):
            self.assertEqual(self.obtain(1, False), {})


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
