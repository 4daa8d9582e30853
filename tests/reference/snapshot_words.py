"""The terms of an item, by a snapshot's text.json and nothing else: its `steps` in Python.

Of Unicode's tables only two come from Python (unicodedata, str.casefold): the normal form NFKC and case folding. They
never change for a code point that has been assigned, so a Python with an older Unicode than text.json's can differ in
the code points that came between alone. Debian 12's has 14.0 where undertag's utf8proc has 15.0: that is a difference
in 62 of them, modifier letters from U+1E030 on.
"""

import bisect
import collections
import functools
import re
import unicodedata

# Values of Word_Break that the rules of UAX #29 name together.
LETTERS = {"ALetter", "Hebrew_Letter"}
WORDLIKE = LETTERS | {"Numeric"}
BETWEEN_LETTERS = {"MidLetter", "MidNumLet", "Single_Quote"}
BETWEEN_NUMBERS = {"MidNum", "MidNumLet", "Single_Quote"}
CONNECTED = WORDLIKE | {"Katakana", "ExtendNumLet"}
NEWLINES = {"CR", "LF", "Newline"}
ATTACHED = {"Extend", "Format", "ZWJ"}

# A word of a run, where it stands in it in bytes, and whether a stemmer may have it; the word is None where one is
# passed over.
Word = collections.namedtuple("Word", "word start end may_be_stemmed")


class Ranges:
    """What code points have, by ranges of them: [first, last] and a value."""

    def __init__(self, values):
        self.ranges = sorted((first, last, value) for value, ranges in values.items() for first, last in ranges)
        self.firsts = [first for first, _, _ in self.ranges]
        self.get = functools.lru_cache(maxsize=None)(self._get)

    def _get(self, char):
        """The value of a character; None where it has none."""
        at = bisect.bisect(self.firsts, ord(char)) - 1
        return self.ranges[at][2] if at >= 0 and ord(char) <= self.ranges[at][1] else None


# --- word boundaries ---------------------------------------------------------------------------------------------------

class Boundaries:
    """The word boundaries of Unicode Standard Annex #29, in its own words: `×` is joined, `÷` is a boundary."""

    def __init__(self, words):
        self.word_break = Ranges(words["word_break"])
        self.pictographic = Ranges({True: words["extended_pictographic"]})

    def pieces(self, text):
        """The text cut at its boundaries."""
        values = [self.word_break.get(char) for char in text]
        # WB4: what is attached counts as one with what it stands behind, unless that is a newline.
        heads = [at for at, value in enumerate(values)
                 if at == 0 or value not in ATTACHED or values[at - 1] in NEWLINES]
        padded = [None, None, *(values[at] for at in heads), None]
        here = [at > 0 and self._joined_here(text, values, at) for at in heads] + [False]
        starts = [at for place, at in enumerate(heads)
                  if at == 0 or not (here[place] or joined(padded, place + 2, not here[place + 1]))]
        return [text[start:end] for start, end in zip(starts, starts[1:] + [len(text)])]

    def _joined_here(self, text, values, at):
        """The rules about characters that stand side by side."""
        before, after = values[at - 1], values[at]
        return (before == "CR" and after == "LF"                                  # WB3
                or before == "ZWJ" and bool(self.pictographic.get(text[at]))      # WB3c
                or before == after == "WSegSpace")                                # WB3d


def joined(values, at, may_look_ahead):
    """The rules about what is left when attached characters are passed over: is values[at] joined with what is before?

    What WB3c joins is not looked at from before it, as step 2 of text.json says.
    """
    last_but_one, last, this, following = values[at - 2:at + 2]
    following = following if may_look_ahead else None
    if last in CONNECTED and this in CONNECTED:
        return (last in WORDLIKE and this in WORDLIKE                                              # WB5, 8, 9, 10
                or last == this == "Katakana" or "ExtendNumLet" in (last, this))                   # WB13, 13a, 13b
    if last == this == "Regional_Indicator":
        return flags_before(values, at) % 2 == 1                                                   # WB15, 16
    return (last in LETTERS and this in BETWEEN_LETTERS and following in LETTERS                   # WB6
            or last_but_one in LETTERS and last in BETWEEN_LETTERS and this in LETTERS             # WB7
            or last == "Hebrew_Letter" and this == "Single_Quote"                                  # WB7a
            or last == following == "Hebrew_Letter" and this == "Double_Quote"                   # WB7b
            or last_but_one == this == "Hebrew_Letter" and last == "Double_Quote"                  # WB7c
            or last_but_one == this == "Numeric" and last in BETWEEN_NUMBERS                       # WB11
            or last == following == "Numeric" and this in BETWEEN_NUMBERS)                         # WB12


def flags_before(values, at):
    """How many regional indicators stand in a row before values[at]."""
    first = at
    while values[first - 1] == "Regional_Indicator":
        first -= 1
    return at - first


# --- the words of a run ------------------------------------------------------------------------------------------------

class Runs:
    """A text in runs between white space, and the words of a run."""

    def __init__(self, words):
        self.cut = re.compile("[" + re.escape(words["white_space"]) + "]").split
        self.boundaries = Boundaries(words)
        self.in_word = Ranges({True: words["in_word"]})
        self.in_pairs = Ranges({True: words["in_pairs"]})
        self.ignored = Ranges({True: words["fold"]["ignored"]})
        self.replaced = {replaced: by for replaced, by in words["fold"]["replaced"]}
        self.most_bytes = words["most_bytes"]
        self.words = functools.lru_cache(maxsize=1 << 20)(self._words)

    def fold(self, word):
        """A word as it is counted."""
        kept = "".join(char for char in word if not self.ignored.get(char)).translate(self.replaced)
        return unicodedata.normalize("NFKC", kept.casefold())

    def _words(self, run):
        """The run's length in NFKC, in bytes, and its words."""
        run = unicodedata.normalize("NFKC", run)
        found, row, start = [], [], 0
        for piece in self.boundaries.pieces(run) if run else []:
            characters = self._row_characters(piece)
            if characters:
                row += placed(characters, start)
            else:
                found += self._row_words(row)
                row = []
                if any(self.in_word.get(char) for char in piece):
                    found.append(self._word(piece, start, True))
            start += len(piece.encode())
        return start, found + self._row_words(row)

    def _row_characters(self, piece):
        """The characters of a piece that goes into a row, each with what is attached to it; none for any other piece."""
        kinds = [bool(self.in_pairs.get(char)) for char in piece]
        if not any(kinds) or any(self.in_word.get(char) for char, kind in zip(piece, kinds) if not kind):
            return []
        starts = [at for at, kind in enumerate(kinds) if kind or at == 0]
        return [piece[start:end] for start, end in zip(starts, starts[1:] + [len(piece)])]

    def _row_words(self, row):
        """Each two neighbours of a row, or its only character."""
        if len(row) == 1:
            return [self._word(*row[0], False)]
        return [self._word(one + other, start, False) for (one, start), (other, _) in zip(row, row[1:])]

    def _word(self, piece, start, may_be_stemmed):
        """One word, folded; it is passed over where it is too long, or nothing is left of it."""
        written, folded = len(piece.encode()), self.fold(piece)
        is_kept = written <= self.most_bytes["written"] and 0 < len(folded.encode()) <= self.most_bytes["term"]
        return Word(folded if is_kept else None, start, start + written, may_be_stemmed)


def placed(characters, start):
    """Each character with where it begins, in bytes."""
    for character in characters:
        yield character, start
        start += len(character.encode())


# --- stems -------------------------------------------------------------------------------------------------------------

class Stems:
    """Words down to their stems, by the language's code."""

    def __init__(self, words):
        self.settings = words["stemming"]
        self.most_bytes = words["most_bytes"]["term"]
        self.stemmers = {}

    def stemmer(self, language):
        """A function from a word to what is counted of it."""
        code = re.split("[-_]", language or self.settings["language"])[0].lower()
        algorithm = self.settings["algorithms"].get(code) if self.settings["on"] else None
        if algorithm is None:
            return lambda word: word
        if algorithm not in self.stemmers:
            import snowballstemmer  # needed where words are stemmed, and nowhere else
            stem = snowballstemmer.stemmer(algorithm).stemWord
            self.stemmers[algorithm] = functools.lru_cache(maxsize=1 << 20)(lambda word: self._kept(word, stem(word)))
        return self.stemmers[algorithm]

    def _kept(self, word, stem):
        """The stem, or the word where that would be empty or too long."""
        return stem if 0 < len(stem.encode()) <= self.most_bytes else word


# --- an item -----------------------------------------------------------------------------------------------------------

class Terms:
    """The terms of items: `text` is what text.json says."""

    def __init__(self, text):
        self.runs, self.stems = Runs(text["words"]), Stems(text["words"])
        self.pairs = text["words"]["pairs"]
        self.title_weight = text["title_weight"]
        self.most_field_bytes = text["fields"]["most_bytes"]

    def frequencies(self, item):
        """How often each term of an item counts."""
        stem = self.stems.stemmer(item.get("language"))
        counts = collections.Counter(self._of_text(item.get("text", ""), stem))
        for term in self._of_text(item.get("title", ""), stem):
            counts[term] += self.title_weight
        counts.update({term: 1 for term in self._of_fields(item.get("fields", {}))})
        return counts

    def _of_text(self, text, stem):
        """Words, and pairs of words behind their second one."""
        before, last, last_end = 0, None, 0
        for run in self.runs.cut(text):
            run_bytes, words = self.runs.words(run)
            for word, start, end, may_be_stemmed in words:
                term = stem(word) if word and may_be_stemmed else word
                if term:
                    yield term
                if self.pairs["on"] and term and last and before + start <= last_end + self.pairs["gap_bytes"]:
                    yield f"{last} {term}"
                last, last_end = term, before + end
            before += run_bytes + 1  # and the white space

    def _of_fields(self, fields):
        """`name=value`, each once."""
        for name, given in fields.items():
            for value in given if isinstance(given, list) else [given]:
                term = f"{name}={shown(value)}"
                if len(term.encode()) <= self.most_field_bytes:
                    yield term


def shown(value):
    """A field's value as text; a boolean is a number to Python, too."""
    if isinstance(value, bool):
        return "true" if value else "false"
    return "%.17g" % value if isinstance(value, float) else str(value)
