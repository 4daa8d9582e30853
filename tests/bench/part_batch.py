"""The learner alone beside a batch solver on D: the same features, the same 2/p - 1, one core each.

The solver is liblinear's dual coordinate descent for the squared hinge, as tests/quality has it (batch.py), one
problem a tag; only solving counts. The learner evens the factors out, which the solver's cost stands for. Its further
passes are made as the daemon rehearses: in the same order, with a part of the step, its factors and its shrinkage.
"""

import statistics
import time

import numpy as np

import batch
import features
import liblinear

NEEDS = ("D",)
LONG = False
MOST_TIME = 1 / 15
PASSES = 4  # of which the daemon rehearses three
LEAST_SHARE = {1: 0.97, 2: 0.99, 4: 1.0}  # of the solver's PSP@5, by passes
SHOWN = ("P@1", "P@5", "PSP@5")


def solve(given):
    """Seconds of the processor that solving took, and the best tags of each test item."""
    kind = batch.KINDS["weighted"]
    truth = given.truth_train.tocsc()
    factor = batch.factors(given.counts, given.items, kind["weighted"])
    solver = liblinear.Solver(features.with_bias(given.x_train), kind["cost"], batch.TOLERANCE)
    x_test, seconds = features.with_bias(given.x_test), 0.0
    best = (np.empty((x_test.shape[0], 0)), np.empty((x_test.shape[0], 0), dtype=int))
    for tag in np.flatnonzero((given.counts > 0) & (given.counts < given.items)):
        begun = time.process_time()
        weights = solver.weights(batch.positives(truth, tag), factor[tag])
        seconds += time.process_time() - begun
        best = batch.merge(best, (x_test @ weights)[:, np.newaxis], np.array([tag]))
    return seconds, given.figures(best[1])


def run(bench, lines):
    """The solver once, the learner pass after pass, round after round."""
    given = bench.examples("D")
    solving, solved = solve(given)
    rounds = [given.learn("weights", passes=PASSES) for _ in range(bench.rounds)]
    seconds = [statistics.median(said["seconds"][i] for said, _ in rounds) for i in range(PASSES)]
    reached = [given.figures(ranked) for ranked in rounds[0][1]]
    lines.say(f"{'on D, one core each':<44}{'seconds':>9}" + "".join(f"{figure:>8}" for figure in SHOWN))
    rows = [(f"solver, tolerance {batch.TOLERANCE}, C = {batch.KINDS['weighted']['cost']}", solving, solved),
            (f"learner, one pass, step {given.step:g}", seconds[0], reached[0]),
            (f"learner, rehearsed once, step {given.again:g}", sum(seconds[:2]), reached[1]),
            (f"learner, rehearsed {PASSES - 1} times", sum(seconds), reached[-1])]
    for name, took, by_figure in rows:
        lines.say(f"{name:<44}{took:>9.2f}" + "".join(f"{by_figure[figure]:>8.4f}" for figure in SHOWN))
    lines.keep(solver_s=solving, pass_s=seconds, solver=solved, learner=reached)
    lines.at_most(f"one pass / the solver's time (tolerance {batch.TOLERANCE})", seconds[0] / solving, MOST_TIME,
                  "{:.3f}")
    for passes, least in LEAST_SHARE.items():
        lines.at_least(f"PSP@5 after {passes} pass{'es' if passes > 1 else ''}, share of the solver's",
                       reached[passes - 1]["PSP@5"] / solved["PSP@5"], least, "{:.3f}")
