"""What a snapshot's files say against what the daemon says that has written it: scores and chances, draft by draft.

The daemon's answers are asked for without a floor; the snapshot is read by the worked example in tests/reference.
"""

import json
import math
import os
import subprocess
import sys

sys.path.insert(0, os.path.join(os.path.dirname(os.path.dirname(os.path.abspath(__file__))), "reference"))

import snapshot_reader  # noqa: E402  the folder above is not there before

MOST = 50  # gaps of a draft that are compared
SCORES, CHANCES = 1e-4, 1e-3  # how far they may be apart
DRAFT = ("title", "text", "language", "fields")


def draft_of(item, tags=()):
    """An item as a draft with these of its tags."""
    draft = {name: item[name] for name in DRAFT if name in item}
    return {**draft, "tags": list(tags)} if tags else draft


def with_a_tag(item):
    """An item as a draft with every other of its tags, the first one included."""
    return draft_of(item, item["tags"][::2])


def write_snapshot(connection, name, **members):
    """The snapshot's folder, and its reader; nothing is learned meanwhile."""
    written = connection.call("snapshot.write", {"name": name, **members})
    state = connection.call("daemon.state")
    if not written["seq"] == state["seq"] == state["learned"]:
        raise ValueError(f"the snapshot is of change {written['seq']}, the daemon at {state['seq']}")
    return written["path"], snapshot_reader.Snapshot(written["path"])


def asked(connection, many):
    """The daemon's answer to each of the questions."""
    return list(connection.pipelined("item.gaps", ({**one, "most": MOST, "floor": 0} for one in many)))


class Apart:
    """The largest differences so far, and how much was compared."""

    def __init__(self):
        self.drafts, self.gaps, self.score, self.chance, self.unlisted, self.worst = 0, 0, 0.0, 0.0, 0.0, None

    def add(self, snapshot, draft, answer):
        """A draft: what the files say of each gap of the daemon's answer, and of the tags that are not among them."""
        tags = draft.get("tags", [])
        scores, chances = snapshot.scores(draft), snapshot.chances(draft, tags)
        rows = [snapshot.rows[gap["tag"]] for gap in answer["gaps"]]
        for row, gap in zip(rows, answer["gaps"]):
            self.note(abs(scores[row] - gap["score"]), abs(chances[row] - gap["chance"]), (draft, gap))
        self.drafts += 1
        self.gaps += len(rows)
        left = [row for row, chance in enumerate(chances) if row not in rows and not math.isnan(chance)]
        if left and len(rows) < MOST:
            raise ValueError(f"the daemon left out {len(left)} tags of {draft}")
        above = [chances[row] for row in left if scores[row] > snapshot.calibration["floor_score"]]
        self.unlisted = max([self.unlisted, *(chance - answer["gaps"][-1]["chance"] for chance in above)])

    def note(self, score, chance, worst):
        """One gap; what is not a number is worse than anything."""
        score, chance = (math.inf if math.isnan(found) else found for found in (score, chance))
        if chance > self.chance or score > self.score:
            self.worst = worst
        self.score, self.chance = max(self.score, score), max(self.chance, chance)

    def __str__(self):
        return (f"{self.drafts:,} drafts, {self.gaps:,} gaps: scores within {self.score:.1e}, chances within "
                f"{self.chance:.1e}; unlisted ones at most {self.unlisted:.1e} above the last listed one")


def compare(snapshot, drafts, answers):
    """How far the daemon's answers to drafts are from the files."""
    apart = Apart()
    for draft, answer in zip(drafts, answers, strict=True):
        apart.add(snapshot, draft, answer)
    return apart


def compare_by_c(program, folder, drafts, answers):
    """The same by the reader in C: {"drafts", "gaps", "score", "chance"}."""
    lines = "".join(json.dumps({"draft": draft, "gaps": answer["gaps"]}) + "\n"
                    for draft, answer in zip(drafts, answers, strict=True))
    said = subprocess.run([program, folder], input=lines.encode(), stdout=subprocess.PIPE, check=True).stdout
    return json.loads(said)


def score_apart(snapshot, items, answers):
    """The largest difference of the scores of filed items' gaps; their chances rest on more than is in a snapshot."""
    largest = 0.0
    for item, answer in zip(items, answers, strict=True):
        scores = snapshot.scores(item, is_filed=True)
        largest = max([largest, *(abs(scores[snapshot.rows[gap["tag"]]] - gap["score"]) for gap in answer["gaps"])])
    return largest
