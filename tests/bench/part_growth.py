"""How memory, disk and time grow with the items, from 10,000 to 1,000,000 invented ones (synthetic.h), in one daemon.

A quantity that goes like items^e grows less than in proportion where e is below 1; e is fitted by least squares to
the logarithms. Time is that of an item of the step that led there, until it is learned.
"""

import numpy as np

import growth_plot
import house

NEEDS = ()
LONG = True
WORDS, TAGS = 1_000_000, 500_000
STEPS, QUICK_TOP = (10_000, 20_000, 50_000, 100_000, 200_000, 500_000, 1_000_000), 100_000
MOST_EXPONENT = 1.0
COLUMNS = {"items": "{:,.0f}", "tags": "{:,.0f}", "weights": "{:,.0f}", "RssAnon, MB": "{:,.0f}",
           "by state, MB": "{:,.0f}", "disk, MB": "{:,.0f}", "µs an item": "{:,.0f}"}
JUDGED = {"RssAnon, MB": "memory (RssAnon)", "by state, MB": "memory by daemon.state", "disk, MB": "disk",
          "µs an item": "time an item"}


def exponent(items, values):
    """e of values ~ items^e."""
    return np.polyfit(np.log(items), np.log(values), 1)[0]


def step(bench, connection, first, end):
    """The row of one more step."""
    said = bench.program("synthetic_bench", connection.socket.getpeername(), first, end, WORDS, TAGS, "grow")
    state = said["state"]
    house.wait_flushed(connection)
    values = (end, state["tags"], state["weights"], house.anonymous_bytes(connection) / 1e6,
              house.stated_bytes(state) / 1e6, house.disk_bytes(connection) / 1e6,
              said["learned_s"] / (end - first) * 1e6)
    return dict(zip(COLUMNS, values))


def run(bench, lines):
    """The table, the picture, the exponents."""
    rows = []
    lines.say("".join(f"{name:>14}" for name in COLUMNS))
    with bench.daemon() as connection:
        for first, end in zip((0, *STEPS), STEPS):
            if bench.quick and end > QUICK_TOP:
                break
            rows.append(step(bench, connection, first, end))
            lines.say("".join(f"{form.format(rows[-1][name]):>14}" for name, form in COLUMNS.items()))
    path = bench.kept_path("growth.png")
    lines.keep(rows=rows)
    if growth_plot.draw(path, rows):
        lines.say(f"drawn in {path}")
    items = [row["items"] for row in rows]
    for column, name in JUDGED.items():
        lines.at_most(f"{name} goes like items^e: e", exponent(items, [row[column] for row in rows]), MOST_EXPONENT)
