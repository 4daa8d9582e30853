"""The batch solver's figures, solved or as kept in a file.

What is kept holds only for the corpus, the features and the solver's settings that it names.
"""

import hashlib
import json
import os
import time

import numpy as np

import batch
import features
import figures


def digest(matrices):
    """SHA-256 of sparse matrices, their values taken to four places: the last bit of a logarithm is no difference."""
    sha = hashlib.sha256()
    for x in matrices:
        x = x.sorted_indices()
        for part in (x.indptr, x.indices, np.rint(x.data * 1e4)):
            sha.update(part.astype("<i4").tobytes())
    return sha.hexdigest()


def key_of(split, x):
    """What the figures depend on."""
    return {"corpus": split.sha256, "features": digest(x), "feature_rules": features.DESCRIPTION,
            "solver": {"name": "liblinear 2.3.0, L2-regularised squared hinge, dual", "tolerance": batch.TOLERANCE,
                       "kinds": batch.KINDS}}


def read(path, key):
    """What is kept for `key`: by kind of solver, the figures and the seconds that solving took."""
    try:
        with open(path, encoding="utf-8") as file:
            kept = json.load(file)
    except FileNotFoundError:
        return {}
    return kept["kinds"] if kept["key"] == key else {}


def write(path, key, kinds):
    """Keeps figures for `key`; those for another key are gone."""
    os.makedirs(os.path.dirname(path) or ".", exist_ok=True)
    partial = path + ".partial"
    with open(partial, "w", encoding="utf-8") as file:
        json.dump({"key": key, "kinds": kinds}, file, indent=1, default=float)
        file.write("\n")
    os.replace(partial, path)


def solved(split, x, kind):
    """The figures of one kind of solver, and the processor's seconds that it took."""
    start = time.process_time()
    ranked = batch.rank(x[0], split.truth_train, x[1], kind, progress=True)
    return {"seconds": round(time.process_time() - start, 1),
            "figures": figures.by_band(split.truth_test, ranked, split.counts, len(split.train))}


def obtain(split, path, solve):
    """The batch figures by kind: those kept at `path` and, with `solve`, those still missing, which are then kept."""
    x = features.extract(split.train, split.test)
    key = key_of(split, x)
    kinds = read(path, key)
    for kind in batch.KINDS:
        if solve and kind not in kinds:
            kinds[kind] = solved(split, x, kind)
            write(path, key, kinds)
    return kinds
