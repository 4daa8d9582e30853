"""What the Python tests share: where the modules under test are, a small corpus, and the closing line."""
import json
import os
import sys
import unittest

TESTS = os.path.dirname(os.path.dirname(os.path.abspath(__file__)))
sys.dont_write_bytecode = True
for folder in ("corpora", "quality"):
    sys.path.insert(0, os.path.join(TESTS, folder))


def write_corpus(path, seed):
    """Sixty logbook entries, each with the one tag that its text names, in turn; another first for each seed."""
    with open(path, "w", encoding="utf-8") as file:
        for number in range(60):
            word = ("gale", "lamp", "oil")[(number + seed) % 3]
            file.write(json.dumps({"id": f"entry-{number}", "title": "", "text": f"{word} today", "tags": [word]}) + "\n")


def run(module):
    """Runs the tests of a module, prints the closing line, and ends with 1 when one failed."""
    suite = unittest.defaultTestLoader.loadTestsFromModule(module)
    result = unittest.TextTestRunner(verbosity=2).run(suite)
    failed = len(result.failures) + len(result.errors)
    print(f"{result.testsRun - failed} passed, {failed} failed")
    sys.exit(1 if failed or result.testsRun == 0 else 0)
