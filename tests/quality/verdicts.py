"""What a part of the trial has to say: lines for people, figures for a file, and floors that are kept or missed."""

WORDS = {"least": "at least", "most": "at most", "above": "above"}


class Verdicts:
    """The lines are printed as they come; `floors` and `values` are for what follows."""

    def __init__(self, part):
        self.part, self.floors, self.values = part, [], {}

    def say(self, text):
        """A line that judges nothing."""
        print(f"        {text}", flush=True)

    def value(self, name, value, text=None):
        """Keeps a figure, and says it where there is a text for it."""
        self.values[name] = value
        if text:
            self.say(text)

    def at_least(self, name, reached, least):
        """A figure that must not be lower."""
        self._judge(name, reached, "least", least, reached is not None and reached >= least)

    def at_most(self, name, reached, most):
        """A figure that must not be higher."""
        self._judge(name, reached, "most", most, reached is not None and reached <= most)

    def above(self, name, reached, other):
        """A figure that must be higher than another."""
        self._judge(name, reached, "above", other, reached is not None and reached > other)

    def failed(self, text):
        """The part could not be carried out."""
        self.floors.append({"figure": f"{self.part}: {text}", "reached": None, "kept": False})
        print(f"MISSED  {text}", flush=True)

    def _judge(self, name, reached, word, bound, kept):
        floor = {"figure": f"{self.part}: {name}", word: float(bound), "reached": reached, "kept": bool(kept)}
        self.floors.append(floor)
        shown = "–" if reached is None else f"{reached:.4f}"
        print(f"{'kept' if kept else 'MISSED':<8}{name}: {shown}, {WORDS[word]} {bound:.4f}", flush=True)
