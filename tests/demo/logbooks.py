#!/usr/bin/python3
"""The demo's stream: logbooks of a trust of lighthouses and harbours that never was.

Writes one entry a line, as the params of item.file. What an entry says comes from phrases.txt, and
so do the tags that it deserves. The keepers who tagged the entries forgot many of them, rare ones
more often than common ones; what they gave is in the stream, and what the entries deserve goes into
a file of its own (--truth), which only the demo reads afterwards.

The same seed gives the same bytes on every version of Python: of its random generator only
Random(seed).random() is used, whose sequence is promised to stay.
"""
import argparse
import calendar
import datetime
import json
import math
import os
import random
import re
import sys

PHRASES = os.path.join(os.path.dirname(os.path.abspath(__file__)), "phrases.txt")

FIRST_YEAR, LAST_YEAR = 1868, 1952
WAR_YEARS = frozenset(list(range(1914, 1919)) + list(range(1939, 1946)))
FILING_STARTS = datetime.datetime(2021, 3, 1, 8, 0, 0)
DESKS = ("D.", "K.", "M.", "R.", "W.")

STATIONS = (
    ("Skerrow Point", "head"), ("Hallan Rock", "rock"), ("Cray Ness", "head"),
    ("Old Quern", "rock"), ("Orrist Haven", "harbour"), ("Thrawn Stack", "rock"),
    ("Dunmarra Head", "head"), ("Wenlow Bar", "harbour"), ("Brannoch Light", "head"),
    ("Lissay Island", "rock"), ("Veyre Harbour", "harbour"), ("Port Ansel", "harbour"),
)

# How much more or less often a kind of station writes about something than the average one.
LEANINGS = {
    "rock": {"lamp": 1.4, "supplies": 1.6, "birds": 1.6, "fog signals": 1.3, "station life": 1.2,
             "harbour": 0.1, "fishing": 0.4, "accounts": 0.6, "visitors": 0.5},
    "head": {"harbour": 0.3, "fishing": 0.7, "passing ships": 1.4, "smuggling watch": 1.3},
    "harbour": {"lamp": 0.35, "birds": 0.3, "supplies": 0.4, "fog signals": 0.5, "harbour": 3.0,
                "fishing": 2.4, "accounts": 1.9, "station life": 0.5},
}

# What a day of one kind tends to bring as well.
KIN = {
    "weather": ("wrecks", "rescue", "supplies", "buildings", "harbour", "instruments", "fishing"),
    "wrecks": ("rescue", "weather", "accounts"),
    "rescue": ("wrecks", "weather", "health"),
    "lamp": ("birds", "supplies", "station life"),
    "fog signals": ("weather", "passing ships", "wrecks"),
    "supplies": ("weather", "accounts", "station life"),
    "birds": ("lamp", "wildlife", "weather"),
    "harbour": ("fishing", "accounts", "passing ships"),
    "fishing": ("harbour", "weather", "wildlife"),
    "visitors": ("accounts", "buildings", "birds"),
    "health": ("station life", "visitors"),
    "instruments": ("weather", "sky"),
    "wartime": ("passing ships", "rescue", "lamp"),
    "smuggling watch": ("passing ships", "harbour"),
}

BOOKS = {
    "lamp": "light journal", "fog signals": "light journal", "birds": "light journal",
    "weather": "weather book", "instruments": "weather book", "sky": "weather book",
    "supplies": "stores book", "accounts": "stores book", "buildings": "stores book",
    "passing ships": "signal book", "wrecks": "signal book", "rescue": "signal book",
    "smuggling watch": "signal book", "wartime": "signal book",
}

# Propensity by the count N of a tag: 1 / (1 + C (N + B)^-A), C = (ln entries - 1)(B + 1)^A.
# Source: Jain, Prabhu, Varma, KDD 2016; A and B are its defaults.
CURVE_A, CURVE_B = 0.55, 1.5
OWN_WAYS = 0.3  # how far a tag strays from the curve: standard deviation of its log odds


def total(numbers):
    """Plain addition: since Python 3.12 sum() rounds floating-point numbers in another way."""
    result = 0.0
    for number in numbers:
        result += number
    return result


class Draw:
    """Choices from one seed."""

    def __init__(self, seed):
        self.unit = random.Random(seed).random

    def below(self, count):
        return int(self.unit() * count)

    def pick(self, choices):
        return choices[self.below(len(choices))]

    def weighted(self, choices, weights):
        left = self.unit() * total(weights)
        for choice, weight in zip(choices, weights):
            left -= weight
            if left < 0:
                return choice
        return choices[-1]

    def bell(self):
        """About normal, mean 0 and standard deviation 1; no function that differs by machine."""
        return total([self.unit() for _ in range(12)]) - 6

    def shuffle(self, things):
        for last in range(len(things) - 1, 0, -1):
            other = self.below(last + 1)
            things[last], things[other] = things[other], things[last]


class Event:
    """Something that is written down, the tags that it deserves and when it may happen."""

    def __init__(self, broad, tags, lists, weight, conditions):
        self.broad = broad
        self.tags = tags
        self.lists = lists
        self.phrasings = []
        words = conditions.split()
        all_years = range(FIRST_YEAR, LAST_YEAR + 1)
        self.years = frozenset(WAR_YEARS if broad == "wartime" else all_years)
        self.months = frozenset(range(1, 13))
        self.sundays = words[-2:] == ["on", "Sunday"]
        for word, value in zip(words, words[1:]):
            if word == "from":
                self.years = frozenset(year for year in self.years if year >= int(value))
            elif word == "until":
                self.years = frozenset(year for year in self.years if year <= int(value))
        if "in" in words:
            after = words[words.index("in") + 1:]
            self.months = frozenset(int(word) for word in after if word.isdigit())
        # What happens only at times happens more often then, so that `weight` stays its total.
        self.weight = weight * len(all_years) / len(self.years) * 12 / len(self.months)
        self.weight *= 7 if self.sundays else 1

    def chance_on(self, date, leaning):
        fits = date.year in self.years and date.month in self.months
        if not fits or (self.sundays and date.weekday() != 6):
            return 0.0
        return self.weight * leaning.get(self.broad, 1.0)


class Phrases:
    """phrases.txt: lists of words, events, noise and asides."""

    def __init__(self, path):
        self.lists, self.events, self.noise, self.asides = {}, [], [], []
        groups = []
        into = None
        with open(path, encoding="utf-8") as lines:
            for line in lines:
                line = line.strip()
                if not line or line.startswith("#"):
                    continue
                if line.startswith("[") or re.fullmatch(r"\{\w+\}", line):
                    into = groups if line == "[groups]" else self._begin(line)
                elif isinstance(into, dict):
                    self._add_word(into, line)
                else:
                    into.append(line)
        for group, broad in (line.split(" = ") for line in groups):
            for event in self.events:
                if event.broad in broad.split(" | "):
                    event.tags.append(group)

    def _begin(self, line):
        if line.startswith("{"):
            return self.lists.setdefault(line[1:-1], {"choices": [], "weights": []})
        if line == "[noise]":
            return self.noise
        if line == "[aside]":
            return self.asides
        broad, tags, weight, conditions = re.fullmatch(
            r"\[([^:]+): ([^\]]+)\] (\d+) ?(.*)", line).groups()
        tags = tags.split(", ")
        lists = frozenset(tag[1:-1] for tag in tags if tag.startswith("{"))
        tags = [tag for tag in tags if not tag.startswith("{")]
        self.events.append(Event(broad, tags, lists, int(weight), conditions))
        return self.events[-1].phrasings

    @staticmethod
    def _add_word(words, line):
        tagged = re.fullmatch(r"([^=]+) (\d+) = (.+)", line)
        if tagged:
            words["choices"].append((tagged.group(1), tagged.group(3).split(" | ")))
            words["weights"].append(int(tagged.group(2)))
        else:
            words["choices"].append((None, [line]))
            words["weights"].append(1)

    def write(self, draw, phrasing, lists=frozenset()):
        """One sentence, and the tags that its words carry by `lists` or by the phrasing itself."""
        phrasing, _, more = phrasing.partition(" => ")
        tags = set(more.split(", ")) if more else set()
        said = set()
        while True:
            found = re.search(r"\(([^()]*\|[^()]*)\)|\{(\w+)\}", phrasing)
            if not found:
                break
            if found.group(1) is not None:
                word = draw.pick(found.group(1).split("|"))
            else:
                word, tag = self._word(draw, found.group(2), said)
                if tag and found.group(2) in lists:
                    tags.add(tag)
            phrasing = phrasing[:found.start()] + word + phrasing[found.end():]
        return phrasing[0].upper() + phrasing[1:], tags

    def _word(self, draw, name, said):
        words = self.lists[name]
        for _ in range(5):  # two ships in one sentence are two different ones, mostly
            tag, choices = draw.weighted(words["choices"], words["weights"])
            word = draw.pick(choices)
            if word not in said:
                break
        said.add(word)
        return word, tag


def happenings(draw, phrases, date, kind):
    """The one to four events of a day; the first gives the day its colour."""
    weights = [event.chance_on(date, LEANINGS[kind]) for event in phrases.events]
    chosen = []
    for _ in range(draw.weighted((1, 2, 3, 4), (20, 35, 30, 15))):
        now = list(weights)
        if chosen and draw.unit() < 0.4:
            kin = KIN.get(chosen[0].broad, ())
            now = [weight if event.broad in kin else 0.0
                   for event, weight in zip(phrases.events, weights)]
        if total(now) <= 0:
            now = list(weights)
        event = draw.weighted(phrases.events, now)
        if event not in chosen:
            chosen.append(event)
    return chosen


def tell(draw, phrases, events):
    """Two to six sentences and the tags that they deserve."""
    sentences, tags = [], set()
    for event in events:
        sentence, more = phrases.write(draw, draw.pick(event.phrasings), event.lists)
        sentences.append(sentence)
        tags |= more | set(event.tags) | {event.broad}
    if draw.unit() < 0.4:
        sentences.append(phrases.write(draw, draw.pick(phrases.asides))[0])
    quiet = list(phrases.noise)
    for _ in range(max(2 - len(sentences), draw.weighted((0, 1, 2), (35, 45, 20)))):
        if len(sentences) < 6:
            phrasing = quiet.pop(draw.below(len(quiet)))
            sentences.append(phrases.write(draw, phrasing)[0])
    draw.shuffle(sentences)
    return " ".join(sentences), tags


def entries(draw, phrases, count):
    """`count` entries with all the tags that they deserve."""
    written, ids = [], set()
    filed_at = FILING_STARTS
    while len(written) < count:
        station, kind = draw.pick(STATIONS)
        year = FIRST_YEAR + draw.below(LAST_YEAR - FIRST_YEAR + 1)
        month = 1 + draw.below(12)
        date = datetime.date(year, month, 1 + draw.below(calendar.monthrange(year, month)[1]))
        events = happenings(draw, phrases, date, kind)
        text, tags = tell(draw, phrases, events)
        usual = BOOKS.get(events[0].broad, "day book")
        book = usual if draw.unit() < 0.8 else "day book"
        filed_at += datetime.timedelta(seconds=20 + draw.below(200))
        desk = draw.pick(DESKS)
        name = "%s-%s" % (station.lower().replace(" ", "-"), date.isoformat())
        number = 1
        while (name if number == 1 else "%s-%d" % (name, number)) in ids:
            number += 1
        name = name if number == 1 else "%s-%d" % (name, number)
        ids.add(name)
        written.append({
            "id": name,
            "title": "%s, %d %s %d" % (station, date.day, calendar.month_name[month], year),
            "text": text,
            "fields": {"station": station, "year": year, "book": book},
            "tags": sorted(tags),
            "tagger": desk,
            "filed_at": filed_at.isoformat() + "Z",
        })
    return written


def propensity(given, count):
    """The chance that a keeper gives a tag that was given `given` times in `count` entries."""
    c = max(1.0, math.log(count) - 1) * (CURVE_B + 1) ** CURVE_A
    return min(1.0, max(0.01, 1 / (1 + c * (given + CURVE_B) ** -CURVE_A)))


def memories(draw, written):
    """For each tag the chance that it is not forgotten."""
    deserved = {}
    for entry in written:
        for tag in entry["tags"]:
            deserved[tag] = deserved.get(tag, 0) + 1
    chances = {}
    for tag in sorted(deserved):
        given = deserved[tag]
        for _ in range(100):  # the curve is by the given count, which is what we look for
            given = deserved[tag] * propensity(given, len(written))
        chance = propensity(given, len(written))
        if chance < 1:
            odds = chance / (1 - chance) * math.exp(OWN_WAYS * draw.bell())
            chance = odds / (1 + odds)
        chances[tag] = chance
    return chances


def forget(draw, written):
    """Takes from each entry what its keeper forgot; gives the truth of each entry."""
    chances = memories(draw, written)
    truth = []
    for entry in written:
        deserved = entry["tags"]
        entry["tags"] = [tag for tag in deserved if draw.unit() < chances[tag]]
        truth.append({"id": entry["id"], "true": deserved,
                      "forgotten": [tag for tag in deserved if tag not in entry["tags"]]})
    return truth


def make(seed, count):
    """The stream and its truth: two lists of objects, in the same order."""
    draw = Draw(seed)
    written = entries(draw, Phrases(PHRASES), count)
    return written, forget(draw, written)


def write_lines(path, objects):
    text = "".join(json.dumps(thing, ensure_ascii=False) + "\n" for thing in objects)
    if path == "-":
        sys.stdout.buffer.write(text.encode("utf-8"))
    else:
        with open(path, "wb") as out:
            out.write(text.encode("utf-8"))


def main():
    options = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    options.add_argument("--seed", type=int, default=1868, help="default 1868")
    options.add_argument("--entries", type=int, default=3000, help="default 3000")
    options.add_argument("--out", default="-", metavar="FILE", help="the stream; default: stdout")
    options.add_argument("--truth", metavar="FILE", help="which tags each entry deserves")
    given = options.parse_args()
    if given.entries < 1:
        options.error("--entries must be at least 1")
    written, truth = make(given.seed, given.entries)
    write_lines(given.out, written)
    if given.truth:
        write_lines(given.truth, truth)


if __name__ == "__main__":
    main()
