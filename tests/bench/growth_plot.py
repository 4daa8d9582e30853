"""The picture of growth: memory, disk and time against the number of items, where matplotlib is there to draw it."""

from plots import COLOURS, GROUND, LINES

# By panel: title, unit, and the columns with their labels and colours.
PANELS = (
    ("Memory", "MB", (("RssAnon, MB", "of the process (RssAnon)", COLOURS["all"]),
                      ("by state, MB", "of its parts (daemon.state)", COLOURS["torso"]))),
    ("Disk", "MB", (("disk, MB", "store and model", COLOURS["head"]),)),
    ("Time an item", "µs", (("µs an item", "until it is learned", COLOURS["tail"]),)),
)


def draw(path, rows):
    """One panel a quantity; False without matplotlib."""
    try:
        import matplotlib  # only the picture needs it
    except ImportError:
        return False
    matplotlib.use("Agg")
    from matplotlib import pyplot
    figure, axes = pyplot.subplots(1, len(PANELS), figsize=(4.6 * len(PANELS), 4.4), facecolor=GROUND)
    for axis, panel in zip(axes, PANELS):
        draw_panel(axis, rows, *panel)
    figure.tight_layout()
    figure.savefig(path, dpi=120, facecolor=GROUND)
    pyplot.close(figure)
    return True


def mark(side, digits):
    """Marks at these digits of each power of ten, whole numbers with commas."""
    from matplotlib import ticker
    side.set_major_locator(ticker.LogLocator(base=10, subs=digits))
    side.set_minor_locator(ticker.NullLocator())
    side.set_major_formatter(lambda value, _: f"{value:,.0f}")


def draw_panel(axis, rows, title, unit, columns):
    """The columns as lines; where they are bytes, beside growth in proportion to the items."""
    items = [row["items"] for row in rows]
    is_time = columns[0][0] == "µs an item"
    axis.set_xscale("log")
    if not is_time:
        axis.set_yscale("log")
        start = rows[0][columns[0][0]]
        axis.plot(items, [start * count / items[0] for count in items], color=LINES, linewidth=1, linestyle="--",
                  label="in proportion to items")
    for place, (column, label, colour) in enumerate(columns):
        draw_line(axis, items, [row[column] for row in rows], label, colour, unit, -10 * place + 5 * (len(columns) - 1))
    make_room(axis, items, is_time)
    axis.set_title(f"{title}, {unit}", fontsize=11, loc="left")
    axis.set_xlabel("items filed")
    axis.set_facecolor(GROUND)
    axis.spines[["top", "right"]].set_visible(False)
    axis.spines[["left", "bottom"]].set_color(LINES)
    axis.legend(frameon=False, fontsize=9, loc="upper left")


def draw_line(axis, items, values, label, colour, unit, raised):
    """One quantity, its last value written beside its end, a little higher or lower."""
    axis.plot(items, values, color=colour, marker="o", markersize=4, linewidth=1.6, label=label)
    axis.annotate(f"{values[-1]:,.0f} {unit}", (items[-1], values[-1]), textcoords="offset points",
                  xytext=(7, raised), va="center", fontsize=9, color=colour)


def make_room(axis, items, is_time):
    """Above for the legend, to the right for the figures at the ends; and the marks."""
    low, high = axis.get_ylim()
    axis.set_ylim(*((0, high * 1.3) if is_time else (low, high * (high / low) ** 0.35)))
    axis.set_xlim(items[0] * 0.85, items[-1] * (items[-1] / items[0]) ** 0.3)
    mark(axis.xaxis, (1,))
    if not is_time:
        mark(axis.yaxis, (1, 2, 5))
