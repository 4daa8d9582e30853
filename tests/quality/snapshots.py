"""S: snapshots of D and W, whose files must give what the daemons say that have written them.

Each corpus is filed as for its figures, with a memory budget at which the weights are on disk, cut and coded as in
service. Then a thousand items are asked about as drafts with none and with some of their tags, and a thousand of those
filed. Floors are the differences that parity.py allows; chances of filed items rest on more than is in a snapshot.
"""

import os
import time

import parity
import split as splits
import trial
import verdicts

ASKED = 1000
CORPORA = ("D", "W")
BUDGET = "memory_budget=64MiB"
FASTEST = 1 << 40  # bytes a second
KINDS = {"drafts": parity.draft_of, "drafts with tags": parity.with_a_tag}


def reader_in_c(options):
    """The program beside the daemon's; None where only the daemon was built."""
    path = os.path.join(os.path.dirname(options.daemon), "tests", "test_snapshot_files")
    return path if os.path.exists(path) else None


def judge(judged, name, score, chance):
    """Two floors."""
    judged.say(f"{name}: scores within {score:.1e}, chances within {chance:.1e}")
    judged.at_most(f"{name}: largest difference of scores", score, parity.SCORES)
    judged.at_most(f"{name}: largest difference of chances", chance, parity.CHANCES)


def compare_drafts(connection, folder, snapshot, items, judged, program):
    """Drafts of either kind, by the reader in Python and by that in C."""
    for kind, draft_of in KINDS.items():
        drafts = [draft_of(item) for item in items]
        answers = parity.asked(connection, drafts)
        apart = parity.compare(snapshot, drafts, answers)
        judged.value(kind, vars(apart))
        judge(judged, f"{kind}, {apart.gaps:,} gaps", apart.score, apart.chance)
        if program:
            by_c = parity.compare_by_c(program, folder, drafts, answers)
            judged.value(f"{kind}, by C", by_c)
            judge(judged, f"{kind}, by C, {by_c['gaps']:,} gaps", by_c["score"], by_c["chance"])


def compare_filed(connection, snapshot, items, judged):
    """Scores of filed items."""
    apart = parity.score_apart(snapshot, items, parity.asked(connection, [{"id": item["id"]} for item in items]))
    judged.value("filed items", apart)
    judged.at_most(f"{len(items):,} filed items: largest difference of scores", apart, parity.SCORES)


def run_corpus(name, split, options):
    """The verdicts on one corpus."""
    judged = verdicts.Verdicts(f"snapshot of {name}")
    print(f"S, {name}:", flush=True)
    with trial.daemon(options.daemon, [BUDGET, *options.set]) as connection:
        trial.file_items(connection, split.train)
        start = time.monotonic()
        folder, snapshot = parity.write_snapshot(connection, "parity", rate=FASTEST)
        seconds = time.monotonic() - start
        judged.value("seconds", seconds, f"{snapshot.weights.nnz:,} weights written and read in {seconds:.1f} s")
        compare_drafts(connection, folder, snapshot, split.test[:ASKED], judged, reader_in_c(options))
        compare_filed(connection, snapshot, split.train[::len(split.train) // ASKED], judged)
    return judged


def run(options):
    """All that is known of S afterwards; None where neither corpus is there."""
    judged, sums = [], {}
    for name in CORPORA:
        path = os.path.join(options.corpora, f"{name}.jsonl")
        if not os.path.exists(path):
            print(f"S: {name} is skipped, {path} is not there (make corpora makes it).")
            continue
        split = splits.Split(path)
        sums[name] = split.sha256
        judged.append(run_corpus(name, split, options))
    if not judged:
        return None
    return {"corpus": sums, "settings": [BUDGET, *options.set], "floors": [floor for one in judged for floor in one.floors],
            "parts": {one.part: one.values for one in judged}}
