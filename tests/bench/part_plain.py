"""The learner alone beside the same learning in a plain layout, on W: how much faster, and that it learns the same."""

import statistics

NEEDS = ("W",)
LONG = False
LEAST_SPEEDUP = 2.0
MOST_DIFFERENCE = 0.004
SHOWN = ("P@1", "P@5", "PSP@5")
KINDS = {
    "plain layout": {"kind": "plain"},
    "weights, specificity 0": {"kind": "weights", "specificity": 0},
    "weights, by default": {"kind": "weights"},
}


def run(bench, lines):
    """Each learner in turn, round after round."""
    given = bench.examples("W")
    rates, reached, postings = {name: [] for name in KINDS}, {}, {}
    for _ in range(bench.rounds):
        for name, kind in KINDS.items():
            said, ranked = given.learn(**kind)
            rates[name].append(said["items"] / said["seconds"][0])
            postings[name] = said["postings"]
            if name not in reached:
                reached[name] = given.figures(ranked[0])
    medians = {name: statistics.median(many) for name, many in rates.items()}
    lines.say(f"{'on W, one core, features given':<36}{'items/s':>10}{'weights':>12}"
              + "".join(f"{figure:>8}" for figure in SHOWN))
    for name in KINDS:
        lines.say(f"{name:<36}{medians[name]:>10,.0f}{postings[name]:>12,}"
                  + "".join(f"{reached[name][figure]:>8.4f}" for figure in SHOWN))
    plain, *others = KINDS
    lines.keep(rates=medians, figures=reached)
    for name in others:
        difference = max(abs(reached[name][figure] - reached[plain][figure]) for figure in SHOWN)
        lines.at_most(f"largest difference of a figure, {name} and plain", difference, MOST_DIFFERENCE, "{:.4f}")
    lines.at_least("times the plain layout's rate", medians[others[-1]] / medians[plain], LEAST_SPEEDUP)
