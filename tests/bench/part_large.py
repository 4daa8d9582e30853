"""A large vocabulary through the daemon: 500,000 tags, 1,000,000 words, 300,000 invented items (synthetic.h).

Every setting is left at its default. The rate counts until all that was filed is learned.
"""

import house

NEEDS = ()
LONG = True
WORDS, TAGS, ITEMS, QUICK_ITEMS, BLOCK = 1_000_000, 500_000, 300_000, 120_000, 30_000
LEAST_RATIO = 0.5


def run(bench, lines):
    """Block after block into one daemon."""
    rates = []
    lines.say(f"{'items':>10}{'items/s':>10}{'tags':>10}{'words':>12}{'weights':>14}{'first gap right':>18}")
    with bench.daemon() as connection:
        path = connection.socket.getpeername()
        for first in range(0, QUICK_ITEMS if bench.quick else ITEMS, BLOCK):
            said = bench.program("synthetic_bench", path, first, first + BLOCK, WORDS, TAGS, "walk")
            state = said["state"]
            rates.append(BLOCK / said["learned_s"])
            lines.say(f"{state['items']:>10,}{rates[-1]:>10,.0f}{state['tags']:>10,}{state['words']:>12,}"
                      f"{state['weights']:>14,}{said['first_right']:>18.3f}")
        house.wait_flushed(connection)
        memory, disk = house.anonymous_bytes(connection), house.disk_bytes(connection)
    lines.say(f"memory of its own {memory / 1e6:,.0f} MB (RssAnon), disk {disk / 1e6:,.0f} MB")
    lines.keep(rates=rates, memory_bytes=memory, disk_bytes=disk)
    lines.at_least(f"rate of the last {BLOCK:,} items / rate of the {BLOCK:,} after the first {BLOCK:,}",
                   rates[-1] / rates[1], LEAST_RATIO)
