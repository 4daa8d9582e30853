#!/usr/bin/python3
"""That the values which test_standing_reference.c compares with are those that scikit-learn and figures.py give."""
import os
import re
import sys
import unittest

import python_tests
import standing_values

HEADER = os.path.join(os.path.dirname(os.path.abspath(__file__)), "standing_values.h")


def numbers(text):
    return [float(number) for number in re.findall(r"-?\d+\.\d+|(?<= )\d+(?=,\n)", text)]


class Values(unittest.TestCase):
    """Kept values, computed again."""

    def test_the_values_kept_are_those_computed(self):
        with open(HEADER, encoding="utf-8") as file:
            kept = numbers(file.read())
        self.assertEqual(len(kept), 4 * 13)
        for was, now in zip(kept, numbers(standing_values.header()), strict=True):
            self.assertAlmostEqual(was, now, places=12)


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
