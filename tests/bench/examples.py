"""A corpus as features and numbers, for the learners alone: written for examples_bench, its answers read back.

The features are those that tests/quality gives the batch solver, without their column for the bias; a given pair
counts 2/p - 1, with p from the training counts, divided by its mean over the given pairs where `even_out` is set,
as by the daemon's defaults.
"""

import json
import os
import subprocess

import numpy as np

import features
import figures

DEPTH = 20  # as in examples_bench.c
DEFAULT_SPECIFICITY = -1  # the daemon's
NO_TAG = 0xFFFFFFFF
LARGE_VOCABULARY = 2000  # from here the daemon learns with the larger step
SMALL_STEP, LARGE_STEP = 0.3, 0.5
AGAIN_TIMES, AGAIN_POWER = 1.15, 1.15


def step_of(tags):
    """The daemon's step for a vocabulary of this size."""
    return LARGE_STEP if tags >= LARGE_VOCABULARY else SMALL_STEP


def again_of(tags):
    """The part of the step with which the daemon rehearses, for a vocabulary of this size."""
    return 1 / 10 if tags >= LARGE_VOCABULARY else 1 / 3


def cost_of(tags):
    """What a loss weighs beside the ridge when the daemon rehearses, for a vocabulary of this size."""
    return 1.0 if tags >= LARGE_VOCABULARY else 0.3


def again_factors(factor):
    """The factors of pairs that the daemon rehearses."""
    return AGAIN_TIMES * factor ** AGAIN_POWER


def factors(counts, items, even_out=True):
    """2/p - 1 by tag, over its mean over the given pairs."""
    factor = 2.0 / figures.propensities(counts, items) - 1.0
    return factor / np.average(factor, weights=counts) if even_out else factor


class Examples:
    """The examples of a split in a file of a folder; `tags` restricts them to some tags (numbers, rising)."""

    def __init__(self, build, folder, split, tags=None):
        self.build, self.path = build, os.path.join(folder, "examples")
        self.ranks = os.path.join(folder, "ranks")
        self.x_train, self.x_test = (x[:, :-1].tocsr() for x in features.extract(split.train, split.test))
        self.truth_train, self.truth_test = split.truth_train, split.truth_test
        if tags is not None:
            self.truth_train, self.truth_test = self.truth_train[:, tags], self.truth_test[:, tags]
        self.counts, self.items = self.truth_train.getnnz(axis=0), self.truth_train.shape[0]
        self.step = step_of(self.truth_train.shape[1])
        self.again = self.step * again_of(self.truth_train.shape[1])
        self.cost = cost_of(self.truth_train.shape[1])
        self._write()

    def _write(self):
        """See examples.h."""
        x, given = (self.x_train, self.x_test), (self.truth_train.tocsr(), self.truth_test.tocsr())
        rows = sum(part.shape[0] for part in x)
        sizes = [rows, self.items, x[0].shape[1], given[0].shape[1]]
        with open(self.path, "wb") as file:
            np.array(sizes, dtype="<u8").tofile(file)
            starts(x).tofile(file)
            starts(given).tofile(file)
            joined(x, "indices", "<u4").tofile(file)
            joined(x, "data", "<f4").tofile(file)
            joined(given, "indices", "<u4").tofile(file)
            factor = factors(self.counts, self.items)
            factor.astype("<f8").tofile(file)
            again_factors(factor).astype("<f8").tofile(file)

    def learn(self, kind, passes=1, specificity=DEFAULT_SPECIFICITY):
        """What examples_bench says of a learner, and the best tags of each item asked about, pass by pass."""
        command = [os.path.join(self.build, "bench/examples_bench"), self.path, self.ranks, kind, str(passes),
                   str(self.step), str(self.again), str(self.cost), str(specificity)]
        said = json.loads(subprocess.run(command, check=True, capture_output=True, text=True).stdout)
        ranked = np.fromfile(self.ranks, dtype="<u4").astype(np.int64)
        ranked[ranked == NO_TAG] = -1
        return said, ranked.reshape(passes, self.x_test.shape[0], DEPTH)

    def figures(self, ranked):
        """P@1, P@5 and so on of one pass's ranks, over all tags."""
        return figures.of_band(self.truth_test.astype(bool), ranked, self.counts, self.items, "all")


def starts(parts):
    """Where the entries of each row begin, the parts one after the other."""
    lengths = np.concatenate([np.diff(part.indptr) for part in parts])
    return np.concatenate([[0], np.cumsum(lengths)]).astype("<u8")


def joined(parts, name, kind):
    """One member of the parts, one after the other."""
    return np.concatenate([getattr(part, name) for part in parts]).astype(kind)
