"""The batch solver's proposals: one linear classifier a tag, each near its optimum over all training items.

On D, solving to a tolerance of .01 instead of .1 takes twice as long and moves no overall figure by more than .0005.
"""

import sys

import numpy as np

import figures
import liblinear

DEPTH = 20
CHUNK = 512
TOLERANCE = 0.1
KINDS = {"weighted": {"cost": 0.3, "weighted": True}, "plain": {"cost": 1.0, "weighted": False}}


def factors(counts, items, weighted):
    """2/p - 1 for each tag, or 1."""
    return 2.0 / figures.propensities(counts, items) - 1.0 if weighted else np.ones(len(counts))


def merge(best, scores, tags):
    """The DEPTH best (scores, tags) of those so far and of a chunk of tags."""
    scores = np.hstack([best[0], scores])
    tags = np.hstack([best[1], np.broadcast_to(tags, (len(scores), len(tags)))])
    order = np.argsort(-scores, axis=1, kind="stable")[:, :DEPTH]
    return np.take_along_axis(scores, order, axis=1), np.take_along_axis(tags, order, axis=1)


def rank(x_train, truth_train, x_test, kind, progress=False):
    """The DEPTH best tags of each test item, best first. Tags that no training item has are never proposed."""
    truth_train = truth_train.tocsc()
    counts, items = truth_train.getnnz(axis=0), truth_train.shape[0]
    factor = factors(counts, items, KINDS[kind]["weighted"])
    solver = liblinear.Solver(x_train, KINDS[kind]["cost"], TOLERANCE)
    known = np.flatnonzero((counts > 0) & (counts < items))
    best = (np.empty((x_test.shape[0], 0)), np.empty((x_test.shape[0], 0), dtype=int))
    for start in range(0, len(known), CHUNK):
        tags = known[start:start + CHUNK]
        columns = [x_test @ solver.weights(positives(truth_train, tag), factor[tag]) for tag in tags]
        best = merge(best, np.column_stack(columns), tags)
        if progress:
            print(f"batch, {kind}: {start + len(tags):,} of {len(known):,} tags", file=sys.stderr, flush=True)
    return best[1]


def positives(truth, tag):
    """Numbers of the items that have a tag; `truth` is in columns."""
    return truth.indices[truth.indptr[tag]:truth.indptr[tag + 1]]
