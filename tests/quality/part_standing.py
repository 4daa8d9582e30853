"""The figures that the daemon prints of itself, against the truth.

Only the daemon knows what it proposed for an item just before it learned it. The last fifth is filed in chunks, and the
items of a chunk are asked about as drafts just before: nearly the same lists. Of these we know the truth ('true P@k')
and, with the p of that time, what PSP@k should be against the tags given.

The daemon's figures are over items filed with a tag. So are ours that are judged; P@k over all items, where the untagged
have true tags too and worse lists, stands beside, and PSP@k as it were if a tag's first use did not count.
"""

import numpy as np

import figures
import trial

CHUNK, BLOCK = 500, 64  # a window is rounded up to whole blocks
ALLOWED = 0.005
PLACES = (1, 3, 5)


class Record:
    """Our figures by item; `add` takes a chunk as it was asked about, before it is filed."""

    def __init__(self, corpus):
        self.counts, self.items = corpus.counts.copy(), len(corpus.train)
        self.parts = {}

    def _keep(self, **columns):
        for name, column in columns.items():
            self.parts.setdefault(name, []).append(column)

    def add(self, ranked, truth, given):
        """Amounts of one chunk, with the p of this time; then its tags count."""
        p = figures.propensities(self.counts, self.items)
        known = figures.inside(given, self.counts > 0)
        hits, seen = figures.hit_matrix(truth, ranked), figures.hit_matrix(given, ranked)
        self._keep(tagged=given.getnnz(axis=1) > 0)
        for k in PLACES:
            gained, best = figures.psp_sums(given, ranked, seen, p, k)
            _, best_of_known = figures.psp_sums(known, ranked, seen, p, k)
            self._keep(**{f"true P@{k}": hits[:, :k].sum(axis=1) / k, f"P@{k}": seen[:, :k].sum(axis=1) / k,
                          f"gained {k}": gained, f"best {k}": best, f"best of known {k}": best_of_known})
        self.counts = self.counts + given.getnnz(axis=0)
        self.items += truth.shape[0]

    def last(self, items):
        """{name: (value, what stands beside it)} of the last `items` items, and how many of them had no tag."""
        columns = {name: np.concatenate(parts)[-items:] for name, parts in self.parts.items()}
        tagged = columns["tagged"]
        values = {name: (column[tagged].mean(), column.mean()) for name, column in columns.items() if "P@" in name}
        for k in PLACES:
            gained = columns[f"gained {k}"].sum()
            values[f"PSP@{k}"] = (gained / columns[f"best {k}"].sum(), gained / columns[f"best of known {k}"].sum())
        return values, int((~tagged).sum())


def file_and_ask(connection, corpus):
    """Files the last fifth in chunks, each asked about just before; our record of it."""
    record = Record(corpus)
    for start in range(0, len(corpus.test), CHUNK):
        chunk = slice(start, start + CHUNK)
        ranked, _ = trial.ask(connection, corpus.split.test[chunk], corpus.numbers)
        record.add(ranked, corpus.split.truth_test[chunk], corpus.given_test[chunk])
        trial.file_items(connection, corpus.test[chunk])
    return record


def compare(verdicts, window, ours):
    """The daemon's figures beside ours; those that must agree are judged."""
    of_daemon = window["bands"]["all"]["with"]
    for name, (value, other) in ours.items():
        said, error = of_daemon[name]["value"], of_daemon[name]["error"]
        verdicts.value(name, {"said": said, "ours": value, "ours otherwise": other})
        beside = "without first uses" if name.startswith("PSP") else "over all items"
        text = f"{name}: said {said or 0:.4f} ± {error or 0:.4f}, ours {value:.4f} ({beside} {other:.4f})"
        if name.startswith("P@"):
            verdicts.say(text)
        else:
            verdicts.at_most(f"{text}, off by", None if said is None else abs(said - value), ALLOWED)


def run(connection, corpus, verdicts, _):
    """A window over just the items of the last fifth (but for a block), and all items."""
    record = file_and_ask(connection, corpus)
    window = connection.call("desk.standing", {"window": len(corpus.test) - BLOCK})
    if not 0 < window["items"] <= len(corpus.test):
        verdicts.failed(f"the window of {len(corpus.test) - BLOCK:,} items covers {window['items']:,}")
        return
    ours, untagged = record.last(window["items"])
    verdicts.say(f"window of {window['items']:,} items, {untagged:,} of them filed without a tag")
    compare(verdicts, window, ours)
    all_time = connection.call("desk.standing", {"window": 0})
    figures_then = all_time["bands"]["all"]["with"]
    verdicts.say("all items: " + ", ".join(f"{name} {figures_then[name]['value'] or 0:.4f}" for name in ours))
    verdicts.at_least("all items: share of the filed ones that are covered",
                      all_time["items"] / (len(corpus.train) + len(corpus.test)), 1.0)
