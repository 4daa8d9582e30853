"""What two thousand rulings do: those of an editor who is right, and those of one who confirms whatever is shown."""

import numpy as np

import desk
import editors
import figures
import trial

RULINGS, SEED = 2000, 17
VISIBLE, CALM = 0.10, 0.05  # confirmed above the mean chance


def tail_found(connection, corpus):
    """The share of rare (item, tag) pairs of the last fifth in the first ten of their drafts."""
    ranked, _ = trial.ask(connection, corpus.split.test, corpus.numbers)
    return figures.found(corpus.truth_test, ranked, figures.band_mask(corpus.counts, "tail"))["found@10"]


def ruled_on(connection):
    """What the reliability table sums to: gaps shown and ruled on, their chances, those confirmed."""
    rows = [row for row in connection.call("desk.standing", {"window": 0})["reliability"] if row["shown"]]
    return np.array([sum(row["shown"] for row in rows), sum(row["shown"] * row["mean_chance"] for row in rows),
                     sum(row["confirmed"] for row in rows)], dtype=float)


def excess(verdicts, name, table):
    """Confirmed above the mean chance, as shares of what was shown."""
    shown, chance, confirmed = table
    verdicts.value(name, {"shown": shown, "chance": chance, "confirmed": confirmed},
                   f"{name}: {shown:,.0f} ruled on, mean chance {chance / max(shown, 1):.4f}, "
                   f"confirmed {confirmed / max(shown, 1):.4f}")
    return (confirmed - chance) / shown if shown else None


def run(connection, corpus, verdicts, _):
    """One editor after the other on the same desk; the second is the difference between two tables."""
    before = tail_found(connection, corpus)
    desk.wait_for_worklist(connection)
    ruled, right = editors.rule(connection, list(editors.head(desk.worklist(connection), RULINGS)),
                                lambda identity, tag: corpus.misses(corpus.rows[identity], tag))
    verdicts.say(f"{ruled:,} rulings from the head of the worklist, {right:,} of them that the tag belongs")
    verdicts.above("found@10 of the tail after the rulings", tail_found(connection, corpus), before)
    first = ruled_on(connection)
    over = excess(verdicts, "who is right", first)
    verdicts.at_most("who is right: confirmed off the mean chance", None if over is None else abs(over), CALM)
    ids = [corpus.train[row]["id"] for row in np.random.default_rng(SEED).permutation(len(corpus.train))[:RULINGS]]
    editors.rule(connection, editors.shown(connection, ids, RULINGS), lambda *_: True)
    over = excess(verdicts, "who confirms everything", ruled_on(connection) - first)
    verdicts.at_least("who confirms everything: confirmed above the mean chance", over, VISIBLE)
