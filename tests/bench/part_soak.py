"""A daemon with little memory under constant use: does its memory stay where it was told to?

One client files invented items as fast as they are taken, until all of 500,000 tags are in use and beyond; one asks
for gaps of filed items and of drafts; one rules, files anew and withdraws a few times a second (soak_bench). Beside
them hundreds of peers are a nuisance, and an operator has snapshots and backups written and models learned anew
(soak_others). Memory and descriptors are read from /proc meanwhile. `--minutes` says how long, `--budget` how much
memory: the least there may be where it is not said.
"""

import json
import os
import subprocess

import house
import soak_others

NEEDS = ()
LONG = True
WORDS, TAGS = 1_000_000, 500_000
WIRE_MIB, MOST_OVER = 16, 1.2
SETTINGS = ("rehearsal_share=0.25", f"wire_limit={WIRE_MIB}MiB", "stalled_ms=10000",
            "snapshot_keep=2")
LOOK_EVERY_S = 2
DONE = {"filed": "items filed", "asked": "item.gaps", "changed": "rulings, revisions, withdrawals"}


def look(connection):
    """What there is to see now; RssAnon is the system's own figure, `memory` what the daemon says."""
    return {"anonymous": house.anonymous_bytes(connection), "descriptors": house.descriptors(connection),
            "memory": connection.call("daemon.state")["memory"]}


def looks(connection, process):
    """A look every few seconds until the clients have ended."""
    seen = []
    while True:
        seen.append(look(connection))
        try:
            process.wait(LOOK_EVERY_S)
            return seen
        except subprocess.TimeoutExpired:
            pass


def use(bench, connection):
    """What the clients did, and what was seen of the daemon meanwhile."""
    command = [os.path.join(bench.build, "bench/soak_bench"), connection.socket.getpeername(),
               str(bench.minutes * 60), str(WORDS), str(TAGS)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
        try:
            with soak_others.at_work(connection.socket.getpeername()) as others:
                seen = looks(connection, process)
                said = process.stdout.read()
        finally:
            process.kill()
    if process.returncode != 0:
        raise subprocess.CalledProcessError(process.returncode, command[0])
    if others[1].failure:
        raise ValueError(others[1].failure)
    return json.loads(said), seen, others


def show_rates(lines, said):
    """How fast it went, in the first and in the last tenth of the time."""
    lines.say(f"{'a second':<36}{'first tenth':>14}{'last tenth':>14}{'in all':>14}")
    for key, name in DONE.items():
        first, last = (said[key][part] / said["part_s"] for part in (0, -1))
        lines.say(f"{name:<36}{first:>14,.1f}{last:>14,.1f}{sum(said[key]):>14,}")
    waits = said["asked_waits"]
    lines.say(f"item.gaps waited p50 {waits['p50_s'] * 1e3:,.1f} ms, p99 {waits['p99_s'] * 1e3:,.1f} ms, at most "
              f"{waits['most_s'] * 1e3:,.1f} ms")


def show_memory(lines, seen, last):
    """RssAnon as time went by, and what the daemon says of memory, at the largest and in the end."""
    tenths = [seen[len(seen) * i // 10:max(len(seen) * (i + 1) // 10, len(seen) * i // 10 + 1)] for i in range(10)]
    lines.say("largest RssAnon by tenths, MB: "
              + " ".join(f"{max(one['anonymous'] for one in tenth) / 1e6:.1f}" for tenth in tenths))
    largest = max(seen, key=lambda one: one["anonymous"])
    for name, memory in (("then", largest["memory"]), ("in the end", last)):
        lines.say(f"daemon.state {name}, MB: " + ", ".join(f"{part} {size / 1e6:.1f}" for part, size in memory.items()))


def show_state(lines, connection, state):
    """How large the daemon is in the end."""
    lines.say(f"{state['items']:,} items, {state['tags']:,} tags, {state['words']:,} words, {state['weights']:,} "
              f"weights, backlog {state['backlog']:,}, disk {house.disk_bytes(connection) / 1e6:,.0f} MB")
    if state["faults"]:
        lines.say(f"faults: {' '.join(state['faults'])}")


def show_others(lines, others):
    """What went on beside the feed."""
    nuisances, operator = others
    lines.say(f"nuisances: {nuisances.opened:,} opened, {nuisances.closed:,} closed by the daemon; operator: "
              + ", ".join(f"{count} {method}" for method, count in sorted(operator.done.items()))
              + f", {operator.refused} refused while another was under way")


def show_seen(lines, connection, seen):
    """Descriptors and readers."""
    counts = [one["descriptors"] for one in seen]
    lines.say(f"descriptors: {counts[0]} at first, {max(counts)} at most, {house.descriptors(connection)} in the end")
    stale = house.stale_readers(connection)
    lines.say("stale readers: " + ("not looked for (there is no mdb_stat)" if stale is None else
                                   ", ".join(f"{count} in {name}" for name, count in stale.items())))


def run(bench, lines):
    """One daemon, for so many minutes."""
    with bench.daemon((f"memory_budget={bench.budget}MiB", *SETTINGS)) as connection:
        said, seen, others = use(bench, connection)
        state = connection.call("daemon.state")
        show_rates(lines, said)
        show_state(lines, connection, state)
        show_memory(lines, seen, state["memory"])
        show_seen(lines, connection, seen)
        show_others(lines, others)
    lines.keep(said=said, seen=seen, state=state)
    lines.at_most(f"largest RssAnon in {bench.minutes:g} minutes / budget of {bench.budget} MiB and wire_limit of "
                  f"{WIRE_MIB} MiB",
                  max(one["anonymous"] for one in seen) / ((bench.budget + WIRE_MIB) << 20), MOST_OVER)
