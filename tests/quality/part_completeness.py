"""How complete the tagging is said to be, against how complete it is, after a thousand random checks.

The share of a tag: pairs on record over true pairs, among the items filed; what the checks found is on record. Overall
only tags that are known count; the share among all true pairs, tags that nobody has used yet included, stands beside.
"""

import numpy as np

import editors
import figures

CHECKS, SEED = 1000, 11
LEAST_ITEMS = 10  # that visibly have a tag before the checks
HELD, OVERALL = 0.85, 0.02


def on_record(corpus, checked):
    """How many pairs of each tag are on record once the items `checked` are complete."""
    rows = np.fromiter((corpus.rows[identity] for identity in checked), dtype=int)
    return corpus.counts + corpus.hidden_train[rows].getnnz(axis=0)


def asked_for(connection, tags):
    """What desk.completeness says of each of the tags, by name, and its answer for the desk."""
    answer = connection.call("desk.completeness")
    said = {}
    for tag, one in zip(tags, connection.pipelined("desk.completeness", ({"tag": tag} for tag in tags))):
        said[tag] = next(entry for entry in one["tags"] if entry["tag"] == tag)
    return answer, said


def held(said, shares, tags):
    """How many tags have their true share in the interval, how many lie above and below it, and the mean width."""
    inside = above = below = 0
    widths = []
    for tag, share in zip(tags, shares):
        low, high = said[tag]["low"], said[tag]["high"]
        if low is None:
            continue
        inside, above, below = inside + (low <= share <= high), above + (share > high), below + (share < low)
        widths.append(high - low)
    return inside, above, below, float(np.mean(widths)) if widths else None


def interval(said):
    """A share and its interval; one of which nothing is known is a dash."""
    return "–" if said["share"] is None else f"{said['share']:.4f} ({said['low']:.4f} to {said['high']:.4f})"


def run(connection, corpus, verdicts, _):
    """A thousand checks, then every tag that has enough items."""
    checked = set()
    editors.check(connection, CHECKS, SEED, lambda identity: corpus.complete(corpus.rows[identity]), checked)
    record, complete = on_record(corpus, checked), corpus.truth_train.getnnz(axis=0)
    numbers = np.flatnonzero(corpus.counts >= LEAST_ITEMS)
    tags = [corpus.tags[number] for number in numbers]
    answer, said = asked_for(connection, tags)
    inside, above, below, width = held(said, record[numbers] / complete[numbers], tags)
    verdicts.say(f"curve {answer.get('curve')}, checks {answer['checks']}")
    verdicts.value("intervals", {"tags": len(tags), "held": inside, "above": above, "below": below, "width": width})
    verdicts.at_least(f"share of {len(tags):,} tags in their 90 % interval ({above} above, {below} below, mean width "
                      f"{width or 0:.3f})", inside / len(tags), HELD)
    truth, overall = record.sum() / complete.sum(), answer["overall"]
    for band in figures.BANDS:
        mask = figures.band_mask(corpus.counts, band)
        verdicts.say(f"{band}: {interval(answer['bands'][band])}, truth {record[mask].sum() / complete[mask].sum():.4f}")
    unknown = corpus.split.truth_train.nnz - complete.sum()
    verdicts.say(f"with the {unknown:,} pairs of tags that nobody has used: {record.sum() / (complete.sum() + unknown):.4f}")
    verdicts.at_most(f"overall: {interval(overall)}, truth {truth:.4f}, off by",
                     None if overall["share"] is None else abs(overall["share"] - truth), OVERALL)
