"""How soon a daemon with many weights answers again: stopped, started, asked for the gaps of one filed item.

The weights are made in little time: items of 200 words that few others have, and no rule of specificity. What the
daemon reads is still in the system's cache, as after an update of the program.
"""

import time

import house

NEEDS = ()
LONG = True
WORDS, TAGS = 1_000_000, 500_000
WEIGHTS, QUICK_WEIGHTS = 30_000_000, 3_000_000
BLOCK, CAP_S = 4000, 900
SETTINGS = ("specificity=0",)
MOST_S = 1.0


def fill(bench, connection, wanted):
    """Files until there are so many weights, or the time is over; the daemon's state."""
    first, end = 0, time.monotonic() + CAP_S
    while True:
        said = bench.program("synthetic_bench", connection.socket.getpeername(), first, first + BLOCK, WORDS, TAGS,
                             "fill")
        if said["state"]["weights"] >= wanted or time.monotonic() > end:
            return said["state"]
        first += BLOCK


def run(bench, lines):
    """Two daemons in one home, one after the other."""
    folder, wanted = bench.folder_new(), QUICK_WEIGHTS if bench.quick else WEIGHTS
    begun = time.monotonic()
    with bench.daemon_in(folder, SETTINGS) as connection:
        before = fill(bench, connection, wanted)
        memory, disk, filled = house.anonymous_bytes(connection), house.disk_bytes(connection), time.monotonic()
    stopped = time.monotonic()
    with bench.daemon_in(folder, SETTINGS) as connection:
        connection.call("item.gaps", {"id": "s1"})
        took = time.monotonic() - stopped
        memory_after, state = house.anonymous_bytes(connection), connection.call("daemon.state")
    if before["weights"] < wanted:
        lines.say(f"{wanted:,} weights were wanted; after {CAP_S} s there were fewer")
    lines.say(f"made in {filled - begun:,.0f} s: {before['items']:,} items, {before['tags']:,} tags, "
              f"{before['words']:,} words, {before['weights']:,} weights, disk {disk / 1e6:,.0f} MB")
    lines.say(f"RssAnon {memory / 1e6:,.0f} MB before, {memory_after / 1e6:,.1f} MB right after; stopping took "
              f"{stopped - filled:.2f} s; {state['seq'] - state['learned']:,} changes to be learned again")
    lines.keep(before=before, after=state, memory=(memory, memory_after), stopping_s=stopped - filled)
    lines.at_most(f"seconds until the first item.gaps with {state['weights']:,} weights", took, MOST_S)
