"""The features that the batch solver sees: those of the daemon's default settings, made in plain Python.

Terms: words after NFKC and case folding, cut by the rules of UAX #29 that matter for words (WB5 to WB12). A word
of the title counts TITLE_WEIGHT times. x = (1 + ln tf) · ln(1 + N/n), L2-normalised (Salton & Buckley 1988), with
N and n from the training items; a term that no training item holds counts nothing.
"""

import collections
import math
import re
import unicodedata

import numpy as np
from scipy import sparse

TITLE_WEIGHT = 1.5
DESCRIPTION = f"words as UAX29, NFKC, case folded, title {TITLE_WEIGHT}, (1 + ln tf) ln(1 + N/n), L2, bias 1"

LETTERS = r"[^\W\d]"
WORD = re.compile(rf"(?=_*[^\W_])\w+(?:(?<={LETTERS})['.:·]{LETTERS}\w*|(?<=\d)[.,;']\d\w*)*")


def words(text):
    """The words of a text, as counted; both apostrophes are one."""
    return WORD.findall(unicodedata.normalize("NFKC", text).casefold().replace("’", "'"))


def frequencies(item):
    """How often each term counts in an item."""
    counts = collections.Counter(words(item.get("text", "")))
    for word in words(item.get("title", "")):
        counts[word] += TITLE_WEIGHT
    return counts


def weight(frequency):
    """1 + ln tf, and tf itself below 1."""
    return frequency if frequency < 1 else 1 + math.log(frequency)


def matrix(items, numbers):
    """Items × terms, of the terms that `numbers` knows, before idf."""
    rows, columns, values = [], [], []
    for row, item in enumerate(items):
        for term, frequency in frequencies(item).items():
            if term in numbers:
                rows.append(row)
                columns.append(numbers[term])
                values.append(weight(frequency))
    return sparse.csr_matrix((values, (rows, columns)), shape=(len(items), len(numbers)))


def normalised(x):
    """Each row divided by its Euclidean norm; an empty row stays empty."""
    norms = np.sqrt(np.asarray(x.multiply(x).sum(axis=1)).ravel())
    return sparse.diags(1.0 / np.where(norms > 0, norms, 1.0)) @ x


def with_bias(x):
    """A last column of ones, so that the bias is learned like a weight."""
    return sparse.hstack([x, np.ones((x.shape[0], 1))]).tocsr()


def extract(train, test):
    """The features of training and test items."""
    numbers = {term: i for i, term in enumerate(sorted({term for item in train for term in frequencies(item)}))}
    x_train, x_test = matrix(train, numbers), matrix(test, numbers)
    idf = sparse.diags(np.log1p(len(train) / x_train.getnnz(axis=0)))
    return with_bias(normalised(x_train @ idf)), with_bias(normalised(x_test @ idf))
