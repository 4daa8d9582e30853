#!/usr/bin/python3
"""A snapshot's files are what tools that we did not make take them for."""
import io
import json
import os
import re
import subprocess
import sys
import unicodedata
import unittest
import zipfile

import numpy as np
from scipy import sparse

import python_tests
import many_scripts
import parity
import snapshot_words
import trial

DAEMON = os.path.join(os.environ.get("BUILD", "build"), "undertagd")
WORD_BREAK_TEST = "/usr/share/unicode/auxiliary/WordBreakTest.txt"  # Debian package unicode-data
BARE = ("data", "indices", "indptr")


def setUpModule():
    """One snapshot for all: of a few hundred entries in many scripts."""
    connection = unittest.enterModuleContext(trial.daemon(DAEMON, []))
    trial.file_items(connection, many_scripts.entries(300))
    ASnapshot.folder, ASnapshot.snapshot = parity.write_snapshot(connection, "outside", items=True)


class ASnapshot(unittest.TestCase):
    """What the tests share."""

    folder, snapshot = None, None

    def path(self, name):
        """One of its files."""
        return os.path.join(self.folder, name)

    def weights(self):
        """As scipy opens them."""
        return sparse.load_npz(self.path("weights.npz"))


class TheMatrix(ASnapshot):
    """scipy.sparse.load_npz, numpy.load and save_npz (SciPy, NumPy)."""

    def test_scipy_opens_a_row_for_each_tag_and_a_column_for_each_word(self):
        weights = self.weights()
        self.assertIsInstance(weights, sparse.csr_matrix)
        self.assertEqual(weights.dtype, np.float32)
        self.assertEqual(weights.shape, (len(self.snapshot.tags), len(self.snapshot.columns)))
        weights.check_format(full_check=True)

    def test_columns_rise_within_a_row(self):
        weights = self.weights()
        weights.has_sorted_indices = False  # so that it is looked at
        sorted_weights = weights.sorted_indices()
        np.testing.assert_array_equal(sorted_weights.indices, weights.indices)
        np.testing.assert_array_equal(sorted_weights.data, weights.data)

    def test_the_bare_arrays_are_those_of_the_matrix(self):
        weights = self.weights()
        for name in BARE:
            bare = np.load(self.path(f"weights_{name}.npy"), mmap_mode="r")
            self.assertEqual(bare.dtype, getattr(weights, name).dtype)
            np.testing.assert_array_equal(bare, getattr(weights, name))

    def test_there_are_as_many_weights_as_the_daemon_has(self):
        manifest = self.snapshot.read("manifest.json")
        self.assertGreater(self.weights().nnz, 1000)
        self.assertEqual(self.weights().nnz, manifest["counts"]["weights"])

    def test_scipy_itself_would_have_saved_the_same_arrays(self):
        saved = io.BytesIO()
        sparse.save_npz(saved, self.weights(), compressed=False)
        with zipfile.ZipFile(saved) as ours_by_scipy, zipfile.ZipFile(self.path("weights.npz")) as ours:
            self.assertIsNone(ours.testzip())
            self.assertEqual(sorted(ours.namelist()), sorted(ours_by_scipy.namelist()))
            for name in ours.namelist():
                one, other = (np.load(io.BytesIO(file.read(name))) for file in (ours, ours_by_scipy))
                self.assertEqual((one.dtype, one.shape), (other.dtype, other.shape), name)
                np.testing.assert_array_equal(one, other)


class TheManifest(ASnapshot):
    """sha256sum (GNU coreutils)."""

    def test_sha256sum_finds_every_file_as_the_manifest_has_it(self):
        files = self.snapshot.read("manifest.json")["files"]
        sums = "".join(f"{file['sha256']}  {file['name']}\n" for file in files)
        checked = subprocess.run(["sha256sum", "--check", "--strict", "-"], input=sums, text=True, cwd=self.folder,
                                 check=False, capture_output=True)
        self.assertEqual(checked.returncode, 0, checked.stdout + checked.stderr)
        self.assertEqual(checked.stdout.count(": OK\n"), len(files))

    def test_it_names_every_file_but_itself_with_its_size(self):
        sizes = {file["name"]: file["bytes"] for file in self.snapshot.read("manifest.json")["files"]}
        found = {name: os.path.getsize(self.path(name)) for name in os.listdir(self.folder) if name != "manifest.json"}
        self.assertEqual(sizes, found)


class TheLines(ASnapshot):
    """RFC 8259, by Python's json."""

    def test_each_line_of_each_file_of_lines_is_an_object(self):
        for name in ("tags.jsonl", "words.jsonl", "items.jsonl", "proposals.jsonl"):
            with open(self.path(name), "rb") as file:
                data = file.read()
            self.assertTrue(data.endswith(b"\n"), name)
            for line in data.decode("utf-8").split("\n")[:-1]:
                self.assertIsInstance(json.loads(line, parse_constant=self.fail), dict)

    def test_the_items_are_those_that_were_filed(self):
        filed = {item["id"]: item for item in many_scripts.entries(300)}
        items = self.snapshot.lines("items.jsonl")
        self.assertEqual(sorted(item["id"] for item in items), sorted(filed))
        for item in items:
            for name in ("title", "text", "tags", "fields", "language"):
                self.assertEqual(item.get(name) or None, filed[item["id"]].get(name) or None, (item["id"], name))


class TheWords(ASnapshot):
    """Unicode's own test of word boundaries (UAX #29), with the properties that text.json has."""

    def cases(self):
        """The pieces of each line of the file: "÷ 0061 × 0308 ÷ # …"."""
        with open(WORD_BREAK_TEST, encoding="utf-8") as file:
            lines = [line.split("#")[0].strip() for line in file]
        for line in filter(None, lines):
            yield ["".join(chr(int(point, 16)) for point in re.split("[ ×]+", piece) if point)
                   for piece in line.strip("÷ \t").split("÷")]

    def test_its_cases_are_cut_as_unicode_cuts_them(self):
        if not os.path.exists(WORD_BREAK_TEST):
            print(f"skipped: {WORD_BREAK_TEST} is not here (Debian package unicode-data)")
            self.skipTest("no unicode-data")
        boundaries = snapshot_words.Boundaries(self.snapshot.text["words"])
        cases = list(self.cases())
        for pieces in cases:
            self.assertEqual(boundaries.pieces("".join(pieces)), pieces)
        self.assertGreater(len(cases), 1000)

    def test_letters_and_numbers_are_those_of_python_where_it_knows_them(self):
        in_word = snapshot_words.Ranges({True: self.snapshot.text["words"]["in_word"]})
        for point in range(0x110000):
            category = unicodedata.category(chr(point))
            if category not in ("Cn", "Cs"):
                self.assertEqual(bool(in_word.get(chr(point))), category[0] in "LN", f"U+{point:04X}")


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
