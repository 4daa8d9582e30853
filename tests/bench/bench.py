#!/usr/bin/python3
"""How fast it is, as ratios within one run, each with its target: see DEVELOPERS.md, "Reading make bench".

A benchmark reports: it ends with 0 whatever the targets, with 69 where no part could run for want of a corpus, and
with 70 where a part broke. These machines are noisy: compare within a part, not between two runs.
"""

import argparse
import importlib
import json
import os
import signal
import subprocess
import sys
import tempfile

HERE = os.path.dirname(os.path.abspath(__file__))
sys.path[:0] = [HERE, os.path.join(os.path.dirname(HERE), "quality")]
sys.dont_write_bytecode = True
import examples  # noqa: E402  (the path is set above)
import split as splits  # noqa: E402
import trial  # noqa: E402
import wire  # noqa: E402
from lines import Lines  # noqa: E402

EX_UNAVAILABLE, EX_SOFTWARE = 69, 70  # sysexits.h
PARTS = ("daemon", "plain", "batch", "onevsrest", "reading", "latency", "clients", "large", "growth", "restart", "snapshot",
         "soak")


class Bench:
    """What the parts share: where things are, and the corpora, read once."""

    def __init__(self, options, folder):
        self.build, self.corpora, self.folder = options.build, options.corpora, folder
        self.rounds, self.quick, self.minutes = options.rounds, options.quick, options.minutes
        self.budget = options.budget
        self._splits, self._examples = {}, {}

    def corpus(self, name):
        """The path of a corpus."""
        return os.path.join(self.corpora, f"{name}.jsonl")

    def has(self, name):
        """Whether the corpus was made."""
        return os.path.exists(self.corpus(name))

    def split(self, name):
        """A corpus, the first 80 % to be learned."""
        if name not in self._splits:
            self._splits[name] = splits.Split(self.corpus(name))
        return self._splits[name]

    def examples(self, name):
        """A corpus as features and numbers."""
        if name not in self._examples:
            self._examples[name] = examples.Examples(self.build, self.folder_new(), self.split(name))
        return self._examples[name]

    def folder_new(self):
        """An empty folder that is gone in the end."""
        return tempfile.mkdtemp(dir=self.folder)

    def kept_path(self, name):
        """Where a file goes that is kept, beside the programs."""
        path = os.path.join(self.build, "bench", name)
        os.makedirs(os.path.dirname(path), exist_ok=True)
        return path

    def program(self, name, *arguments):
        """What one of the programs in C printed."""
        command = [os.path.join(self.build, "bench", name), *map(str, arguments)]
        return json.loads(subprocess.run(command, check=True, stdout=subprocess.PIPE, text=True).stdout)

    def daemon(self, settings=()):
        """A daemon in an empty home of its own, to be used with `with`; it rehearses only if the settings say so."""
        return trial.daemon(os.path.join(self.build, "undertagd"), list(settings))

    def daemon_in(self, folder, settings=()):
        """A daemon in a folder that stays, so that it can be started there once more."""
        return trial.running(os.path.join(self.build, "undertagd"), folder, list(settings))


def run_part(bench, name):
    """The lines of one part; None where a corpus that it needs is not there."""
    part, lines = importlib.import_module(f"part_{name}"), Lines(name)
    print(f"\n{name}: {part.__doc__.splitlines()[0]}", flush=True)
    missing = [corpus for corpus in part.NEEDS if not bench.has(corpus)]
    if missing:
        lines.say(f"skipped, {', '.join(missing)} is not there (make corpora makes it)")
        return None
    try:
        part.run(bench, lines)
    except (subprocess.CalledProcessError, trial.TrialError, wire.WireError, OSError, ValueError) as error:
        lines.failed(str(error))
    return lines


def read_options():
    """The command line."""
    parser = argparse.ArgumentParser(description="Speed, as ratios within one run.")
    parser.add_argument("build", help="the folder with the programs")
    parser.add_argument("--corpora", metavar="FOLDER", required=True, help="where D.jsonl and W.jsonl are")
    parser.add_argument("--part", action="append", choices=PARTS, help="only this one; may be given more than once")
    parser.add_argument("--long", action="store_true", help="the parts that take long, too")
    parser.add_argument("--quick", action="store_true", help="a smaller top for the long parts")
    parser.add_argument("--rounds", type=int, default=3, help="how often a ratio is taken; the median is shown")
    parser.add_argument("--minutes", type=float, default=20, help="how long the part soak goes on")
    parser.add_argument("--budget", type=int, default=64, metavar="MIB", help="memory_budget of the part soak")
    parser.add_argument("--json", metavar="FILE", help="where the figures go, too")
    return parser.parse_args()


def chosen(options):
    """The names of the parts to run; what was named but is long needs --long all the same."""
    for name in options.part or PARTS:
        if options.long or not importlib.import_module(f"part_{name}").LONG:
            yield name
        else:
            print(f"\n{name}: only with --long", flush=True)


def main():
    options = read_options()
    signal.signal(signal.SIGTERM, lambda *_: sys.exit(EX_SOFTWARE))  # so that no daemon and no home stays behind
    with tempfile.TemporaryDirectory(prefix="undertag-bench-") as folder:
        bench = Bench(options, folder)
        ran = [lines for name in chosen(options) if (lines := run_part(bench, name))]
    if not ran:
        return EX_UNAVAILABLE
    targets = [target for lines in ran for target in lines.targets]
    print(f"\n{sum(target['kept'] for target in targets)} of {len(targets)} targets kept")
    if options.json:
        with open(options.json, "w", encoding="utf-8") as file:
            json.dump({"targets": targets, "values": {lines.part: lines.values for lines in ran}}, file, indent=1,
                      default=float)
    return EX_SOFTWARE if any("reached" not in target for target in targets) else 0


if __name__ == "__main__":
    sys.exit(main())
