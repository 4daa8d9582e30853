"""How a trial ends: its exit status, and its figures in a file."""

import json

import numpy as np

EX_UNAVAILABLE, EX_SOFTWARE = 69, 70  # sysexits.h


def status(results, wanted):
    """0 when every floor is kept, 1 when one is missed, 69 when fewer corpora were there than `wanted`."""
    if not all(floor["kept"] for result in results.values() for floor in result.get("floors", [])):
        return 1
    return 0 if len(results) == wanted else EX_UNAVAILABLE


def plain(value):
    """A number of numpy as JSON's."""
    if isinstance(value, np.generic):
        return value.item()
    raise TypeError(f"not for JSON: {type(value)}")


def write(path, results):
    """Keeps all results."""
    with open(path, "w", encoding="utf-8") as file:
        json.dump(results, file, indent=1, default=plain)
