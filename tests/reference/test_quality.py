#!/usr/bin/python3
"""The trial of tests/quality from its command line, with a small daemon of which is known what it proposes."""
import contextlib
import io
import json
import os
import sys
import tempfile
import unittest

import python_tests
import outcome
import quality

FAKE = os.path.join(python_tests.TESTS, "reference", "fake_undertagd.py")


class Trial(unittest.TestCase):
    """Exit status and what is printed."""

    def setUp(self):
        folder = tempfile.TemporaryDirectory()
        self.addCleanup(folder.cleanup)
        self.folder = folder.name
        python_tests.write_corpus(os.path.join(self.folder, "D.jsonl"), 1)

    def run_quality(self, *arguments, corpus="D"):
        """Exit status, and what stood on standard output and standard error."""
        out, err = io.StringIO(), io.StringIO()
        with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
            status = quality.main([FAKE, "--corpora", self.folder, "--kept", self.folder,
                                   *(["--corpus", corpus] if corpus else []), *arguments])
        return status, out.getvalue(), err.getvalue()

    def test_a_daemon_that_finds_every_tag_keeps_the_floors_it_can(self):
        """Each entry has one tag, so that P@5 is at most a fifth and its floor must be missed."""
        status, out, _ = self.run_quality()
        self.assertEqual(status, 1)
        self.assertIn("floor P@1: .865, reached 1.00: kept", out)
        self.assertIn("floor found@10 of the tail: .540, reached 1.00: kept", out)
        self.assertIn("floor P@5: .470, reached .200: MISSED", out)

    def test_the_status_is_0_only_when_every_floor_is_kept(self):
        kept, missed = {"floors": [{"kept": True}]}, {"floors": [{"kept": True}, {"kept": False}]}
        self.assertEqual(outcome.status({"D": kept, "W": kept}, 2), 0)
        self.assertEqual(outcome.status({"D": kept, "W": missed}, 2), 1)

    def test_a_skipped_corpus_makes_69_unless_a_floor_is_missed(self):
        self.assertEqual(outcome.status({"D": {"floors": [{"kept": True}]}}, 2), 69)
        self.assertEqual(outcome.status({"D": {"floors": [{"kept": False}]}}, 2), 1)
        self.assertEqual(outcome.status({}, 2), 69)

    def test_a_corpus_that_is_not_there_is_skipped_with_a_sentence(self):
        status, out, _ = self.run_quality(corpus="W")
        self.assertEqual(status, 69)
        self.assertIn("W: skipped", out)

    def test_a_daemon_that_proposes_nothing_reaches_nothing(self):
        status, out, _ = self.run_quality("--set", "fake=silent")
        self.assertEqual(status, 1)
        self.assertIn("floor P@1: .865, reached .000: MISSED", out)

    def test_a_daemon_behind_with_learning_is_waited_for(self):
        _, out, err = self.run_quality("--set", "fake=lagging")
        self.assertIn("floor P@1: .865, reached 1.00: kept", out, err)

    def test_a_daemon_that_ends_makes_70_and_its_last_words_are_shown(self):
        status, _, err = self.run_quality("--set", "fake=dead")
        self.assertEqual(status, 70)
        self.assertIn("undertagd: there is no room for a home", err)
        self.assertIn("The trial broke off: the daemon ended with 1", err)

    def test_the_batch_figures_stand_beside(self):
        _, out, _ = self.run_quality()
        rows = {line[:15].strip(): line.split() for line in out.splitlines() if " all " in line}
        self.assertIn("1.00", rows["batch, plain"])
        self.assertIn("1.00", rows["batch, 2/p − 1"])

    def test_the_gain_of_the_correction_stands_beside_and_the_uncorrected_figures_too(self):
        """This daemon finds the same tags either way."""
        _, out, _ = self.run_quality()
        self.assertIn("gain of the correction, found@10 of the tail: 1.00 against 1.00, +0.0%", out)
        self.assertIn("gain of the correction, macro R@10: 1.00 against 1.00, +0.0%", out)
        self.assertIn("\nuncorrected    all", out)

    def test_settings_that_say_whether_to_correct_are_not_tried_the_other_way(self):
        _, out, _ = self.run_quality("--set", "correction=off")
        self.assertNotIn("gain of the correction", out)

    def test_thinned_tags_are_a_corpus_of_their_own_and_need_w(self):
        status, out, _ = self.run_quality(corpus="T")
        self.assertEqual(status, 69)
        self.assertIn("T: skipped", out)
        self.assertNotIn("D:", out)

    def test_the_chances_are_compared_with_what_was_given(self):
        """By hand: 12 drafts, 3 tags each: 12 of .9, all given, and 24 of .05, none given; the mean error is
        (12 * .1 + 24 * .05) / 36 = .0667, the mean chance (12 * .9 + 24 * .05) / 36 = .3333. Each tag was given to 16
        of the 48 items learned: p = 1 / (1 + 2.871 * 2.5^.55 * 17.5^-.55) = .5039, and a third over p is .6615."""
        kept = os.path.join(self.folder, "figures.json")
        self.run_quality("--json", kept)
        with open(kept, encoding="utf-8") as file:
            chances = json.load(file)["D"]["chances"]["all"]
        self.assertEqual(chances["pairs"], 36)
        self.assertAlmostEqual(chances["mean"], 1 / 3)
        self.assertAlmostEqual(chances["given"], 1 / 3)
        self.assertAlmostEqual(chances["error"], 0.0667, places=4)
        self.assertAlmostEqual(chances["corrected"], 0.6615, places=4)


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
