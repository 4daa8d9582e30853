#!/usr/bin/python3
"""The scripts that make the corpora, on small inputs in the form of their sources (wndb(5), Debian Policy 5)."""
import contextlib
import hashlib
import io
import json
import os
import platform
import sys
import tempfile
import unittest

import python_tests
import corpus
import make_d
import make_w

NOUNS = """\
  1 A line of the licence, which starts with two spaces.
00000010 03 n 01 entity 0 001 ~ 00000020 n 0000 | that which is
00000020 06 n 02 light 0 lamp 0 002 @ 00000010 n 0000 ~ 00000030 n 0000 | what shines; "a light at sea"
00000030 06 n 01 harbour_light 0 002 @ 00000020 n 0000 @ 00000040 n 0000 | a light at a harbour
00000040 06 n 01 light 0 001 @ 00000010 n 0000 | a signal | of any kind
00000050 15 n 01 Black_Rock_Light 0 003 @i 00000030 n 0000 + 00000010 v 0101 #p 00000040 n 0000 | a light of ours
"""
VERBS = """\
00000010 29 v 01 shine 0 000 01 + 01 00 | give light
00000020 29 v 0b a 0 b 0 c 0 d 0 e 0 f 0 g 0 h 0 i 0 j 0 k 0 001 @ 00000010 v 0000 01 + 01 00 | eleven words
"""
PACKAGES = """\
Package: lamp
Version: 1
Description: lamp control
Description-md5: aa
Tag: role::program, use::monitor,
 works-with::lamp

Package: untagged
Description-md5: aa

Package: lost
Description-md5: cc
Tag: role::program

Package: horn
Version: 1
Description-md5: aa
Tag: role::program

Package: horn
Version: 2
Description-md5: bb
Tag: role::plugin,
"""
DESCRIPTIONS = """\
Package: lamp
Description-md5: aa
Description-en: lamp control
 Turns lamps.
 .
  * slowly

Package: horn
Description-md5: bb
Description-en: fog horn
 Sounds.
"""


def folder_with(test, **files):
    """A temporary folder with the files named; a double underscore in a name stands for a point."""
    folder = tempfile.TemporaryDirectory()
    test.addCleanup(folder.cleanup)
    for name, content in files.items():
        with open(os.path.join(folder.name, name.replace("__", ".")), "w", encoding="utf-8") as file:
            file.write(content)
    return folder.name


class WordNet(unittest.TestCase):
    """Corpus W."""

    def setUp(self):
        folder = folder_with(self, data__noun=NOUNS, data__verb=VERBS)
        self.items = {item["id"]: item for item in make_w.make(folder)}

    def test_every_synset_with_a_hypernym_is_an_item_of_its_words_and_its_gloss(self):
        self.assertEqual(sorted(self.items), ["n00000020", "n00000030", "n00000040", "n00000050", "v00000020"])
        self.assertEqual(self.items["n00000020"]["title"], "light, lamp")
        self.assertEqual(self.items["n00000020"]["text"], 'what shines; "a light at sea"')
        self.assertEqual(self.items["n00000030"]["title"], "harbour light")

    def test_the_tags_are_all_hypernyms_up_to_the_root_those_of_instances_included(self):
        self.assertEqual(self.items["n00000050"]["tags"],
                         ["n00000010 entity", "n00000020 light", "n00000030 harbour light", "n00000040 light"])

    def test_a_gloss_may_hold_a_bar(self):
        self.assertEqual(self.items["n00000040"]["text"], "a signal | of any kind")

    def test_the_number_of_words_is_read_as_hexadecimal(self):
        self.assertEqual(self.items["v00000020"]["title"], "a, b, c, d, e, f, g, h, i, j, k")
        self.assertEqual(self.items["v00000020"]["tags"], ["v00000010 shine"])


class Packages(unittest.TestCase):
    """Corpus D."""

    def setUp(self):
        release = platform.freedesktop_os_release()["VERSION_CODENAME"]
        archive = f"mirror_dists_{release}_main"
        self.folder = folder_with(self, **{f"{archive}_binary-amd64_Packages": PACKAGES,
                                           f"{archive}_i18n_Translation-en": DESCRIPTIONS,
                                           f"mirror_dists_{release}-updates_main_binary-amd64_Packages": "Package: no"})
        self.items = {item["id"]: item for item in make_d.make(*make_d.find_lists(self.folder))}

    def test_packages_with_tags_and_a_description_are_the_items(self):
        self.assertEqual(sorted(self.items), ["horn", "lamp"])

    def test_title_text_and_tags_come_from_name_description_and_tag_field(self):
        self.assertEqual(self.items["lamp"], {
            "id": "lamp", "title": "lamp: lamp control", "text": "Turns lamps.\n\n * slowly",
            "tags": ["role::program", "use::monitor", "works-with::lamp"]})

    def test_of_two_versions_of_a_package_the_last_counts(self):
        self.assertEqual(self.items["horn"]["tags"], ["role::plugin"])

    def test_a_folder_without_lists_ends_with_69_and_a_sentence(self):
        with contextlib.redirect_stderr(io.StringIO()) as said, self.assertRaises(SystemExit) as ended:
            make_d.find_lists(folder_with(self))
        self.assertEqual(ended.exception.code, 69)
        self.assertIn("Corpus D was not made", said.getvalue())


class Written(unittest.TestCase):
    """The file of a corpus."""

    ITEMS = [{"id": f"entry-{n}", "title": "", "text": "gale", "tags": ["weather"]} for n in range(6)]

    def write(self, items):
        path = os.path.join(folder_with(self), "deep", "X.jsonl")
        with contextlib.redirect_stdout(io.StringIO()) as said:
            corpus.write("X", items, path)
        with open(path, "rb") as file:
            return file.read(), said.getvalue()

    def test_the_order_is_fixed_whatever_the_order_in_which_the_items_came(self):
        """By sha256sum: the digests of '1entry-0' to '1entry-5', sorted."""
        written, _ = self.write(self.ITEMS)
        self.assertEqual(written, self.write(self.ITEMS[::-1])[0])
        self.assertEqual([json.loads(line)["id"][-1] for line in written.splitlines()], list(ORDER))

    def test_the_line_tells_counts_and_checksum_of_the_file(self):
        written, said = self.write(self.ITEMS)
        self.assertIn("X: 6 items, 1 tags, 1.000 tags an item", said)
        self.assertIn(hashlib.sha256(written).hexdigest(), said)

    def test_what_the_wire_would_refuse_is_refused(self):
        for tag in ("", "x" * 256, "a\u0301", "a\nb"):
            with self.subTest(tag=tag), self.assertRaises(ValueError):
                self.write([{"id": "1", "title": "", "text": "", "tags": [tag]}])
        with self.assertRaises(ValueError):
            self.write(self.ITEMS + self.ITEMS[:1])


ORDER = "203145"

if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
