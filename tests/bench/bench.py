#!/usr/bin/python3
"""How fast it is, as ratios within one run: the daemon through its socket beside the learner alone.

Each round runs learner_bench (one thread, no socket, no disk) and daemon_bench (the real daemon, every filing
durable before it is acknowledged) on the same corpus, one after the other; the table shows the medians of the
rounds. These machines are noisy: compare within a table, not between two.
"""

import argparse
import json
import os
import statistics
import subprocess
import sys

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, os.path.join(os.path.dirname(HERE), "quality"))
sys.dont_write_bytecode = True
import trial  # noqa: E402  (the path is set above)

EX_UNAVAILABLE = 69  # sysexits.h
ROWS = [
    ("items filed a second, durable", "daemon", "filed_per_s", "{:,.0f}"),
    ("items filed and learned a second", "daemon", "learned_per_s", "{:,.0f}"),
    ("items learned a second, learner alone", "alone", "items_per_s", "{:,.0f}"),
    ("ratio: through the daemon / alone", "ratio", "learned", "{:.2f}"),
    ("drafts scored a second, pipelined", "daemon", "questions_per_s", "{:,.0f}"),
    ("drafts scored a second, one by one", "daemon", "single_questions_per_s", "{:,.0f}"),
    ("drafts scored a second, learner alone", "alone", "questions_per_s", "{:,.0f}"),
    ("weights", "daemon", "weights", "{:,.0f}"),
    ("memory of the daemon, MB", "daemon", "memory_mb", "{:,.0f}"),
    ("memory of the learner alone, MB", "alone", "memory_mb", "{:,.0f}"),
]


def figures_of(command):
    """What a benchmark printed."""
    printed = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    figures = json.loads(printed)
    figures["memory_mb"] = figures["memory_bytes"] / 1e6
    return figures


def run_round(build, corpus):
    """One round: both programs."""
    alone = figures_of([os.path.join(build, "bench/learner_bench"), corpus])
    with trial.daemon(os.path.join(build, "undertagd"), []) as connection:
        path = connection.socket.getpeername()
        daemon = figures_of([os.path.join(build, "bench/daemon_bench"), path, corpus])
    return {"alone": alone, "daemon": daemon, "ratio": {"learned": daemon["learned_per_s"] / alone["items_per_s"]}}


def print_table(columns):
    """`columns`: by corpus, its rounds."""
    print("\n" + " " * 40 + "".join(f"{name:>16}" for name in columns))
    for label, side, figure, form in ROWS:
        medians = [statistics.median(run[side][figure] for run in rounds) for rounds in columns.values()]
        print(f"{label:<40}" + "".join(f"{form.format(median):>16}" for median in medians))


def main():
    parser = argparse.ArgumentParser(description="Speed on real corpora, as ratios within one run.")
    parser.add_argument("build", help="the folder with the programs")
    parser.add_argument("--corpora", metavar="FOLDER", required=True, help="where D.jsonl and W.jsonl are")
    parser.add_argument("--rounds", type=int, default=3)
    options = parser.parse_args()
    columns = {}
    for name in ("D", "W"):
        corpus = os.path.join(options.corpora, f"{name}.jsonl")
        if os.path.exists(corpus):
            columns[name] = [run_round(options.build, corpus) for _ in range(options.rounds)]
        else:
            print(f"{name}: skipped, {corpus} is not there (make corpora makes it).")
    if not columns:
        return EX_UNAVAILABLE
    print_table(columns)
    return 0


if __name__ == "__main__":
    sys.exit(main())
