#!/usr/bin/python3
"""How good the proposals are: D and W through the daemon's real socket, next to a batch solver, and T.

Files the first 80 % of a corpus, asks for the gaps of the last 20 % without their tags, and prints the figures
beside those of the daemon once it has rehearsed, of a daemon that does not correct for missing tags, and of the batch
solver on the same split. The figures are defined in figures.py. T is W with tags hidden on purpose: see thinned.py. S
holds snapshots of D and W against the daemons that have written them: see snapshots.py.

Ends with 0 when every floor is kept, 1 when one is missed, 69 when a corpus was skipped because it is not there (and
no floor is missed), 70 when the daemon failed.
"""

import argparse
import os
import sys
import time

import figures
import outcome
import reference
import report
import snapshots
import split as splits
import thinned
import trial
import wire

HERE = os.path.dirname(os.path.abspath(__file__))
FLOORS = {
    "D": {("all", "P@1"): .865, ("all", "P@5"): .470, ("all", "PSP@5"): .705, ("tail", "found@10"): .54},
    "W": {("all", "P@1"): .882, ("all", "P@5"): .745, ("all", "PSP@5"): .400, ("all", "R@10"): .71,
          ("tail", "found@10"): .35},
}
# Once it is rehearsed: on D within .005 of the batch solver's P@1 and at least its PSP@5. None of the figures may be
# below what one pass has reached by more than NOISE, besides.
REHEARSED_FLOORS = {
    "D": {("all", "P@1"): .878, ("all", "P@5"): .475, ("all", "PSP@5"): .728, ("all", "R@10"): .897,
          ("tail", "found@10"): .60},
    "W": {("all", "P@1"): .882, ("all", "P@5"): .747, ("all", "PSP@5"): .412, ("all", "R@10"): .718,
          ("tail", "found@10"): .375},
}
NOISE = .002
OF_THEIR_OWN = {"T": thinned.run, "S": snapshots.run}
CORPORA = (*FLOORS, *OF_THEIR_OWN)
UNCORRECTED = "correction=off"
REHEARSING = "rehearsal_share=1"


def reference_path(name, options):
    """Where batch figures are kept: W's, which take an hour, with the sources; D's beside what was built."""
    return os.path.join(HERE, "reference-W.json") if name == "W" else os.path.join(options.kept, f"reference-{name}.json")


def chance_figures(split, ranked, chances):
    """How the chances of all candidates compare with the tags given, overall and by band."""
    hits = figures.hit_matrix(split.truth_test, ranked)
    p = figures.propensities(split.counts, len(split.train))
    by_band = {}
    for band in ("all", *figures.BANDS):
        kept = (ranked >= 0) & figures.band_mask(split.counts, band)[ranked]
        chance, given = chances[kept], hits[kept].astype(float)
        if len(chance) > 0:
            corrected = given / p[ranked[kept]]
            by_band[band] = {"pairs": len(chance), "mean": chance.mean(), "given": given.mean(),
                             "corrected": corrected.mean(), "error": figures.calibration_error(chance, given),
                             "corrected_error": figures.calibration_error(chance, corrected)}
    return by_band


def reached(by_band, band, figure):
    """A figure; None where there are no figures, or no pairs in the band."""
    return by_band[band][figure] if by_band and by_band[band] else None


def floor(by_band, place, least, of):
    """One floor and whether it is kept; nothing was reached in a band without pairs."""
    value = reached(by_band, *place)
    return {"of": of, "band": place[0], "figure": place[1], "least": least, "reached": value,
            "kept": value is not None and bool(value >= least)}


def floors_of(name, by_band):
    """Each floor of a corpus after one pass."""
    return [floor(by_band, place, least, "") for place, least in FLOORS[name].items()]


def rehearsed_floors_of(name, by_band, one_pass):
    """Each floor of a corpus that was rehearsed: those of its own, and about what one pass has reached."""
    floors = {place: max(least, (reached(one_pass, *place) or 0) - NOISE)
              for place, least in REHEARSED_FLOORS[name].items()}
    return [floor(by_band, place, least, "rehearsed") for place, least in floors.items()]


def filed_and_asked(split, connection):
    """What is proposed with which chances once all was filed, and the seconds it took."""
    filed_s, learned_s = trial.file_items(connection, split.train)
    start = time.monotonic()
    ranked, chances = trial.ask(connection, split.test, split.numbers)
    return ranked, chances, {"filed_s": filed_s, "learned_s": learned_s, "asked_s": time.monotonic() - start}


def figures_of(split, ranked):
    """The figures of what was proposed."""
    return figures.by_band(split.truth_test, ranked, split.counts, len(split.train))


def rehearsed(split, options, folder):
    """The figures once what was filed in the folder was rehearsed, and the seconds that took; None where the settings
    say how much is rehearsed, and without figures where the daemon does not rehearse."""
    if trial.says_rehearsal(options.set):
        return None
    with trial.running(options.daemon, folder, [*options.set, REHEARSING]) as connection:
        start = time.monotonic()
        if not trial.rehearse(connection):
            return {"figures": None}
        seconds = time.monotonic() - start
        ranked, _ = trial.ask(connection, split.test, split.numbers)
    return {"figures": figures_of(split, ranked), "seconds": seconds}


def uncorrected(split, options):
    """The figures of a daemon that does not correct; None where the settings say whether it does."""
    if any(setting.startswith("correction=") for setting in options.set):
        return None
    with trial.daemon(options.daemon, [*options.set, UNCORRECTED]) as connection:
        ranked, _, _ = filed_and_asked(split, connection)
    return figures_of(split, ranked)


def run(name, split, options):
    """One corpus through the daemon, then rehearsed, and without the correction; all that is known about it."""
    with trial.home() as folder:
        with trial.running(options.daemon, folder, options.set) as connection:
            ranked, chances, seconds = filed_and_asked(split, connection)
        again = rehearsed(split, options, folder)
    by_band = figures_of(split, ranked)
    floors = floors_of(name, by_band)
    if again:
        floors += rehearsed_floors_of(name, again["figures"], by_band)
    return {"corpus": split.sha256, "settings": options.set, "learned": len(split.train), "asked": len(split.test),
            "tags": len(split.tags), **seconds, "undertag": by_band, "rehearsed": again,
            "uncorrected": uncorrected(split, options), "chances": chance_figures(split, ranked, chances),
            "floors": floors}


def trial_of(name, options):
    """The result for one corpus, printed; None where its file is not there."""
    path = os.path.join(options.corpora, f"{name}.jsonl")
    if not os.path.exists(path):
        print(f"{name}: skipped, {path} is not there (make corpora makes it).")
        return None
    split = splits.Split(path)
    result = {} if options.reference else run(name, split, options)
    solve = options.reference or name == "D"
    result["batch"] = reference.obtain(split, reference_path(name, options), solve)
    if not options.reference:
        print("\n".join(report.lines(name, result)), flush=True)
    return result


def options_of(arguments):
    """The command line."""
    parser = argparse.ArgumentParser(description="Quality of the proposals on real corpora.")
    parser.add_argument("daemon", nargs="?", default="build/undertagd", help="the daemon's program")
    parser.add_argument("--corpora", metavar="FOLDER", default="build/corpora", help="where D.jsonl and W.jsonl are")
    parser.add_argument("--corpus", action="append", choices=CORPORA, help="only this one")
    parser.add_argument("--set", action="append", default=[], metavar="NAME=VALUE", help="handed to the daemon")
    parser.add_argument("--json", metavar="FILE", help="keep the figures in a file")
    parser.add_argument("--reference", action="store_true", help="only solve and keep the batch figures")
    parser.add_argument("--kept", metavar="FOLDER", default="build/quality",
                        help="where D's batch figures and pictures are kept")
    return parser.parse_args(arguments)


def trials(options):
    """The results of the corpora that are there, by name; each is printed as soon as it is known."""
    names = options.corpus or (FLOORS if options.reference else CORPORA)
    results = {name: OF_THEIR_OWN[name](options) if name in OF_THEIR_OWN else trial_of(name, options) for name in names}
    return {name: result for name, result in results.items() if result is not None}, len(names)


def main(arguments=None):
    options = options_of(arguments)
    try:
        results, wanted = trials(options)
    except (OSError, trial.TrialError, wire.WireError) as error:
        print(f"The trial broke off: {error}.", file=sys.stderr)
        return outcome.EX_SOFTWARE
    if options.json:
        outcome.write(options.json, results)
    return outcome.status(results, wanted)


if __name__ == "__main__":
    sys.exit(main())
