#!/usr/bin/python3
"""What the demo counts: members of answers, acknowledged entries, and proposals that were right.

    tally.py member NAME                    prints a member of the JSON object on standard input
    tally.py entry STREAM ID                prints an entry as it stands in the stream
    tally.py forgotten TRUTH ID             prints which tags its keeper forgot
    tally.py lost STREAM COUNT < LIST       prints how many of the first COUNT entries of STREAM
                                            are missing in the answers of item.list
    tally.py proposals STREAM TRUTH ANSWERS compares proposals with what had been forgotten; a line
                                            of ANSWERS is an id, a tab and the answer of item.gaps
"""
import json
import sys
import textwrap

BANDS = ((0.8, 1.01), (0.6, 0.8), (0.4, 0.6), (0.2, 0.4), (0.0, 0.2))


def read_lines(path):
    with open(path, encoding="utf-8") as lines:
        return [json.loads(line) for line in lines]


def member(name):
    print(json.load(sys.stdin)[name])


def wrap(text, indent="  "):
    print(textwrap.fill(text, 76, initial_indent=indent, subsequent_indent=indent))


def entry(stream, wanted):
    found = next(item for item in read_lines(stream) if item["id"] == wanted)
    print(found["title"])
    wrap(found["text"])
    wrap("given: " + (", ".join(found["tags"]) or "no tag at all"))


def forgotten(truth, wanted):
    found = next(line for line in read_lines(truth) if line["id"] == wanted)
    wrap("What its keeper had forgotten, as the daemon cannot know: "
         + (", ".join(found["forgotten"]) or "nothing") + ".", indent="")


def lost(stream, count):
    held = set()
    for line in sys.stdin:
        held.update(item["id"] for item in json.loads(line)["items"] if not item["withdrawn"])
    print(sum(item["id"] not in held for item in read_lines(stream)[:int(count)]))


def commonest(given, items):
    """For each item the tag that is given most often of those that it lacks: reading nothing."""
    order = sorted(given, key=lambda tag: (-given[tag], tag))
    return [next(tag for tag in order if tag not in item["tags"]) for item in items]


def proposals(stream, truth, answers):
    items = {item["id"]: item for item in read_lines(stream)}
    missing = {line["id"]: set(line["forgotten"]) for line in read_lines(truth)}
    given = {}
    for item in items.values():
        for tag in item["tags"]:
            given[tag] = given.get(tag, 0) + 1
    asked, shown, first = [], [], []
    with open(answers, encoding="utf-8") as lines:
        for line in lines:
            name, _, answer = line.partition("\t")
            asked.append(items[name])
            gaps = [(gap["chance"], gap["tag"] in missing[name])
                    for gap in json.loads(answer)["gaps"]]
            shown += gaps
            first += gaps[:1]
    if not shown:
        sys.exit("undertag demo: not one proposal came back")

    print("  %-16s %12s %16s %18s" % ("chance shown", "proposals", "chances add to",
                                      "really forgotten"))
    for low, high in BANDS:
        band = [gap for gap in shown if low <= gap[0] < high]
        if band:
            print("  %-16s %12d %16.1f %18d" % (
                "%.1f to %.1f" % (low, min(high, 1.0)), len(band),
                sum(chance for chance, _ in band), sum(right for _, right in band)))
    print("  %-16s %12d %16.1f %18d" % ("all", len(shown), sum(chance for chance, _ in shown),
                                        sum(right for _, right in shown)))
    print()
    right = sum(right for _, right in first)
    guessed = sum(tag in missing[item["id"]]
                  for item, tag in zip(asked, commonest(given, asked)))
    print("  Of the first proposals alone %d of %d were right (%.0f %%)." % (
        right, len(first), 100 * right / len(first)))
    print("  Naming the commonest tag that an entry lacks, unread: %d of %d (%.0f %%)." % (
        guessed, len(asked), 100 * guessed / len(asked)))


def main():
    commands = {"member": (member, 1), "entry": (entry, 2), "forgotten": (forgotten, 2), "lost": (lost, 2),
                "proposals": (proposals, 3)}
    command, count = commands.get(sys.argv[1] if len(sys.argv) > 1 else "", (None, 0))
    if command is None or len(sys.argv) != count + 2:
        sys.exit(__doc__)
    command(*sys.argv[2:])


if __name__ == "__main__":
    main()
