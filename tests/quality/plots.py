"""Pictures of the figures, where matplotlib is there to draw them."""

import os

import numpy as np

COLOURS = {"all": "#22313f", "head": "#1f6f8b", "torso": "#c77b1e", "tail": "#8d5a97"}
GROUND, LINES, BINS = "#fbf8f1", "#b9b2a3", 20
LEAST_IN_BIN = 50


def points(chances, targets):
    """Mean chance and share that came true of each bin that holds enough."""
    place = np.minimum((chances * BINS).astype(int), BINS - 1)
    size = np.bincount(place, minlength=BINS)
    kept = size >= LEAST_IN_BIN
    return tuple(np.bincount(place, weights=values, minlength=BINS)[kept] / size[kept] for values in (chances, targets))


def reliability(path, panels):
    """One panel a name, one line a band, {name: {band: (chances, targets)}}; False without matplotlib."""
    try:
        import matplotlib  # only quality needs it, and the figures do without
    except ImportError:
        return False
    matplotlib.use("Agg")
    from matplotlib import pyplot
    figure, axes = pyplot.subplots(1, len(panels), figsize=(4.6 * len(panels), 4.8), squeeze=False, facecolor=GROUND)
    for axis, (name, by_band) in zip(axes[0], panels.items()):
        draw_panel(axis, name, by_band)
    axes[0][0].set_ylabel("share that is true")
    figure.tight_layout()
    os.makedirs(os.path.dirname(path) or ".", exist_ok=True)
    figure.savefig(path, dpi=120, facecolor=GROUND)
    pyplot.close(figure)
    return True


def draw_panel(axis, name, by_band):
    """Chance against truth; a chance that holds lies on the diagonal."""
    axis.plot([0, 1], [0, 1], color=LINES, linewidth=1, zorder=1)
    for band, (chances, targets) in by_band.items():
        axis.plot(*points(chances, targets), color=COLOURS[band], marker="o", markersize=3.5, linewidth=1.4, label=band)
    axis.set_title(name, fontsize=11, loc="left")
    axis.set_xlabel("mean chance")
    axis.set_xlim(0, 1)
    axis.set_ylim(0, 1)
    axis.set_aspect("equal")
    axis.set_facecolor(GROUND)
    axis.spines[["top", "right"]].set_visible(False)
    axis.spines[["left", "bottom"]].set_color(LINES)
    axis.legend(frameon=False, fontsize=9, loc="upper left")
