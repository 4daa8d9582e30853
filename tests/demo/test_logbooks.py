#!/usr/bin/python3
"""The demo's stream is what its daemon and its reader may expect of it."""
import datetime
import hashlib
import json
import os
import re
import subprocess
import sys
import tempfile
import unicodedata
import unittest

sys.dont_write_bytecode = True
FOLDER = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, FOLDER)

import logbooks  # noqa: E402 (found by the line above)

SEED, ENTRIES = 1868, 3000


def count_tags(lists):
    counts = {}
    for tags in lists:
        for tag in tags:
            counts[tag] = counts.get(tag, 0) + 1
    return counts


class TheStream(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.entries, cls.truth = logbooks.make(SEED, ENTRIES)
        cls.given = count_tags(entry["tags"] for entry in cls.entries)
        cls.deserved = count_tags(line["true"] for line in cls.truth)

    def test_it_has_3000_entries_with_an_id_of_their_own(self):
        self.assertEqual(len(self.entries), 3000)
        self.assertEqual(len({entry["id"] for entry in self.entries}), 3000)

    def test_its_vocabulary_holds_at_least_200_given_tags(self):
        self.assertGreaterEqual(len(self.given), 200)

    def test_a_few_tags_are_given_500_times_or_more(self):
        often = sum(count >= 500 for count in self.given.values())
        self.assertGreaterEqual(often, 3)
        self.assertLess(often, 12)

    def test_most_tags_are_given_fewer_than_15_times(self):
        seldom = sum(count < 15 for count in self.given.values())
        self.assertGreater(seldom, len(self.given) / 2)

    def test_what_is_given_is_a_part_of_what_is_deserved(self):
        for entry, line in zip(self.entries, self.truth):
            self.assertEqual(entry["id"], line["id"])
            self.assertLessEqual(set(entry["tags"]), set(line["true"]))
            self.assertEqual(set(line["forgotten"]), set(line["true"]) - set(entry["tags"]))

    def test_rare_tags_are_forgotten_more_often_than_common_ones(self):
        def remembered(wanted):
            tags = [tag for tag, count in self.deserved.items() if wanted(count)]
            return (sum(self.given.get(tag, 0) for tag in tags)
                    / sum(self.deserved[tag] for tag in tags))
        rare = remembered(lambda count: count < 40)
        between = remembered(lambda count: 40 <= count < 400)
        common = remembered(lambda count: count >= 400)
        self.assertLess(rare + 0.1, between)
        self.assertLess(between + 0.1, common)

    def test_the_members_are_those_of_a_filing(self):
        for entry in self.entries:
            self.assertEqual(set(entry), {"id", "title", "text", "fields", "tags", "tagger",
                                          "filed_at"})
            self.assertEqual(set(entry["fields"]), {"station", "year", "book"})
            self.assertIsInstance(entry["fields"]["year"], int)

    def test_ids_and_tags_are_1_to_255_bytes_without_control_characters(self):
        for entry in self.entries:
            for name in [entry["id"]] + entry["tags"]:
                self.assertTrue(1 <= len(name.encode("utf-8")) <= 255, name)
                self.assertFalse(any(unicodedata.category(sign) == "Cc" for sign in name), name)
            self.assertEqual(len(entry["tags"]), len(set(entry["tags"])))

    def test_every_text_is_nfc(self):
        for entry in self.entries:
            for text in [entry["id"], entry["title"], entry["text"], entry["tagger"],
                         entry["fields"]["station"], entry["fields"]["book"]] + entry["tags"]:
                self.assertTrue(unicodedata.is_normalized("NFC", text), text)

    def test_times_are_rfc_3339_in_utc_and_rise(self):
        before = ""
        for entry in self.entries:
            self.assertRegex(entry["filed_at"], r"^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\dZ$")
            datetime.datetime.strptime(entry["filed_at"], "%Y-%m-%dT%H:%M:%SZ")
            self.assertLess(before, entry["filed_at"])
            before = entry["filed_at"]

    def test_an_entry_is_two_to_six_sentences_with_every_slot_filled(self):
        for entry in self.entries:
            sentences = re.split(r"(?<=[.]) (?=[A-Z])", entry["text"])
            self.assertTrue(2 <= len(sentences) <= 6, entry["text"])
            self.assertTrue(all(sentence.endswith(".") for sentence in sentences), entry["text"])
            self.assertNotRegex(entry["text"], r"[{}|=]|  ")

    def test_nothing_happens_before_its_time(self):
        for entry, line in zip(self.entries, self.truth):
            year = entry["fields"]["year"]
            if "wireless" in line["true"]:
                self.assertGreaterEqual(year, 1908)
            if "wartime" in line["true"]:
                self.assertTrue(1914 <= year <= 1918 or 1939 <= year <= 1945, year)
            if "Sunday service" in line["true"]:
                day = datetime.datetime.strptime(entry["title"].split(", ")[-1], "%d %B %Y")
                self.assertEqual(day.weekday(), 6)


class TheProgram(unittest.TestCase):
    def run_it(self, folder, name, *options):
        out, truth = os.path.join(folder, name), os.path.join(folder, name + ".truth")
        subprocess.run([sys.executable, os.path.join(FOLDER, "logbooks.py"), "--out", out,
                        "--truth", truth, *options], check=True, timeout=60)
        with open(out, "rb") as stream, open(truth, "rb") as lines:
            return stream.read(), lines.read()

    def test_the_same_seed_gives_the_same_bytes(self):
        with tempfile.TemporaryDirectory() as folder:
            first = self.run_it(folder, "first", "--seed", "7", "--entries", "200")
            again = self.run_it(folder, "again", "--seed", "7", "--entries", "200")
            other = self.run_it(folder, "other", "--seed", "8", "--entries", "200")
        self.assertEqual(first, again)
        self.assertNotEqual(first[0], other[0])

    def test_the_seed_of_the_demo_gives_the_bytes_that_it_always_gave(self):
        with tempfile.TemporaryDirectory() as folder:
            stream, _ = self.run_it(folder, "stream")
        self.assertEqual(hashlib.sha256(stream).hexdigest(), STREAM_SHA256)

    def test_one_entry_is_one_line_of_json_and_the_truth_stays_out_of_it(self):
        with tempfile.TemporaryDirectory() as folder:
            stream, truth = self.run_it(folder, "stream", "--entries", "50")
        lines = [json.loads(line) for line in stream.decode("utf-8").splitlines()]
        self.assertEqual(len(lines), 50)
        self.assertEqual(len(truth.splitlines()), 50)
        self.assertNotIn(b'"true"', stream)
        self.assertNotIn(b'"forgotten"', stream)


# Of the stream by its defaults. It changes only when phrases.txt or the way of drawing does.
STREAM_SHA256 = "d273242306aa5c7c7ecda66aae29863f1db6f10444156dbab84b4ee9f1938cc5"


def main():
    suite = unittest.defaultTestLoader.loadTestsFromModule(sys.modules[__name__])
    result = unittest.TextTestRunner(verbosity=2).run(suite)
    failed = len(result.failures) + len(result.errors)
    print("%d passed, %d failed" % (result.testsRun - failed, failed))
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
