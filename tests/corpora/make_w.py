#!/usr/bin/python3
"""Makes corpus W: the glosses of WordNet with all their hypernyms as tags.

Source: data.noun and data.verb of Debian's package wordnet-base; their form is that of wndb(5).
Every synset that has a hypernym is one item. Title: its words; text: its gloss with the examples. Tags: all
hypernyms up to the root, along `@` (kind of) and `@i` (instance of). The tags are complete by construction.
"""

import argparse
import os
import sys

import corpus

PARTS = {"n": "noun", "v": "verb"}


class Synset:
    """One line of a data file: key, words, gloss, and the keys of its direct hypernyms."""

    def __init__(self, line):
        data, _, gloss = line.partition("|")
        fields = data.split()
        count = int(fields[3], 16)  # wndb(5): the number of words is hexadecimal, that of pointers decimal
        self.key = fields[2] + fields[0]
        self.words = [word.replace("_", " ") for word in fields[4:4 + 2 * count:2]]
        self.gloss = gloss.strip()
        pointers = fields[5 + 2 * count:]
        self.hypernyms = [pointers[i + 2] + pointers[i + 1] for i in range(0, 4 * int(fields[4 + 2 * count]), 4)
                          if pointers[i] in ("@", "@i")]


def read(folder):
    """All synsets of nouns and verbs by key; a line that starts with two spaces belongs to the licence."""
    synsets = {}
    for part in PARTS.values():
        with open(os.path.join(folder, "data." + part), encoding="utf-8") as file:
            for line in file:
                if not line.startswith("  "):
                    synset = Synset(line)
                    synsets[synset.key] = synset
    return synsets


def ancestors(synsets, key):
    """Keys of all hypernyms of a synset, direct and further up."""
    found, open_keys = set(), [key]
    while open_keys:
        for above in synsets[open_keys.pop()].hypernyms:
            if above not in found:
                found.add(above)
                open_keys.append(above)
    return found


def tag_name(synset):
    """Part of speech and offset, which tell a synset from all others, and its first word for the reader."""
    return f"{synset.key} {synset.words[0]}"


def make(folder):
    """All items."""
    synsets = read(folder)
    above = {key: ancestors(synsets, key) for key in synsets}
    return [{"id": key, "title": ", ".join(synsets[key].words), "text": synsets[key].gloss,
             "tags": sorted(tag_name(synsets[tag]) for tag in tags)}
            for key, tags in above.items() if tags]


def main():
    parser = argparse.ArgumentParser(description="Makes corpus W from WordNet.")
    parser.add_argument("output", nargs="?", default="build/corpora/W.jsonl")
    parser.add_argument("--wordnet", metavar="FOLDER", default="/usr/share/wordnet", help="where data.noun is")
    options = parser.parse_args()
    try:
        items = make(options.wordnet)
    except OSError as error:
        corpus.unavailable(f"Corpus W was not made: {error.filename} cannot be read ({error.strerror}); "
                           "install the package wordnet-base.")
    corpus.write("W", items, options.output)


if __name__ == "__main__":
    sys.exit(main())
