"""What a part of the benchmark has to say: its lines, each ratio with its target and whether that is kept."""


class Lines:
    """Printed as they come; `targets` keeps what was judged, `values` what was measured."""

    def __init__(self, part):
        self.part, self.targets, self.values = part, [], {}

    def say(self, text=""):
        """A line that judges nothing."""
        print(f"        {text}".rstrip(), flush=True)

    def keep(self, **values):
        """Figures for the file, not for the reader."""
        self.values.update(values)

    def at_least(self, name, reached, least, form="{:.2f}"):
        """A figure that should not be lower."""
        self._judge(name, reached, f"at least {form.format(least)}", reached >= least, form)

    def at_most(self, name, reached, most, form="{:.2f}"):
        """A figure that should not be higher."""
        self._judge(name, reached, f"at most {form.format(most)}", reached <= most, form)

    def failed(self, text):
        """The part could not be measured."""
        self.targets.append({"part": self.part, "name": text, "kept": False})
        print(f"FAILED  {text}", flush=True)

    def _judge(self, name, reached, target, kept, form):
        self.targets.append({"part": self.part, "name": name, "reached": float(reached), "target": target,
                             "kept": bool(kept)})
        print(f"{'kept' if kept else 'MISSED':<8}{name}: {form.format(reached)}, target {target}", flush=True)
