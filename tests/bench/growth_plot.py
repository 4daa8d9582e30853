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
    """One panel a quantity, both scales logarithmic; False without matplotlib."""
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


def draw_panel(axis, rows, title, unit, columns):
    """The columns as lines; the thin line shows what growth in proportion to the items would be."""
    items = [row["items"] for row in rows]
    start = rows[0][columns[0][0]]
    axis.plot(items, [start * count / items[0] for count in items], color=LINES, linewidth=1, linestyle="--",
              label="in proportion to items")
    for column, label, colour in columns:
        values = [row[column] for row in rows]
        axis.plot(items, values, color=colour, marker="o", markersize=4, linewidth=1.6, label=label)
        axis.annotate(f"{values[-1]:,.0f} {unit}", (items[-1], values[-1]), textcoords="offset points",
                      xytext=(-4, 7), ha="right", fontsize=9, color=colour)
    axis.set_xscale("log")
    axis.set_yscale("log")
    for side in (axis.xaxis, axis.yaxis):
        side.set_major_formatter(lambda value, _: f"{value:,.0f}")
        side.set_minor_formatter(lambda value, _: "")
    axis.set_title(f"{title}, {unit}", fontsize=11, loc="left")
    axis.set_xlabel("items filed")
    axis.set_facecolor(GROUND)
    axis.spines[["top", "right"]].set_visible(False)
    axis.spines[["left", "bottom"]].set_color(LINES)
    axis.legend(frameon=False, fontsize=9, loc="upper left")
