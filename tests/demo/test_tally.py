#!/usr/bin/python3
"""What the demo's editors say, and what it counts, on a stream small enough to count by hand."""
import contextlib
import io
import json
import os
import sys
import tempfile
import unittest

sys.dont_write_bytecode = True
FOLDER = os.path.dirname(os.path.abspath(__file__))
sys.path.insert(0, FOLDER)

import logbooks  # noqa: E402 (found by the line above)
import tally  # noqa: E402

# Nobody ever gave 'seals'. Of 'fog' 2 of 3 uses are given, of 'lamp' 1 of 2.
STREAM = [{"id": "a", "title": "A", "text": "Fog.", "tags": ["fog"]},
          {"id": "b", "title": "B", "text": "Fog, lamp lit.", "tags": ["fog", "lamp"]},
          {"id": "c", "title": "C", "text": "Fog, lamp lit, seals.", "tags": []}]
TRUTH = [{"id": "a", "true": ["fog"], "forgotten": []},
         {"id": "b", "true": ["fog", "lamp"], "forgotten": []},
         {"id": "c", "true": ["fog", "lamp", "seals"], "forgotten": ["fog", "lamp", "seals"]}]
WORKLIST = {"items": [
    {"id": "c", "gaps": [{"tag": "wrecks", "chance": .9}, {"tag": "fog", "chance": .8},
                         {"tag": "lamp", "chance": .7}], "expected": 2.4, "running": 2.4},
    {"id": "a", "gaps": [{"tag": "lamp", "chance": .6}], "expected": .6, "running": 3.0}]}


class TheTally(unittest.TestCase):
    def setUp(self):
        folder = tempfile.TemporaryDirectory()
        self.addCleanup(folder.cleanup)
        self.folder = folder.name
        self.stream = self.file("stream", STREAM)
        self.truth = self.file("truth", TRUTH)

    def file(self, name, objects):
        path = os.path.join(self.folder, name)
        logbooks.write_lines(path, objects)
        return path

    def said(self, text, function, *arguments):
        """What a function prints with `text` on its standard input, as lines."""
        out = io.StringIO()
        before, sys.stdin = sys.stdin, io.StringIO(text)
        try:
            with contextlib.redirect_stdout(out):
                function(*arguments)
        finally:
            sys.stdin = before
        return out.getvalue().splitlines()

    def test_a_checker_names_all_true_tags_of_the_vocabulary_and_no_other(self):
        self.assertEqual(self.said("c\na\n", tally.check, self.stream, self.truth),
                         ["c\t--tag\tfog\t--tag\tlamp", "a\t--tag\tfog"])

    def test_an_editor_rules_on_the_first_two_proposals_as_the_truth_has_them(self):
        self.assertEqual(self.said(json.dumps(WORKLIST), tally.rule, self.truth),
                         ["c", "--not", "wrecks", "--belongs", "fog"])

    def test_a_worklist_promises_its_running_sum_and_keeps_what_was_forgotten(self):
        said = self.said(json.dumps(WORKLIST), tally.promise, self.truth)
        self.assertEqual(said, ["Of the first 2 it promises 3 missing tags; 2 are really missing."])

    def test_the_true_share_is_that_of_tags_on_record(self):
        given, deserved = {"fog": 2, "lamp": 1}, {"fog": 3, "lamp": 2, "seals": 1}
        self.assertAlmostEqual(tally.true_share(given, deserved, "all"), 3 / 5)
        self.assertIsNone(tally.true_share(given, deserved, "torso"))

    def test_a_tag_on_thirty_entries_is_no_longer_in_the_tail(self):
        given, deserved = {"fog": 30, "lamp": 29}, {"fog": 40, "lamp": 58}
        self.assertAlmostEqual(tally.true_share(given, deserved, "torso"), 30 / 40)
        self.assertAlmostEqual(tally.true_share(given, deserved, "tail"), 29 / 58)

    def test_shares_stand_beside_the_truth_before_and_after_the_checks(self):
        # 'fog' 40 times: given on all entries but two of these; one of the two is checked.
        entries = [{"id": str(i), "tags": (["fog"] if i < 38 else []) + (["lamp"] if i < 1 else [])}
                   for i in range(40)]
        truth = [{"id": str(i), "true": ["fog"] + (["lamp"] if i < 2 else []),
                  "forgotten": (["fog"] if i >= 38 else []) + (["lamp"] if i == 1 else [])}
                 for i in range(40)]
        answer = {"overall": {"share": .5, "low": .4, "high": .6},
                  "bands": {band: {"share": .5, "low": .4, "high": .6} for band in ("torso", "tail")}}
        checked = os.path.join(self.folder, "checked")
        with open(checked, "w", encoding="utf-8") as names:
            names.write("39\n")
        said = self.said("", tally.complete, self.file("s", entries), self.file("t", truth), checked,
                         self.file("before", [answer]), self.file("after", [answer]))
        # fog 38 of 40, then 39; lamp 1 of 2: 39/42 = .93 and 40/42 = .95 in all.
        self.assertEqual([line.split() for line in said[1:]], [
            ["all", "0.50,", "0.40", "to", "0.60", "0.93", "0.50,", "0.40", "to", "0.60", "0.95"],
            ["torso", "0.50,", "0.40", "to", "0.60", "0.95", "0.50,", "0.40", "to", "0.60", "0.97"],
            ["tail", "0.50,", "0.40", "to", "0.60", "0.50", "0.50,", "0.40", "to", "0.60", "0.50"]])

    def test_an_answer_without_shares_ends_the_demo(self):
        answer = {"overall": {"share": None, "low": None, "high": None}, "bands": {}}
        with self.assertRaises(SystemExit):
            self.said("", tally.complete, self.stream, self.truth, self.file("none", []),
                      self.file("before", [answer]), self.file("after", [answer]))


def main():
    suite = unittest.defaultTestLoader.loadTestsFromModule(sys.modules[__name__])
    result = unittest.TextTestRunner(verbosity=2).run(suite)
    failed = len(result.failures) + len(result.errors)
    print("%d passed, %d failed" % (result.testsRun - failed, failed))
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
