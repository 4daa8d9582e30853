"""A corpus as the trial takes it: the first 80 % of the items to learn, the last 20 % to ask about."""

import hashlib
import json

import numpy as np
from scipy import sparse


class Split:
    """Items, tags by number, and the tags given as sparse matrices of items × tags."""

    def __init__(self, path):
        with open(path, "rb") as file:
            data = file.read()
        self.sha256 = hashlib.sha256(data).hexdigest()
        items = [json.loads(line) for line in data.splitlines()]
        learned = len(items) * 8 // 10
        self.train, self.test = items[:learned], items[learned:]
        self.tags = sorted({tag for item in items for tag in item["tags"]})
        self.numbers = {tag: number for number, tag in enumerate(self.tags)}
        self.truth_train, self.truth_test = self._truth(self.train), self._truth(self.test)
        self.counts = self.truth_train.getnnz(axis=0)

    def _truth(self, items):
        """Which items have which tags."""
        pairs = [(row, self.numbers[tag]) for row, item in enumerate(items) for tag in item["tags"]]
        rows, columns = zip(*pairs)
        return sparse.csr_matrix((np.ones(len(pairs), dtype=bool), (rows, columns)),
                                 shape=(len(items), len(self.tags)))
