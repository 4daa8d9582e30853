"""The tables of a trial, for people."""

import figures

COLUMNS = ("P@1", "P@3", "P@5", "nDCG@5", "PSP@1", "PSP@3", "PSP@5", "R@10", "found@10", "macro R@10")
GAINS = (("tail", "found@10"), ("all", "PSP@5"), ("all", "macro R@10"))
BATCH_NAMES = {"weighted": "batch, 2/p − 1", "plain": "batch, plain"}
BANDS = ("all", *figures.BANDS)


def shown(value):
    """A figure to three places; a dash where a band is empty."""
    return "–" if value is None else f"{value:.3f}".replace("0.", ".", 1) if value < 1 else f"{value:.2f}"


def cell(column, text):
    """A cell as wide as the column's name asks."""
    return f"{text:>{max(len(column) + 1, 6)}}"


def figure_row(name, band, values):
    """One line of the table of figures."""
    cells = [cell(column, shown(values and values.get(column))) for column in COLUMNS]
    pairs = f"{values['pairs']:,}" if values else "0"
    return f"{name:<15}{band:<6}{pairs:>8}" + "".join(cells)


def figure_table(by_learner):
    """The figures of each learner, overall and by band."""
    lines = [f"{'':<15}{'band':<6}{'pairs':>8}" + "".join(cell(column, column) for column in COLUMNS)]
    for name, by_band in by_learner.items():
        lines += [figure_row(name if band == "all" else "", band, by_band[band]) for band in BANDS]
    return lines


def chance_table(chances):
    """How far the chances of the drafts' candidates are from what was given, and from given over p."""
    lines = [f"{'chance':<15}{'band':<6}{'pairs':>8}{'mean':>8}{'given':>8}{'given/p':>8}{'ECE':>8}{'ECE /p':>8}"]
    for band, values in chances.items():
        cells = [shown(values[name]) for name in ("mean", "given", "corrected", "error", "corrected_error")]
        lines.append(f"{'':<15}{band:<6}{values['pairs']:>8,}" + "".join(f"{text:>8}" for text in cells))
    return lines


def gain_lines(corrected, uncorrected):
    """What the correction for missing tags gains, where both were tried."""
    for band, figure in GAINS if uncorrected else ():
        if not corrected[band] or not uncorrected[band]:
            continue
        name = figure if band == "all" else f"{figure} of the {band}"
        with_it, without = corrected[band][figure], uncorrected[band][figure]
        change = f", {with_it / without - 1:+.1%}" if without > 0 else ""
        yield f"gain of the correction, {name}: {shown(with_it)} against {shown(without)}{change}"


def floor_lines(floors):
    """What each floor asks and what was reached."""
    for floor in floors:
        name = floor["figure"] if floor["band"] == "all" else f"{floor['figure']} of the {floor['band']}"
        name += f", {floor['of']}" if floor["of"] else ""
        verdict = "kept" if floor["kept"] else "MISSED"
        yield f"floor {name}: {shown(floor['least'])}, reached {shown(floor['reached'])}: {verdict}"


def lines(name, result):
    """All that is printed about one corpus."""
    yield (f"{name}: {result['learned']:,} items learned in order, {result['asked']:,} asked without their tags, "
           f"{result['tags']:,} tags, settings {' '.join(result['settings']) or 'default'}")
    yield (f"filed in {result['filed_s']:.1f} s, learned in {result['learned_s']:.1f} s, "
           f"asked in {result['asked_s']:.1f} s (this client's time included)")
    rehearsed = result["rehearsed"] or {"figures": None}
    if rehearsed["figures"]:
        yield f"rehearsed in {rehearsed['seconds']:.1f} s, after a restart"
    again = {"rehearsed": rehearsed["figures"]} if rehearsed["figures"] else {}
    uncorrected = {"uncorrected": result["uncorrected"]} if result["uncorrected"] else {}
    yield from figure_table({"undertag": result["undertag"], **again, **uncorrected,
                             **{BATCH_NAMES[kind]: kept["figures"] for kind, kept in result["batch"].items()}})
    yield "found@10: share of all pairs in the top 10; the tail's is the figure 'tail'. Pairs: item and given tag."
    yield "macro R@10: mean over the tags of the share of their pairs found in the top 10."
    for kind, kept in result["batch"].items():
        yield f"{BATCH_NAMES[kind]}: liblinear, all training items at once, {kept['seconds']:,.0f} s when it was solved"
    if not result["batch"]:
        yield f"batch: no figures kept for this corpus and these features; --reference --corpus {name} solves it."
    yield from chance_table(result["chances"])
    yield from gain_lines(result["undertag"], result["uncorrected"])
    yield from floor_lines(result["floors"])
