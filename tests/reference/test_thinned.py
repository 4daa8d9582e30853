#!/usr/bin/python3
"""The parts of the trial on thinned tags in tests/quality, against a desk of which is known what it answers."""
import contextlib
import io
import os
import sys
import tempfile
import types
import unittest
from unittest import mock

import numpy as np

import python_tests
import desk
import editors
import figures
import part_chances
import part_completeness
import part_gaps
import part_propensities
import part_rulings
import part_standing
import split as splits
import thinned
import thinning
import trial
import verdicts
import wire


class Desk:
    """Answers each method by a function of its params and remembers what was asked; nothing is ever behind."""

    def __init__(self, **methods):
        self.methods = {"daemon_state": lambda _: {"seq": 1, "learned": 1, "backlog": 0}, **methods}
        self.asked = []

    def call(self, method, params=None):
        self.asked.append((method, params or {}))
        if method.replace(".", "_") not in self.methods:
            raise wire.WireError(f"There is no method '{method}'. (-32601, None) for {{}}")
        return self.methods[method.replace(".", "_")](params or {})

    def pipelined(self, method, many):
        return (self.call(method, params) for params in many)


def half_hidden(seed=1):
    """Sixty entries with a tag each, of which about half are hidden."""
    with tempfile.TemporaryDirectory() as folder:
        path = os.path.join(folder, "W.jsonl")
        python_tests.write_corpus(path, 0)
        return thinning.Thinned(splits.Split(path), lambda counts, _: np.full(len(counts), 0.5), seed)


def true_gaps(corpus, chance):
    """Worklist entries of just what is hidden, each with this chance."""
    running = 0
    for row, item in enumerate(corpus.train):
        gaps = [{"tag": tag, "chance": chance} for tag in corpus.complete(row) if corpus.misses(row, tag)]
        if gaps:
            running += chance * len(gaps)
            yield {"id": item["id"], "title": "", "gaps": gaps, "expected": chance, "running": running, "scored_seq": 1}


def judged(run, *arguments):
    """What a part has to say, by floor: kept or not."""
    heard = verdicts.Verdicts("part")
    with contextlib.redirect_stdout(io.StringIO()):
        run(*arguments, heard)
    return {floor["figure"].removeprefix("part: ").split(" (")[0]: floor["kept"] for floor in heard.floors}


class Pages(unittest.TestCase):
    """Answers that come in pages."""

    def test_the_worklist_goes_on_after_the_last_entry_of_each_page(self):
        pages = {None: {"items": [{"id": "a"}, {"id": "b"}], "next": "b"}, "b": {"items": [{"id": "c"}]}}
        connection = Desk(desk_worklist=lambda params: pages[params.get("after")])
        self.assertEqual([entry["id"] for entry in desk.worklist(connection)], ["a", "b", "c"])

    def test_pages_that_are_not_needed_are_not_asked_for(self):
        connection = Desk(desk_worklist=lambda params: {"items": [{"id": "a", "gaps": [{"tag": "oil"}]}], "next": "a"})
        self.assertEqual(list(editors.head(desk.worklist(connection), 1)), [("a", ["oil"])])
        self.assertEqual(len(connection.asked), 1)

    def test_all_tags_are_those_of_every_page(self):
        pages = {None: {"tags": [{"tag": "gale", "p": 1}], "next": "gale"}, "gale": {"tags": [{"tag": "oil", "p": .5}]}}
        tags = desk.all_tags(Desk(tag_list=lambda params: pages[params.get("after")]))
        self.assertEqual({name: tag["p"] for name, tag in tags.items()}, {"gale": 1, "oil": .5})

    def test_the_worklist_is_waited_for_until_nothing_is_stale(self):
        stale = [3, 1, 0]
        connection = Desk(daemon_state=lambda _: {"worklist": {"kept": 9, "stale": stale.pop(0)}})
        desk.wait_for_worklist(connection)
        self.assertEqual(stale, [])


class People(unittest.TestCase):
    """The simulated editors."""

    def test_no_item_is_drawn_twice(self):
        ids = [f"entry-{number}" for number in range(12)]
        connection = Desk(desk_sample=lambda params: {"items": ids[params["seed"] // 2 * 2:][:params["most"]]})
        taken = set()
        first, second = editors.draw(connection, 3, 0, taken), editors.draw(connection, 4, 0, taken)
        self.assertEqual(len(set(first + second)), 7)
        self.assertEqual(taken, set(first + second))

    def test_a_desk_that_draws_only_what_was_taken_breaks_the_trial_off(self):
        connection = Desk(desk_sample=lambda _: {"items": ["entry-1"]})
        with self.assertRaisesRegex(trial.TrialError, "none of the items"):
            editors.draw(connection, 2, 0, set())

    def test_a_check_lists_all_true_tags_of_an_item_drawn_at_random(self):
        connection = Desk(desk_sample=lambda _: {"items": ["entry-4"]}, item_check=lambda _: {})
        editors.check(connection, 1, 0, lambda identity: [f"of {identity}"], set())
        self.assertIn(("item.check", {"id": "entry-4", "tags": ["of entry-4"], "drawn": "random"}), connection.asked)

    def test_the_head_is_cut_after_just_as_many_gaps_as_wanted(self):
        entries = [{"id": "a", "gaps": [{"tag": "gale"}, {"tag": "oil"}]},
                   {"id": "b", "gaps": [{"tag": "oil"}, {"tag": "fog"}]}]
        self.assertEqual(list(editors.head(entries, 3)), [("a", ["gale", "oil"]), ("b", ["oil"])])

    def test_an_editor_who_is_right_parts_true_from_false(self):
        connection = Desk(item_rule=lambda _: {})
        counted = editors.rule(connection, [("a", ["gale", "oil"]), ("b", ["fog"])],
                               lambda identity, tag: (identity, tag) == ("a", "oil"))
        self.assertEqual(counted, (3, 1))
        self.assertEqual(connection.asked[:2], [("item.rule", {"id": "a", "belongs": ["oil"], "not": ["gale"]}),
                                                ("item.rule", {"id": "b", "belongs": [], "not": ["fog"]})])


class Chances(unittest.TestCase):
    """Chances against the truth."""

    def test_candidates_are_judged_with_their_band_and_empty_places_are_not(self):
        corpus = half_hidden()
        ranked, chances = np.array([[0, 1, -1]]), np.array([[.9, .2, 0]])
        bands = part_chances.by_band(ranked, chances, corpus.truth_train[[0]], np.array([1000, 29, 5]))
        self.assertEqual({band: chance.tolist() for band, (chance, _) in bands.items()},
                         {"all": [.9, .2], "head": [.9], "tail": [.2]})
        self.assertEqual(bands["all"][1].sum(), 1.0)

    def test_the_sample_has_no_item_twice_and_is_the_same_each_time(self):
        rows = part_chances.sample(9000)
        self.assertEqual((len(set(rows)), rows.max() < 9000), (5000, True))
        np.testing.assert_array_equal(rows, part_chances.sample(9000))


class Worklist(unittest.TestCase):
    """Tags that were really hidden."""

    def verdicts_on(self, entries):
        corpus = half_hidden()
        entries = entries(corpus)
        connection = Desk(desk_worklist=lambda _: {"items": entries},
                          item_gaps=lambda params: {"gaps": [{"tag": tag, "chance": .5} for tag in
                                                             corpus.complete(corpus.rows[params["id"]])]})
        return judged(lambda heard: part_gaps.run(connection, corpus, heard, None))

    def test_a_worklist_of_hidden_tags_with_chances_of_one_keeps_all_floors(self):
        self.assertEqual(set(self.verdicts_on(lambda corpus: list(true_gaps(corpus, 1.0))).values()), {True})

    def test_true_gaps_that_promise_too_little_miss_what_was_promised_and_nothing_else(self):
        kept = self.verdicts_on(lambda corpus: list(true_gaps(corpus, 0.5)))
        self.assertTrue(any("off by" in name for name in kept))
        for name, good in kept.items():
            self.assertEqual(good, "off by" not in name, name)

    def test_gaps_that_no_item_lacks_miss_the_floor(self):
        def false_gaps(corpus):
            return [{"id": item["id"], "gaps": [{"tag": item["tags"][0], "chance": 1.0}], "running": 1.0}
                    for item in corpus.train if item["tags"]]
        kept = self.verdicts_on(false_gaps)
        self.assertTrue(all(not good for name, good in kept.items() if "really missing" in name))


class Completeness(unittest.TestCase):
    """Shares of the pairs on record."""

    def test_what_a_check_found_is_on_record(self):
        corpus = half_hidden()
        checked = [item["id"] for item in corpus.train]
        np.testing.assert_array_equal(part_completeness.on_record(corpus, checked), corpus.truth_train.getnnz(axis=0))
        np.testing.assert_array_equal(part_completeness.on_record(corpus, []), corpus.counts)

    def test_intervals_that_miss_are_counted_by_the_side_on_which_the_truth_lies(self):
        said = {tag: {"low": .4, "high": .6} for tag in "abcd"} | {"e": {"low": None, "high": None}}
        inside, above, below, width = part_completeness.held(said, [.4, .5, .7, .1, .5], "abcde")
        self.assertEqual((inside, above, below), (2, 1, 1))
        self.assertAlmostEqual(width, .2)


class Standing(unittest.TestCase):
    """Our figures of items asked about just before they were filed."""

    def setUp(self):
        self.corpus = half_hidden()
        self.record = part_standing.Record(self.corpus)
        ranked = np.array([[self.corpus.numbers[item["tags"][0]], -1, -1, -1, -1] for item in self.corpus.split.test])
        self.record.add(ranked, self.corpus.split.truth_test, self.corpus.given_test)

    def test_the_truth_counts_hidden_tags_and_plain_precision_does_not(self):
        """Each entry's one true tag is proposed first; over all items only the given ones are plain hits."""
        ours, untagged = self.record.last(len(self.corpus.test))
        self.assertEqual(ours["true P@1"], (1.0, 1.0))
        self.assertEqual(ours["P@1"][0], 1.0)
        self.assertAlmostEqual(ours["P@1"][1], 1 - untagged / len(self.corpus.test))
        self.assertTrue(0 < untagged < len(self.corpus.test))

    def test_what_is_found_of_all_that_is_given_makes_a_psp_of_one(self):
        self.assertAlmostEqual(self.record.last(5)[0]["PSP@1"][0], 1.0)

    def test_without_first_uses_a_tag_that_is_new_at_that_time_is_not_missed_in_psp(self):
        """Only one tag was in use; all of its items are found, and the first uses of the two others cannot be."""
        used = self.corpus.numbers["oil"]
        self.corpus.counts[np.arange(3) != used] = 0
        record = part_standing.Record(self.corpus)
        record.add(np.full((len(self.corpus.test), 5), used), self.corpus.split.truth_test, self.corpus.given_test)
        psp, without_first_uses = record.last(len(self.corpus.test))[0]["PSP@1"]
        self.assertAlmostEqual(without_first_uses, 1.0)
        self.assertLess(psp, 0.9)

    def test_the_p_of_a_chunk_counts_the_chunks_before_and_not_itself(self):
        """With two chunks alike but for p, the sums of the second rest on twice the evidence."""
        given = self.corpus.given_test
        p = figures.propensities(self.corpus.counts + given.getnnz(axis=0), len(self.corpus.train) + given.shape[0])
        ranked = np.array([[self.corpus.numbers[item["tags"][0]]] * 5 for item in self.corpus.split.test])
        self.record.add(ranked, self.corpus.split.truth_test, given)
        row = int(np.flatnonzero(given.getnnz(axis=1))[0])
        self.assertAlmostEqual(self.record.parts["best 1"][1][row], 1 / p[given.indices[given.indptr[row]]])


class Propensities(unittest.TestCase):
    """The error of p."""

    def test_both_means_by_hand(self):
        """Off by .1 and .4 where the tags are given 3 times and once: .25 over the tags, .175 over the pairs."""
        corpus = types.SimpleNamespace(p=np.array([.5, .5, .5]), known=np.array([True, True, False]),
                                       counts=np.array([3, 1, 0]))
        means = part_propensities.errors(np.array([.6, .1, np.nan]), corpus)
        self.assertAlmostEqual(means["over tags"], .25)
        self.assertAlmostEqual(means["over pairs"], .175)

    def verdicts_on(self, few, many, of_true_curve):
        by_checks = {checks: {"over tags": value} for checks, value in ((0, .02), (50, few), (2000, many))}
        kept = judged(lambda heard: part_propensities.judge(heard, "steep", by_checks, {"over tags": of_true_curve}))
        return list(kept.values())

    def test_few_checks_may_do_a_hundredth_of_harm_and_many_must_halve_the_error(self):
        self.assertEqual(self.verdicts_on(.03, .01, .002), [True, True])
        self.assertEqual(self.verdicts_on(.031, .011, .002), [False, False])

    def test_what_the_true_curve_cannot_halve_need_not_be_halved(self):
        self.assertEqual(self.verdicts_on(.02, .019, .018), [True, True])


class Rulings(unittest.TestCase):
    """What the reliability table says of an editor."""

    def test_the_excess_of_an_editor_is_what_came_since_the_last_table(self):
        """40 shown of chance .5, 20 confirmed; then 10 more, all confirmed: (10 - 5) / 10."""
        def table(shown, confirmed):
            rows = [{"from": .4, "to": .6, "shown": shown, "mean_chance": .5, "confirmed": confirmed},
                    {"from": .6, "to": 1, "shown": 0, "mean_chance": None, "confirmed": 0}]
            return part_rulings.ruled_on(Desk(desk_standing=lambda _: {"reliability": rows}))
        with contextlib.redirect_stdout(io.StringIO()):
            self.assertAlmostEqual(part_rulings.excess(verdicts.Verdicts("x"), "right", table(40, 20)), 0)
            self.assertAlmostEqual(part_rulings.excess(verdicts.Verdicts("x"), "all", table(50, 30) - table(40, 20)), .5)


class Outcome(unittest.TestCase):
    """What becomes of a part."""

    def carried_out(self, run):
        out = io.StringIO()
        with contextlib.redirect_stdout(out):
            return thinned.carried_out("standing", run), out.getvalue()

    def test_a_method_that_is_not_there_is_a_floor_missed(self):
        part, out = self.carried_out(lambda _: Desk().call("desk.standing"))
        self.assertEqual([floor["kept"] for floor in part.floors], [False])
        self.assertIn("MISSED  cannot be asked: There is no method 'desk.standing'", out)

    def test_another_error_breaks_the_trial_off(self):
        def broken(_):
            raise wire.WireError("the connection broke")
        with self.assertRaises(wire.WireError):
            self.carried_out(broken)

    def test_each_floor_says_on_its_line_whether_it_is_kept(self):
        def run(heard):
            heard.at_least("share", .8, .75)
            heard.at_most("error", .021, .02)
            heard.above("found", None, .3)
        part, out = self.carried_out(run)
        self.assertEqual([floor["kept"] for floor in part.floors], [True, False, False])
        self.assertIn("kept    share: 0.8000, at least 0.7500\nMISSED  error: 0.0210, at most 0.0200\n"
                      "MISSED  found: –, above 0.3000\n", out)

    def test_without_its_corpus_it_is_skipped_with_69(self):
        out = io.StringIO()
        with tempfile.TemporaryDirectory() as folder, contextlib.redirect_stdout(out):
            self.assertEqual(thinned.main(["--corpora", folder]), 69)
        self.assertIn("T: skipped", out.getvalue())

    def test_parts_that_change_the_model_have_a_daemon_of_their_own(self):
        self.assertEqual(sorted(part for group in thinned.ON_ONE_DAEMON for part in group), sorted(thinned.PARTS))
        started = []

        @contextlib.contextmanager
        def daemon(program, _):
            started.append(program)
            yield Desk()
        options = types.SimpleNamespace(daemon="undertagd", set=[])
        with mock.patch("trial.daemon", daemon), mock.patch("trial.file_items", lambda *_: (0, 0)), \
                mock.patch.dict(thinned.PARTS, {part: lambda *_: None for part in thinned.PARTS}), \
                contextlib.redirect_stdout(io.StringIO()):
            list(thinned.judged_parts(None, half_hidden(), options, ("chances", "gaps", "rulings")))
        self.assertEqual(len(started), 2)


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
