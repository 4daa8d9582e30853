#!/usr/bin/python3
"""A snapshot's files give the daemon's own scores and chances, read by snapshot_reader.py and by C."""
import os
import sys
import threading
import unittest

import python_tests

sys.path.insert(0, os.path.join(python_tests.TESTS, "demo"))

import editors   # noqa: E402  found by the line above, as those below are
import logbooks  # noqa: E402
import many_scripts  # noqa: E402
import parity    # noqa: E402
import trial     # noqa: E402
import wire      # noqa: E402

BUILD = os.environ.get("BUILD", "build")
DAEMON = os.path.join(BUILD, "undertagd")
READER_IN_C = os.path.join(BUILD, "tests", "test_snapshot_files")
SETTINGS = ["memory_budget=64MiB"]  # and rehearsal_share=0, as every trial has it
LEARNED_BEFORE = 400  # entries, before a snapshot is written
SAYS_NOTHING = {"title": "Quxly", "text": "zzyzx", "tags": []}  # no word that anybody has filed


class Desk:
    """A daemon with a snapshot of all that it has learned, and drafts to ask about. A test case beside it."""

    settings = ()

    @classmethod
    def setUpClass(cls):
        cls.connection = cls.enterClassContext(trial.daemon(DAEMON, [*SETTINGS, *cls.settings]))
        cls.filed, cls.asked = cls.work(cls.connection)
        trial.settle(cls.connection)
        cls.folder, cls.snapshot = parity.write_snapshot(cls.connection, "parity")

    def compare(self, drafts):
        """Both readers, against the daemon."""
        answers = parity.asked(self.connection, drafts)
        apart = parity.compare(self.snapshot, drafts, answers)
        print(f"{type(self).__name__}: {apart}")
        self.assertGreater(apart.gaps, len(drafts))
        self.assertLessEqual(apart.score, parity.SCORES, apart.worst)
        self.assertLessEqual(apart.chance, parity.CHANCES, apart.worst)
        self.assertLessEqual(apart.unlisted, parity.CHANCES)
        by_c = parity.compare_by_c(READER_IN_C, self.folder, drafts, answers)
        print(f"{type(self).__name__}, by C: {by_c}")
        self.assertEqual((by_c["drafts"], by_c["gaps"]), (apart.drafts, apart.gaps))
        self.assertLessEqual(by_c["score"], parity.SCORES)
        self.assertLessEqual(by_c["chance"], parity.CHANCES)

    def test_what_belongs_to_a_draft_is_as_likely_as_the_daemon_says(self):
        self.compare([parity.draft_of(item) for item in [*self.asked, SAYS_NOTHING, {"title": "", "text": ""}]])

    def test_what_a_tagged_draft_lacks_is_as_likely_as_the_daemon_says(self):
        tag = max(self.snapshot.tags, key=lambda tag: tag["count"])["tag"]
        self.compare([*(parity.with_a_tag(item) for item in self.asked if item["tags"]),
                      parity.draft_of(SAYS_NOTHING, [tag]), parity.draft_of(self.asked[0], ["no such tag"])])

    def test_filed_items_have_the_scores_that_the_daemon_says(self):
        items = self.filed[::5]
        answers = parity.asked(self.connection, [{"id": item["id"]} for item in items])
        apart = parity.score_apart(self.snapshot, items, answers)
        print(f"{type(self).__name__}: {len(items):,} filed items, scores within {apart:.1e}")
        self.assertLessEqual(apart, parity.SCORES)

    def test_each_word_is_on_as_many_items_as_the_files_say(self):
        counts = {}
        for item in self.filed:
            for term in self.snapshot.terms.frequencies(item):
                counts[term] = counts.get(term, 0) + 1
        self.assertEqual(counts, {word["word"]: word["documents"] for word in self.snapshot.lines("words.jsonl")})


class TheDemo(Desk, unittest.TestCase):
    """The demo's logbooks, with all that is said of items: rulings, checks, another tagger, revisions, withdrawals."""

    @classmethod
    def work(cls, connection):
        """Files two thirds and works on them; asks about the rest."""
        entries, truth = logbooks.make(1868, 3000)
        first, rest = entries[:2000], entries[2000:]
        known = {tag for entry in first for tag in entry["tags"]}
        true = {line["id"]: [tag for tag in line["true"] if tag in known] for line in truth}
        trial.file_items(connection, first)
        editors.check(connection, 60, 1, lambda identity: sorted(true[identity]), set())
        ids = [entry["id"] for entry in first[::40]]
        editors.rule(connection, editors.shown(connection, ids, 150), lambda identity, tag: tag in true[identity])
        for entry in first[7::100]:
            connection.call("item.file", {**entry, "tagger": "Q.", "tags": true[entry["id"]][:2], "independent": True})
        revised = [{**entry, "text": entry["text"] + " Revised."} for entry in first[3::100]]
        for entry in revised:
            connection.call("item.file", entry)
        withdrawn = {entry["id"] for entry in first[5::100]}
        for identity in sorted(withdrawn):
            connection.call("item.withdraw", {"id": identity})
        now = {entry["id"]: entry for entry in [*first, *revised]}
        return [entry for identity, entry in now.items() if identity not in withdrawn], rest

    def test_the_curve_was_fitted_to_what_the_checks_found(self):
        said = {tag["propensity"]["from"] for tag in self.snapshot.tags}
        self.assertLessEqual({"both"}, said)


class WrittenWhileFiling(Desk, unittest.TestCase):
    """A snapshot from the middle of a feed, beside a daemon that was told no more than what it is of."""

    @classmethod
    def setUpClass(cls):
        entries = logbooks.make(1868, 3000)[0]
        feeding = cls.enterClassContext(trial.daemon(DAEMON, SETTINGS))
        written = cls.write_while(feeding, lambda other: trial.file_items(other, entries))
        cls.seq, cls.folder = written["seq"], written["path"]
        cls.snapshot = parity.snapshot_reader.Snapshot(cls.folder)
        cls.filed, cls.asked = entries[:cls.seq], entries[-300:]
        cls.connection = cls.enterClassContext(trial.daemon(DAEMON, SETTINGS))
        trial.file_items(cls.connection, cls.filed)

    @classmethod
    def write_while(cls, connection, work):
        """Writes a snapshot once some of the work is done."""
        with wire.Wire(connection.socket.getpeername()) as other:
            thread = threading.Thread(target=work, args=(other,))
            thread.start()
            trial.wait_for(lambda: connection.call("daemon.state")["learned"] > LEARNED_BEFORE, 60, "learning", 0.01)
            written = connection.call("snapshot.write", {"name": "between"})
            thread.join()
        return written

    def test_it_was_written_before_all_was_filed(self):
        self.assertGreater(self.seq, LEARNED_BEFORE)
        self.assertLess(self.seq, 3000)


class ManyScripts(Desk, unittest.TestCase):
    """Entries in a score of languages, with fields, and words written in odd ways."""

    @classmethod
    def work(cls, connection):
        """Files two thirds and asks about the rest."""
        entries = many_scripts.entries(900)
        trial.file_items(connection, entries[:600])
        return entries[:600], entries[600:]


class ManyScriptsWithStemsAndPairs(ManyScripts):
    """The same with each language's stems, and pairs of words."""

    settings = ("stemming=on", "language=fr", "word_pairs=on", "title_weight=0.5")


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
