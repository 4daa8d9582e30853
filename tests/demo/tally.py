#!/usr/bin/python3
"""What the demo counts, and what its invented editors say: they know the truth, the daemon does not.

    tally.py member NAME                    prints a member of the JSON object on standard input
    tally.py entry STREAM ID                prints an entry as it stands in the stream
    tally.py forgotten TRUTH ID             prints which tags its keeper forgot
    tally.py lost STREAM COUNT < LIST       prints how many of the first COUNT entries of STREAM
                                            are missing in the answers of item.list
    tally.py proposals STREAM TRUTH ANSWERS compares proposals with what had been forgotten; a line
                                            of ANSWERS is an id, a tab and the answer of item.gaps
    tally.py check STREAM TRUTH < IDS       prints what a checker of each entry says, in the words of
                                            'undertag check' with tabs between them
    tally.py rule TRUTH < WORKLIST          prints what an editor says of the first entry's first two
                                            proposals, in the words of 'undertag rule', one a line
    tally.py promise TRUTH < WORKLIST       compares what a worklist promises with the truth
    tally.py complete STREAM TRUTH CHECKED BEFORE AFTER
                                            compares two answers of desk.completeness with the truth,
                                            before and after the entries of CHECKED were checked
"""
import json
import sys
import textwrap

BANDS = ((0.75, 1.01), (0.5, 0.75), (0.25, 0.5), (0.0, 0.25))


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


def count_tags(lists):
    counts = {}
    for tags in lists:
        for tag in tags:
            counts[tag] = counts.get(tag, 0) + 1
    return counts


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
    given = count_tags(item["tags"] for item in items.values())
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
                "%.2f to %.2f" % (low, min(high, 1.0)), len(band),
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


def check(stream, truth):
    """The vocabulary that a checker goes through holds the tags that were ever given."""
    vocabulary = count_tags(item["tags"] for item in read_lines(stream))
    deserved = {line["id"]: line["true"] for line in read_lines(truth)}
    for name in sys.stdin.read().split("\n")[:-1]:
        words = [name]
        for tag in deserved[name]:
            if tag in vocabulary:
                words += ["--tag", tag]
        print("\t".join(words))


def rule(truth):
    first = json.load(sys.stdin)["items"][0]
    missing = next(line["forgotten"] for line in read_lines(truth) if line["id"] == first["id"])
    print(first["id"])
    for gap in first["gaps"][:2]:
        print("--belongs" if gap["tag"] in missing else "--not")
        print(gap["tag"])


def promise(truth):
    missing = {line["id"]: set(line["forgotten"]) for line in read_lines(truth)}
    items = json.load(sys.stdin)["items"]
    right = sum(gap["tag"] in missing[item["id"]] for item in items for gap in item["gaps"])
    print("Of the first %d it promises %.0f missing tags; %d are really missing." % (
        len(items), items[-1]["running"], right))


def true_share(recorded, deserved, band):
    """Of the true uses of a band's tags, the share on record; tags on no entry count in no band."""
    def holds(count):
        return count > 0 and (band == "all" or (count < 30) == (band == "tail"))
    wanted = [tag for tag, count in recorded.items() if holds(count)]
    return (sum(recorded[tag] for tag in wanted) / sum(deserved[tag] for tag in wanted)
            if wanted else None)


def complete(stream, truth, checked, before, after):
    items, lines = read_lines(stream), read_lines(truth)
    with open(checked, encoding="utf-8") as names:
        looked_at = set(names.read().split("\n"))
    given = count_tags(item["tags"] for item in items)
    deserved = count_tags(line["true"] for line in lines)
    found = count_tags(line["forgotten"] for line in lines if line["id"] in looked_at)
    recorded = {tag: count + found.get(tag, 0) for tag, count in given.items()}
    answers = [read_lines(path)[0] for path in (before, after)]
    print("  %-8s %-22s %8s   %-22s %8s" % ("band", "said before the checks", "true", "said after",
                                            "true"))
    for band in ("all", "torso", "tail"):  # no tag is on 1,000 entries
        columns = []
        for answer, counts in zip(answers, (given, recorded)):
            said = answer["overall"] if band == "all" else answer["bands"][band]
            share = true_share(counts, deserved, band)
            if share is None or said["share"] is None:
                sys.exit("undertag demo: nothing is known of the band '%s'" % band)
            columns += ["%.2f, %.2f to %.2f" % (said["share"], said["low"], said["high"]),
                        "%.2f" % share]
        print("  %-8s %-22s %8s   %-22s %8s" % (band, *columns))


def main():
    commands = {"member": (member, 1), "entry": (entry, 2), "forgotten": (forgotten, 2), "lost": (lost, 2),
                "proposals": (proposals, 3), "check": (check, 2), "rule": (rule, 1),
                "promise": (promise, 1), "complete": (complete, 5)}
    command, count = commands.get(sys.argv[1] if len(sys.argv) > 1 else "", (None, 0))
    if command is None or len(sys.argv) != count + 2:
        sys.exit(__doc__)
    command(*sys.argv[2:])


if __name__ == "__main__":
    main()
