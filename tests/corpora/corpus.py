"""What both corpora share: the fixed order, the file, and the line about it.

A corpus is a file of JSON Lines. Each line holds the params of one
`item.file`: id, title, text and tags.
"""

import collections
import hashlib
import json
import os
import sys
import unicodedata

EX_UNAVAILABLE = 69  # sysexits.h: what is needed is not there
SEED = "1"


def unavailable(sentence):
    """Ends the program with `sentence`; the caller says that it skipped the corpus."""
    print(sentence, file=sys.stderr)
    sys.exit(EX_UNAVAILABLE)


def shuffled(items):
    """The items in a random but fixed order: by the SHA-256 of seed and id.

    No random generator takes part, so every version of Python gives the same order.
    """
    def place(item):
        return hashlib.sha256(f"{SEED}{item['id']}".encode()).digest()
    return sorted(items, key=place)


def check(items):
    """Refuses what the wire would refuse: ids twice, tags too long, not NFC or with control characters."""
    ids = {item["id"] for item in items}
    if len(ids) != len(items):
        raise ValueError("an id stands twice")
    for value in ids.union(tag for item in items for tag in item["tags"]):
        if not 1 <= len(value.encode()) <= 255:
            raise ValueError(f"not 1 to 255 bytes: {value!r}")
        if unicodedata.normalize("NFC", value) != value:
            raise ValueError(f"not NFC: {value!r}")
        if any(unicodedata.category(char) == "Cc" for char in value):
            raise ValueError(f"a control character: {value!r}")


def write(name, items, path):
    """Writes the items, shuffled, to `path` and prints one line: counts and SHA-256 of the file."""
    check(items)
    lines = [json.dumps(item, ensure_ascii=False, separators=(",", ":")) + "\n" for item in shuffled(items)]
    data = "".join(lines).encode()
    os.makedirs(os.path.dirname(path) or ".", exist_ok=True)
    partial = path + ".partial"
    with open(partial, "wb") as file:
        file.write(data)
    os.replace(partial, path)
    counts = collections.Counter(tag for item in items for tag in item["tags"])
    rare = sum(count < 10 for count in counts.values())
    print(f"{name}: {len(items):,} items, {len(counts):,} tags, {sum(counts.values()) / len(items):.3f} tags an item, "
          f"{rare / len(counts):.0%} of the tags on fewer than 10 items, "
          f"sha256 {hashlib.sha256(data).hexdigest()} {path}")
