"""A snapshot of a large model while questions go on: how long it takes, what memory, and what the questions notice.

The model is made as for the part restart. Questions are item.gaps of filed items, one after the other, over a second
connection; the same ones before the snapshot and while it is written.
"""

import threading
import time

import house
import part_restart
import wire

NEEDS = ()
LONG = True
ASKED, IDLE_S = 500, 10.0  # different items; how long they are asked about idle
MOST_SLOWER, MOST_MEMORY = 2.0, 1.2
RATE = 1 << 30  # bytes a second: the disk's own is the limit


def p99(seconds):
    """The 99th percentile."""
    return sorted(seconds)[len(seconds) * 99 // 100]


def ask(path, goes_on):
    """Seconds of each question, while goes_on() says so."""
    took = []
    with wire.Wire(path) as connection:
        while goes_on():
            begun = time.monotonic()
            connection.call("item.gaps", {"id": f"s{1 + len(took) % ASKED}"})
            took.append(time.monotonic() - begun)
    return took


class Snapshot(threading.Thread):
    """Writes one, and watches what memory the daemon takes meanwhile."""

    def __init__(self, path):
        super().__init__()
        self.path, self.result, self.memory = path, None, 0

    def run(self):
        with wire.Wire(self.path) as connection:
            self.result = connection.call("snapshot.write", {"rate": RATE})


def run(bench, lines):
    """One daemon."""
    wanted = part_restart.QUICK_WEIGHTS if bench.quick else part_restart.WEIGHTS
    with bench.daemon(part_restart.SETTINGS) as connection:
        state = part_restart.fill(bench, connection, wanted)
        house.wait_flushed(connection)
        path = connection.socket.getpeername()
        budget, before = state["memory"]["budget"], house.anonymous_bytes(connection)
        end = time.monotonic() + IDLE_S
        ask(path, lambda: time.monotonic() < end)  # what is asked about is in memory from here on
        end = time.monotonic() + IDLE_S
        idle = ask(path, lambda: time.monotonic() < end)
        snapshot = Snapshot(path)
        snapshot.start()
        most = before

        def goes_on():
            nonlocal most
            most = max(most, house.anonymous_bytes(connection))
            return snapshot.is_alive()

        meanwhile = ask(path, goes_on)
        snapshot.join()
    if snapshot.result is None:
        raise ValueError("the snapshot was not written")
    lines.say(f"{state['weights']:,} weights, {state['tags']:,} tags, {state['words']:,} words: "
              f"{snapshot.result['bytes'] / 1e6:,.0f} MB in {snapshot.result['seconds']:.1f} s")
    lines.say(f"RssAnon {before / 1e6:,.0f} MB before, {most / 1e6:,.0f} MB at most; budget {budget / 1e6:,.0f} MB")
    lines.say(f"item.gaps: p99 {p99(idle) * 1e3:.2f} ms idle ({len(idle):,}), {p99(meanwhile) * 1e3:.2f} ms meanwhile "
              f"({len(meanwhile):,})")
    lines.keep(state=state, result=snapshot.result, memory=(before, most), p99=(p99(idle), p99(meanwhile)))
    lines.at_most("the most RssAnon / memory_budget", most / budget, MOST_MEMORY)
    lines.at_most("p99 of item.gaps meanwhile / idle", p99(meanwhile) / p99(idle), MOST_SLOWER)
