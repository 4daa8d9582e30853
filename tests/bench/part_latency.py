"""How long item.gaps waits, through the socket: idle, and while one client feeds W at full rate.

A call that does nothing is item.list from beyond the last change: it reads a view of the store, and answers.
"""

import statistics

NEEDS = ("W",)
LONG = False
MOST_FEEDING, MOST_IDLE = 10.0, 3.0
ROWS = {"idle": "item.gaps, idle", "feeding": "item.gaps, while feeding", "nothing": "a call that does nothing, idle"}
TIMES = ("p50_s", "p99_s", "most_s")


def run_round(bench):
    """One daemon, all three."""
    with bench.daemon() as connection:
        return bench.program("latency_bench", connection.socket.getpeername(), bench.corpus("W"))


def run(bench, lines):
    """The medians of the rounds, and of their ratios."""
    rounds = [run_round(bench) for _ in range(bench.rounds)]
    lines.say(f"{'milliseconds':<44}{'calls':>10}{'p50':>10}{'p99':>10}{'longest':>10}")
    for row, label in ROWS.items():
        calls = statistics.median(one[row]["calls"] for one in rounds)
        times = [statistics.median(one[row][time] for one in rounds) * 1e3 for time in TIMES]
        lines.say(f"{label:<44}{calls:>10,.0f}" + "".join(f"{time:>10.3f}" for time in times))
    lines.say(f"fed meanwhile: {statistics.median(one['fed_per_s'] for one in rounds):,.0f} items a second")
    lines.keep(rounds=rounds)
    lines.at_most("p99 while feeding / p99 idle",
                  statistics.median(one["feeding"]["p99_s"] / one["idle"]["p99_s"] for one in rounds), MOST_FEEDING)
    lines.at_most("p50 of item.gaps / p50 of doing nothing, idle",
                  statistics.median(one["idle"]["p50_s"] / one["nothing"]["p50_s"] for one in rounds), MOST_IDLE)
