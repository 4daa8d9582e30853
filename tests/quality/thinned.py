#!/usr/bin/python3
"""T: W with tags hidden on purpose, so that all the daemon says can be held against the truth it never sees.

The first 80 % are filed thinned; thinning.py says how tags are hidden. Every line with a floor begins with `kept` or
`MISSED`. Each part has a docstring of what it asks. Parts that leave the model as it is share a daemon.

Ends with 0 when every floor is kept, 1 when one is missed, 69 when W is not there, 70 when the daemon failed.
"""

import argparse
import os
import sys
import time

import desk
import outcome
import part_chances
import part_completeness
import part_gaps
import part_propensities
import part_rehearsed
import part_rulings
import part_standing
import split as splits
import thinning
import trial
import verdicts
import wire

PARTS = {"chances": part_chances.run, "gaps": part_gaps.run, "standing": part_standing.run,
         "completeness": part_completeness.run, "rulings": part_rulings.run}
ON_ONE_DAEMON = (("chances", "gaps", "standing"), ("completeness",), ("rulings",))
ALL_PARTS = (*PARTS, "rehearsed", "propensities")
METHOD_NOT_FOUND = "(-32601,"


def carried_out(part, run):
    """The verdicts of one part; a method that the daemon does not have yet is a floor missed."""
    start = time.monotonic()
    judged = verdicts.Verdicts(part)
    print(f"T, {part}:", flush=True)
    try:
        run(judged)
    except wire.WireError as error:
        if METHOD_NOT_FOUND not in str(error):
            raise
        judged.failed(f"cannot be asked: {error}")
    judged.value("seconds", time.monotonic() - start)
    return judged


def on_one_daemon(parts, corpus, options):
    """Carries out the parts one after the other on one desk."""
    with trial.daemon(options.daemon, options.set) as connection:
        filed_s, _ = trial.file_items(connection, corpus.train)
        start = time.monotonic()
        desk.wait_for_worklist(connection)
        print(f"T: filed in {filed_s:.1f} s, worklist up to date {time.monotonic() - start:.1f} s later", flush=True)
        for part in parts:
            yield carried_out(part, lambda judged, run=PARTS[part]: run(connection, corpus, judged, options))


def judged_parts(split, corpus, options, parts):
    """The verdicts of the wanted parts, in the order in which they are carried out."""
    for group in ON_ONE_DAEMON:
        wanted = [part for part in group if part in parts]
        if wanted:
            yield from on_one_daemon(wanted, corpus, options)
    if "rehearsed" in parts:
        yield carried_out("rehearsed", lambda judged: part_rehearsed.run(corpus, judged, options))
    if "propensities" in parts:
        yield carried_out("propensities", lambda judged: part_propensities.run(split, judged, options))


def run(options, parts=ALL_PARTS, curve="default"):
    """All that is known of T afterwards; None where W is not there."""
    path = os.path.join(options.corpora, "W.jsonl")
    if not os.path.exists(path):
        print(f"T: skipped, {path} is not there (make corpora makes it).")
        return None
    start = time.monotonic()
    split = splits.Split(path)
    corpus = thinning.Thinned(split, thinning.CURVES[curve])
    print(f"T: W with the true curve '{curve}': {corpus}, settings {' '.join(options.set) or 'default'}", flush=True)
    judged = list(judged_parts(split, corpus, options, parts))
    floors = [floor for one in judged for floor in one.floors]
    print(f"T: {sum(floor['kept'] for floor in floors)} floors kept, {sum(not floor['kept'] for floor in floors)} missed, "
          f"{time.monotonic() - start:.0f} s", flush=True)
    return {"corpus": split.sha256, "curve": curve, "settings": options.set, "floors": floors,
            "parts": {one.part: one.values for one in judged}}


def options_of(arguments):
    """The command line."""
    parser = argparse.ArgumentParser(description="What the daemon says of missing tags, against a known truth.")
    parser.add_argument("daemon", nargs="?", default="build/undertagd", help="the daemon's program")
    parser.add_argument("--part", action="append", choices=ALL_PARTS, help="only this one")
    parser.add_argument("--curve", choices=sorted(thinning.CURVES), default="default",
                        help="the true curve of all parts but propensities, which takes each")
    parser.add_argument("--corpora", metavar="FOLDER", default="build/corpora", help="where W.jsonl is")
    parser.add_argument("--set", action="append", default=[], metavar="NAME=VALUE", help="handed to the daemon")
    parser.add_argument("--json", metavar="FILE", help="keep the figures in a file")
    parser.add_argument("--kept", metavar="FOLDER", default="build/quality", help="where pictures are kept")
    return parser.parse_args(arguments)


def main(arguments=None):
    options = options_of(arguments)
    try:
        result = run(options, options.part or ALL_PARTS, options.curve)
    except (OSError, trial.TrialError, wire.WireError) as error:
        print(f"The trial broke off: {error}.", file=sys.stderr)
        return outcome.EX_SOFTWARE
    results = {} if result is None else {"T": result}
    if options.json:
        outcome.write(options.json, results)
    return outcome.status(results, 1)


if __name__ == "__main__":
    sys.exit(main())
