"""W filed by ten clients that share the items, beside one client, both pipelined: until filed, and until learned."""

import statistics

NEEDS = ("W",)
LONG = False
MANY = 10
MOST_DIFFERENCE = 0.2
FIGURES = {"filed_per_s": "filed", "learned_per_s": "learned"}


def run_once(bench, clients):
    """One daemon, fed by so many clients."""
    with bench.daemon() as connection:
        return bench.program("clients_bench", connection.socket.getpeername(), bench.corpus("W"), clients)


def run(bench, lines):
    """One and many in turn, round after round."""
    rounds = [{clients: run_once(bench, clients) for clients in (1, MANY)} for _ in range(bench.rounds)]
    lines.say(f"{'items a second':<28}" + "".join(f"{name:>12}" for name in FIGURES.values()))
    for clients in (1, MANY):
        medians = [statistics.median(one[clients][figure] for one in rounds) for figure in FIGURES]
        label = f"{clients} client{'s' if clients > 1 else ''}"
        lines.say(f"{label:<28}" + "".join(f"{rate:>12,.0f}" for rate in medians))
    lines.keep(rounds=rounds)
    for figure, name in FIGURES.items():
        ratio = statistics.median(one[MANY][figure] / one[1][figure] for one in rounds)
        lines.at_most(f"{name} a second, ten clients / one = {ratio:.2f}: away from 1", abs(ratio - 1), MOST_DIFFERENCE)
