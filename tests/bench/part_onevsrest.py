"""The learner alone beside one-vs-rest by scikit-learn's SGDClassifier.partial_fit, on W's 500 most frequent tags.

The classifiers learn by squared hinge without sample weights, in batches of items, one core; only partial_fit counts.
They learn from a part of the items, since a batch costs the same wherever it stands. The learner takes W with those
500 tags alone, and W with all of its tags; since that is more work for an item, it is also compared by item and tag.
"""

import statistics
import time

import numpy as np
from sklearn.linear_model import SGDClassifier

import examples

NEEDS = ("W",)
LONG = False
TAGS, ITEMS, BATCH = 500, 8000, 2000
LEAST_SPEEDUP = 100


def partial_fit_rate(given):
    """Items a second through all of the classifiers."""
    truth = given.truth_train[:ITEMS].toarray().astype(int)
    classifiers = [SGDClassifier(loss="squared_hinge", learning_rate="invscaling", eta0=0.01)
                   for _ in range(truth.shape[1])]
    both, begun = np.array([0, 1]), time.process_time()
    for start in range(0, ITEMS, BATCH):
        x = given.x_train[start:start + BATCH]
        for tag, classifier in enumerate(classifiers):
            classifier.partial_fit(x, truth[start:start + BATCH, tag], classes=both)
    return ITEMS / (time.process_time() - begun)


def learner_rate(bench, given):
    """Items a second through the learner."""
    said = [given.learn("weights")[0] for _ in range(bench.rounds)]
    return statistics.median(one["items"] / one["seconds"][0] for one in said)


def run(bench, lines):
    """The three rates, by item and by item and tag."""
    split = bench.split("W")
    tags = np.sort(np.argsort(-split.counts, kind="stable")[:TAGS])
    few = examples.Examples(bench.build, bench.folder_new(), split, tags)
    theirs = partial_fit_rate(few)
    ours, whole, known = learner_rate(bench, few), learner_rate(bench, bench.examples("W")), len(split.tags)
    rows = [(f"{TAGS} classifiers, partial_fit by {BATCH:,} items", theirs, TAGS),
            (f"learner, the same {TAGS} tags", ours, TAGS), (f"learner, all {known:,} tags", whole, known)]
    lines.say(f"{'on W, one core each':<44}{'items/s':>12}{'items × tags/s':>18}")
    for name, rate, count in rows:
        lines.say(f"{name:<44}{rate:>12,.0f}{rate * count:>18,.0f}")
    lines.keep(partial_fit=theirs, learner_same_tags=ours, learner_all_tags=whole)
    lines.at_least(f"times partial_fit's items/s, the same {TAGS} tags", ours / theirs, LEAST_SPEEDUP, "{:.0f}")
    lines.at_least("times partial_fit's items × tags/s, all tags", whole * known / (theirs * TAGS), LEAST_SPEEDUP,
                   "{:.0f}")
