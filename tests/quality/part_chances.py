"""Chances against the truth: of drafts that are new, and of what filed items lack."""

import os

import numpy as np

import figures
import plots
import trial

SAMPLE, SAMPLE_SEED = 5000, 7
POOLED, BY_BAND = 0.01, 0.02  # the errors allowed


def sample(rows, seed=SAMPLE_SEED):
    """At most SAMPLE of the first `rows` items, in the order in which they were filed."""
    return np.sort(np.random.default_rng(seed).permutation(rows)[:SAMPLE])


def filed_groups(corpus):
    """Which filed items are asked about, by name: all alike, and those that an almost empty model met."""
    return {"filed": sample(len(corpus.train)), "first fifth": sample(len(corpus.train) // 5)}


def by_band(ranked, chances, truth, counts):
    """Chances and truth of all candidates, {band: (chances, targets)}, where a band has any."""
    hits = figures.hit_matrix(truth, ranked)
    masks = {band: (ranked >= 0) & figures.band_mask(counts, band)[ranked] for band in ("all", *figures.BANDS)}
    return {band: (chances[mask], hits[mask].astype(float)) for band, mask in masks.items() if mask.any()}


def judge(verdicts, name, bands):
    """The error of the chances, pooled and by band."""
    for band, (chances, targets) in bands.items():
        error = figures.calibration_error(chances, targets)
        verdicts.value(f"{name} {band}", {"pairs": len(chances), "mean": chances.mean(), "true": targets.mean(),
                                          "error": error})
        verdicts.at_most(f"{name}, {band}: error of {len(chances):,} chances (mean {chances.mean():.3f}, "
                         f"true {targets.mean():.3f})", error, POOLED if band == "all" else BY_BAND)


def run(connection, corpus, verdicts, options, picture="reliability.png"):
    """Drafts of the last fifth against their complete tags; samples of filed items against what was hidden."""
    asked = trial.ask(connection, corpus.split.test, corpus.numbers)
    panels = {"drafts": by_band(*asked, corpus.truth_test, corpus.counts)}
    for name, rows in filed_groups(corpus).items():
        asked = trial.ask_filed(connection, [corpus.train[row] for row in rows], corpus.numbers)
        panels[name] = by_band(*asked, corpus.hidden_train[rows], corpus.counts)
    for name, bands in panels.items():
        judge(verdicts, name, bands)
    path = os.path.join(options.kept, picture)
    drawn = plots.reliability(path, panels)
    verdicts.say(f"drawn in {path}" if drawn else "no picture: matplotlib is not here (package python3-matplotlib)")
