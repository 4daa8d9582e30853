"""The learner alone beside one-vs-rest by scikit-learn's SGDClassifier.partial_fit, on 500 tags of W.

The 500 are W's tags by falling count, every so many-th; and, as the hardest case for a learner that visits only the
tags that an item touches, the 500 most frequent. The classifiers learn by squared hinge without sample
weights, one core; only partial_fit counts. They take the items as a stream that is to be known a moment later has to
be learned, by so many as the daemon learns in a go, and by thousands, which is the best case for them. They learn from
a part of the items, since a batch costs the same wherever it stands. The learner takes W with the same 500 tags alone,
item by item, and W with all of its tags; since that is more work for an item, it is compared by item and tag.
"""

import statistics
import time

import numpy as np
from sklearn.linear_model import SGDClassifier

import examples

NEEDS = ("W",)
LONG = False
TAGS = 500
BATCHES = {"as a stream": (64, 512), "by thousands": (4000, 8000)}  # items at a time, and in all
LEAST_SPEEDUP = 100
SPREAD, FREQUENT = "spread by count", "most frequent"
HARDEST = FREQUENT, "by thousands"  # has no target


def partial_fit_rate(given, batch, items):
    """Items a second through all of the classifiers."""
    truth = given.truth_train[:items].toarray().astype(int)
    classifiers = [SGDClassifier(loss="squared_hinge", learning_rate="invscaling", eta0=0.01)
                   for _ in range(truth.shape[1])]
    both, begun = np.array([0, 1]), time.process_time()
    for start in range(0, items, batch):
        x = given.x_train[start:start + batch]
        for tag, classifier in enumerate(classifiers):
            classifier.partial_fit(x, truth[start:start + batch, tag], classes=both)
    return items / (time.process_time() - begun)


def learner_rate(bench, given):
    """Items a second through the learner."""
    said = [given.learn("weights")[0] for _ in range(bench.rounds)]
    return statistics.median(one["items"] / one["seconds"][0] for one in said)


def choices(counts):
    """By what they are called, 500 tags (numbers, rising)."""
    order = np.argsort(-counts, kind="stable")
    order = order[counts[order] > 0]
    spread = order[np.linspace(0, len(order) - 1, TAGS).astype(int)]
    return {SPREAD: np.sort(spread), FREQUENT: np.sort(order[:TAGS])}


def run(bench, lines):
    """Both choices of tags, then all tags."""
    split = bench.split("W")
    chosen, known = choices(split.counts), len(split.tags)
    lines.say(f"{'on W, one core each':<48}{'items/s':>12}{'items × tags/s':>18}")

    def row(name, rate, tags):
        lines.say(f"{name:<48}{rate:>12,.0f}{rate * tags:>18,.0f}")
        lines.keep(**{name: rate})
        return rate

    ratios, theirs = {}, 0.0
    for name, tags in chosen.items():
        few = examples.Examples(bench.build, bench.folder_new(), split, tags)
        ours = row(f"learner, {TAGS} tags, {name}", learner_rate(bench, few), TAGS)
        for how, (batch, items) in BATCHES.items():
            theirs = row(f"{TAGS} classifiers, {name}, {how}", partial_fit_rate(few, batch, items), TAGS)
            ratios[name, how] = ours / theirs
    whole = row(f"learner, all {known:,} tags", learner_rate(bench, bench.examples("W")), known)
    for (name, how), ratio in ratios.items():
        what = f"times partial_fit's items/s, {TAGS} tags, {name}, {how}"
        if (name, how) != HARDEST:
            lines.at_least(what, ratio, LEAST_SPEEDUP, "{:.0f}")
        else:
            lines.say(f"{what}: {ratio:.0f}")
    lines.at_least("times partial_fit's items × tags/s, all tags, by thousands", whole * known / (theirs * TAGS),
                   LEAST_SPEEDUP, "{:.0f}")
