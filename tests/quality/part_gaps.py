"""Tags that were really hidden: how many of the gaps shown are true ones, item by item and down the worklist.

The worklist stands by what an item promises in all, so its first gaps are not the likeliest of the desk. It is walked
with its default floor, where the promise is judged and the share of true gaps only said, and with the gaps that are
likelier than not, where both are judged.

Precision at 1: of the items that lack a known tag, the share whose first gap is one that they lack. The share among
all items, complete ones too, where no gap can be true, stands beside it.
"""

import desk
import figures
import part_chances
import trial

FIRST, MOST_WALKED = 5000, 40_000  # gaps of the worklist
FLOOR_FIRST, FLOOR_WORKLIST, PROMISED = 0.45, 0.75, 0.05
DEFAULT, LIKELY = 0.2, 0.5  # least chance shown


def first_gaps(connection, corpus, verdicts):
    """Precision at 1, of a sample of all filed items and of one of the first fifth."""
    for name, rows in part_chances.filed_groups(corpus).items():
        ranked, _ = trial.ask_filed(connection, [corpus.train[row] for row in rows], corpus.numbers)
        hits = figures.hit_matrix(corpus.hidden_train[rows], ranked)[:, 0]
        lacking = corpus.hidden_train[rows].getnnz(axis=1) > 0
        verdicts.value(f"{name} P@1 of all", hits.mean())
        verdicts.at_least(f"{name}: precision at 1, the {lacking.sum():,} of {len(rows):,} items that lack a known tag "
                          f"(all items: {hits.mean():.4f})", hits[lacking].mean(), FLOOR_FIRST)


class Walk:
    """The first gaps of a worklist: their chances, and whether they are true; `running` as the daemon said it."""

    def __init__(self):
        self.chances, self.true, self.running = [], [], None

    def add(self, corpus, entry):
        """One entry; nothing once FIRST gaps are there."""
        if len(self.chances) >= FIRST:
            return
        row = corpus.rows[entry["id"]]
        self.chances += [gap["chance"] for gap in entry["gaps"]]
        self.true += [corpus.misses(row, gap["tag"]) for gap in entry["gaps"]]
        self.running = entry["running"]


def walk(connection, corpus, least):
    """The worklist, and what of it falls on the first fifth, as if that were a worklist of its own."""
    whole, fifth = f"worklist from {least}", f"worklist from {least}, first fifth"
    walks, walked = {whole: Walk(), fifth: Walk()}, 0
    for entry in desk.worklist(connection, floor=least):
        walks[whole].add(corpus, entry)
        if corpus.rows[entry["id"]] < len(corpus.train) // 5:
            walks[fifth].add(corpus, entry)
        walked += len(entry["gaps"])
        if walked >= MOST_WALKED or all(len(one.chances) >= FIRST for one in walks.values()):
            break
    return walks


def judge_walk(verdicts, name, walked, least, is_whole):
    """How much of it is true, and whether that many were promised; the latter is only said of a part."""
    found, gaps = sum(walked.true), len(walked.true)
    verdicts.value(name, {"gaps": gaps, "found": found, "promised": sum(walked.chances)})
    if gaps == 0:
        verdicts.failed(f"{name}: it is empty")
        return
    text = f"{name}: share of {gaps:,} gaps that are really missing"
    if least >= LIKELY:
        verdicts.at_least(text, found / gaps, FLOOR_WORKLIST)
    else:
        verdicts.say(f"{text}: {found / gaps:.4f}")
    text = f"{name}: {found:,} found where the chances sum to {sum(walked.chances):,.0f}, off by"
    off = abs(sum(walked.chances) / max(found, 1) - 1)
    if is_whole:
        verdicts.at_most(text, off, PROMISED)
    else:
        verdicts.say(f"{text}: {off:.4f}")


def judge_running(verdicts, name, walked):
    """Whether the sum that the daemon kept itself was found."""
    found = sum(walked.true)
    if walked.running is not None:
        verdicts.at_most(f"{name}: running total {walked.running:,.0f} against {found:,} found, off by",
                         abs(walked.running / max(found, 1) - 1), PROMISED)


def run(connection, corpus, verdicts, _):
    """Single items, then the worklist when it is up to date."""
    first_gaps(connection, corpus, verdicts)
    desk.wait_for_worklist(connection)
    for least in (DEFAULT, LIKELY):
        walks = walk(connection, corpus, least)
        for name, walked in walks.items():
            judge_walk(verdicts, name, walked, least, name == f"worklist from {least}")
        whole = f"worklist from {least}"
        judge_running(verdicts, whole, walks[whole])
