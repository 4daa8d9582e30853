"""The daemon through its socket, every filing durable, beside the learner alone in one thread.

Each round runs learner_bench (no socket, no disk) and daemon_bench (a real daemon) on the same corpus, one after the
other; the table shows the medians of the rounds.
"""

import statistics

NEEDS = ("W",)
LONG = False
LEAST_RATIO = {"W": 0.7}
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


def figures_of(bench, program, *arguments):
    """What a benchmark printed."""
    figures = bench.program(program, *arguments)
    return {**figures, "memory_mb": figures["memory_bytes"] / 1e6}


def run_round(bench, corpus):
    """One round: both programs."""
    alone = figures_of(bench, "learner_bench", corpus)
    with bench.daemon() as connection:
        daemon = figures_of(bench, "daemon_bench", connection.socket.getpeername(), corpus)
    return {"alone": alone, "daemon": daemon, "ratio": {"learned": daemon["learned_per_s"] / alone["items_per_s"]}}


def run(bench, lines):
    """The corpora that are there, side by side."""
    columns = {name: [run_round(bench, bench.corpus(name)) for _ in range(bench.rounds)]
               for name in ("D", "W") if bench.has(name)}
    lines.say(" " * 40 + "".join(f"{name:>16}" for name in columns))
    for label, side, figure, form in ROWS:
        medians = {name: statistics.median(run[side][figure] for run in rounds) for name, rounds in columns.items()}
        lines.say(f"{label:<40}" + "".join(f"{form.format(median):>16}" for median in medians.values()))
        lines.keep(**{label: medians})
    for name, least in LEAST_RATIO.items():
        reached = statistics.median(run["ratio"]["learned"] for run in columns[name])
        lines.at_least(f"through the daemon / alone, on {name}", reached, least)
