"""Scoring an item of W beside reading all of its postings once, 8 bytes each, at the machine's sequential rate.

All of an item's postings are those of the full index, without the rule of specificity. The plain layout is scored
beside ours, to show what the machine makes of it.
"""

NEEDS = ("W",)
LONG = False
POSTING_BYTES = 8
MOST_TIME = 1.0
COLUMNS = {"kept": "by default", "full": "full index"}


def run(bench, lines):
    """The same items scored with the index as it is by default, and with the full one."""
    given = bench.examples("W")
    said = bench.program("reading_bench", given.path, given.step)
    rate = said["read_bytes_per_s"]
    reading = {name: said[name]["postings"] * POSTING_BYTES / rate for name in COLUMNS}
    lines.say(f"{f'reading in order: {rate / 1e9:.1f} GB/s':<44}"
              + "".join(f"{heading:>14}" for heading in COLUMNS.values()))
    rows = [("postings of an item", [f"{said[name]['postings']:,.0f}" for name in COLUMNS]),
            ("reading them, µs", [f"{reading[name] * 1e6:.1f}" for name in COLUMNS]),
            ("scoring an item, top 10, µs", [f"{said[name]['score_s'] * 1e6:.1f}" for name in COLUMNS]),
            ("scoring / reading its own postings",
             [f"{said[name]['score_s'] / reading[name]:.2f}" for name in COLUMNS])]
    for name, cells in rows:
        lines.say(f"{name:<44}" + "".join(f"{cell:>14}" for cell in cells))
    lines.keep(**said)
    visited, full = (said[name]["postings"] for name in COLUMNS)
    lines.at_most(f"scoring ({visited:,.0f} postings an item) / reading the full index's {full:,.0f}",
                  said["kept"]["score_s"] / reading["full"], MOST_TIME)
    lines.say(f"the plain layout, as in plain_learner.c, {said['plain']['score_s'] * 1e6:.1f} µs, "
              f"in the place of scoring: {said['plain']['score_s'] / reading['full']:.2f}")
