"""A snapshot in Python: what the daemon would say of an item, from the snapshot's files alone.

    desk = Snapshot("exports/latest")
    desk.best({"title": "Fog at the Head", "text": "Bell rung till dawn."})     # the likeliest tags
    desk.best(entry, tags=["fog signals"])                                      # what an entry with that tag lacks

An item is a dict like a line of items.jsonl: title, text, language and fields, all optional. Arrays are by row of
tags.jsonl. The names of the steps are those of text.json and calibration.json, which say it in words.
"""

import json
import os

import numpy as np
from scipy import sparse

from snapshot_words import Terms


class Snapshot:
    """A snapshot's folder, read whole."""

    def __init__(self, folder):
        self.folder = folder
        self.tags, words = self.lines("tags.jsonl"), self.lines("words.jsonl")
        self.names = [tag["tag"] for tag in self.tags]
        self.rows = {name: row for row, name in enumerate(self.names)}
        self.columns = {word["word"]: column for column, word in enumerate(words)}
        self.holding = np.array([word["documents"] for word in words], dtype=float)
        self.weights = sparse.load_npz(os.path.join(folder, "weights.npz")).tocsc()  # by word: an item has few
        self.bias, self.count, self.unprompted, self.p_allowed = (
            np.array([tag[name] for tag in self.tags], dtype=float)
            for name in ("bias", "count", "unprompted", "p_allowed"))
        self.p = np.array([tag["propensity"]["p"] for tag in self.tags], dtype=float)
        self.text, self.calibration = self.read("text.json"), self.read("calibration.json")
        self.terms = Terms(self.text)

    def read(self, name):
        """One of the JSON files."""
        with open(os.path.join(self.folder, name), encoding="utf-8") as file:
            return json.load(file)

    def lines(self, name):
        """One of the files with a JSON text a line."""
        with open(os.path.join(self.folder, name), encoding="utf-8") as file:
            return [json.loads(line) for line in file]

    # --- from an item to scores ----------------------------------------------------------------------------------------

    def features(self, item, is_filed=False):
        """x: the columns of the item's known terms, and their values."""
        counts = self.terms.frequencies(item)
        columns = np.array([self.columns.get(term, -1) for term in counts], dtype=int)
        known = columns >= 0
        itself = 0 if is_filed else 1  # a draft counts as if it were filed
        holding = np.zeros(len(columns))
        holding[known] = self.holding[columns[known]]
        holding = np.maximum(holding + itself, 1)
        share = np.where(holding > 1, 1.0, self.text["unshared_share"])
        x = share * weight(np.array(list(counts.values()), dtype=float)) * np.log1p(
            max(self.text["documents"] + itself, 1) / holding)
        return columns[known], (x / (np.sqrt(np.sum(x * x)) or 1))[known]

    def scores(self, item, is_filed=False):
        """The score of each tag."""
        return self.scores_of(*self.features(item, is_filed))

    def scores_of(self, columns, x):
        """The score of each tag, from x."""
        return self.calibration["base_score"] + self.bias + self.weights[:, columns] @ x

    # --- from scores to chances ----------------------------------------------------------------------------------------

    def chances(self, item, tags=()):
        """The chance of each tag: that it belongs to a draft, or, where that has tags, that it is missing.

        NaN of tags that the draft has, and of those that no filed item has.
        """
        columns, x = self.features(item)
        scores = self.scores_of(columns, x)
        words_speak = self.weights[:, columns].nnz > 0
        chances = self.belongs(scores) if words_speak else self.prevalence()
        given = np.isin(np.arange(len(self.tags)), [self.rows[tag] for tag in tags if tag in self.rows])
        if tags:
            chances = self.missing(chances, self.promise(scores, given))
        return np.where(given | (self.count == 0), np.nan, chances)

    def belongs(self, scores):
        """P(belongs) by score: each tag on the curve of its group of propensities."""
        groups, points = self.calibration["belongs"]["groups"], self.calibration["belongs"]["scores"]
        cuts = [group["propensity_below"] for group in groups[:-1]]
        group_of_tag = np.searchsorted(cuts, self.p, side="right")
        on_curves = np.array([np.interp(scores, points, group["chances"]) for group in groups])
        at_floor = np.array([group["at_floor"] for group in groups])[group_of_tag]
        is_above = scores > self.calibration["floor_score"]
        return np.where(is_above, on_curves[group_of_tag, np.arange(len(scores))], at_floor)

    def prevalence(self):
        """P(belongs) where the words say nothing: how often the tag belongs at all."""
        return np.minimum(self.unprompted / max(self.calibration["documents"], 1) / self.p, 1)

    def missing(self, belongs, promise):
        """P(missing | not given), in view of what the other tags promise."""
        agreement = self.calibration["agreement"]
        missing = not_given(self.p_allowed, belongs)
        agreed = self.agreed(promise - np.where(belongs >= agreement["belongs_from"], missing, 0), missing)
        share = np.clip(missing / agreement["from"] - 1, 0, 1)
        return (1 - share) * missing + share * agreed

    def promise(self, scores, given):
        """How many tags that a draft lacks are expected to be missing, by the likely ones."""
        belongs = self.belongs(scores)  # by the curves, whatever its words say
        is_likely = self.candidates(scores) & (belongs >= self.calibration["agreement"]["belongs_from"])
        return not_given(self.p_allowed, belongs)[is_likely & ~given].sum()

    def candidates(self, scores):
        """Which tags may take part in the promise: the best of each band above the floor."""
        chosen = np.zeros(len(scores), dtype=bool)
        most = np.inf
        for band in self.calibration["bands"]:  # the most frequent ones first
            is_open = (scores > self.calibration["floor_score"]) & (self.count > 0)
            rows = np.flatnonzero(is_open & (self.count >= band["count_from"]) & (self.count < most))
            best = np.argsort(-scores[rows], kind="stable")[:self.calibration["candidates_a_band"]]
            chosen[rows[best]] = True
            most = band["count_from"]
        return chosen

    def agreed(self, others, missing):
        """What a chance to be missing comes to where the other tags promise so much."""
        agreement = self.calibration["agreement"]
        points, rows = np.array(agreement["missing"]), agreement["rows"]
        inside = np.clip(missing, points[0], points[-1])
        in_rows = np.array([np.interp(logit(inside), logit(points), row["chances"]) for row in rows])
        in_rows *= np.minimum(missing / points[0], 1)  # below the first point
        place = np.interp(others, [row["promise"] for row in rows], np.arange(len(rows)))
        below = np.minimum(place.astype(int), len(rows) - 2)
        share, tags = place - below, np.arange(len(missing))
        return (1 - share) * in_rows[below, tags] + share * in_rows[below + 1, tags]

    # --- answers -------------------------------------------------------------------------------------------------------

    def best(self, item, tags=(), most=10):
        """The tags with the greatest chances, each with its chance."""
        chances = self.chances(item, tags)
        order = np.argsort(-np.nan_to_num(chances, nan=-1), kind="stable")[:most]
        return [(self.names[row], float(chances[row])) for row in order if not np.isnan(chances[row])]


def weight(frequency):
    """w(tf) = 1 + ln tf, and tf itself below 1."""
    return np.where(frequency < 1, frequency, 1 + np.log(np.maximum(frequency, 1)))


def not_given(p, belongs):
    """P(belongs | not given), p being the chance that a tag that belongs is given."""
    left = 1 - p * belongs
    return np.where(left > 0, (1 - p) * belongs / np.where(left > 0, left, 1), 0)


def logit(chance):
    """ln(chance / (1 - chance))."""
    return np.log(chance / (1 - chance))
