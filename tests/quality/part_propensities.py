"""The propensities that the daemon goes by, against the true ones: at first, after 50 and after 2,000 random checks.

Two means of |p - true p|: over the known tags, and over the visible pairs, where a tag counts as often as it is given.
Most tags are given once or twice, and no curve knows from that how many items truly have them: on the two other
published curves the true one itself, at the visible counts, leaves .94 and .86 of the default's mean over the tags. So
halving is asked of the mean over the pairs, and of that over the tags only where the true curve leaves less than half.
Few checks are judged over the tags; over the pairs, where the default curve is all but exact, it is only said.
"""

import numpy as np

import desk
import editors
import thinning
import trial

FEW, MANY, SEED = 50, 2000, 13
HALF, WORSE = 0.5, 0.01


def errors(p, corpus):
    """Both means of |p - true p|; `p` is by tag number, and counts for known tags only."""
    off, pairs = np.abs(p - corpus.p)[corpus.known], corpus.counts[corpus.known]
    return {"over tags": off.mean(), "over pairs": (off * pairs).sum() / pairs.sum()}


def said(connection, corpus):
    """The p of each tag by number, as `tag.list` has it."""
    p = np.full(len(corpus.tags), np.nan)
    for name, tag in desk.all_tags(connection).items():
        p[corpus.numbers[name]] = tag["p"]
    return errors(p, corpus)


def judge(verdicts, name, by_checks, of_true_curve):
    """Few checks do no harm, and many help, unless the default curve is the true one."""
    for mean, before in by_checks[0].items():
        text, after = f"{name}: error of p {mean} after {FEW} checks", by_checks[FEW][mean]
        if mean == "over tags":
            verdicts.at_most(text, after, before + WORSE)
        else:
            verdicts.say(f"{text}: {after:.4f}")
        text, after = f"{name}: error of p {mean} after {MANY:,} checks", by_checks[MANY][mean]
        if of_true_curve[mean] < HALF * before:
            verdicts.at_most(text, after, HALF * before)
        else:
            verdicts.at_most(text, after, before + WORSE)


def on(connection, corpus, name, verdicts):
    """The errors on one true curve."""
    def complete(identity):
        return corpus.complete(corpus.rows[identity])

    of_true_curve = errors(thinning.CURVES[name](corpus.counts, len(corpus.train)), corpus)
    by_checks, checked = {0: said(connection, corpus)}, set()
    verdicts.say(f"{name}, without checks: " + ", ".join(
        f"{value:.4f} {mean} (the true curve leaves {of_true_curve[mean]:.4f})" for mean, value in by_checks[0].items()))
    for checks in (FEW, MANY):
        editors.check(connection, checks - len(checked), SEED, complete, checked)
        by_checks[checks] = said(connection, corpus)
    verdicts.value(name, {"true curve": of_true_curve, **by_checks})
    judge(verdicts, name, by_checks, of_true_curve)


def run(split, verdicts, options):
    """Each true curve in a home of its own."""
    for name, curve in thinning.CURVES.items():
        corpus = thinning.Thinned(split, curve)
        with trial.daemon(options.daemon, options.set) as connection:
            trial.file_items(connection, corpus.train)
            on(connection, corpus, name, verdicts)
