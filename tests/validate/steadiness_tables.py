"""Tables of how much each metric moves where the coupon stays the same."""

import tempfile
from pathlib import Path
from statistics import median

from changed_photos import kinds, write_changed
from figures import differences, spread
from run_program import SAMPLES, metric_columns, score

SCORES = ["score"]


def _pairs(rows, one, other):
    wells = [well for plate, well in rows if plate == one]
    return [(rows[one, well], rows[other, well]) for well in wells]


def _judged(worst, limit, lost):
    """A cell: the worst difference over the spread, in bold where it is beyond the limit."""
    text = f"{worst:.2f}"
    if worst >= limit + 0.005:  # beyond it as printed
        text = f"**{text}**"
    return text + (f" ({lost} lost)" if lost else "")


def _summary(judged, limit):
    """Which metrics are beyond the limit, in words."""
    beyond = [f"`{column}`" for column, worst in judged.items() if worst >= limit + 0.005]
    within = len(judged) - len(beyond)
    return (f"{within} of {len(judged)} columns are within it; beyond it: "
            f"{', '.join(beyond) if beyond else 'none'}.")


def _whole(pairs):
    return [pair for pair in pairs if "failed" not in (pair[0]["fault"], pair[1]["fault"])]


def repeatability(rows):
    """(table, sentence on laid anew, sentence on other camera and light)."""
    lines = ["| metric | spread over the plates | laid anew (d2, d7) | "
             "other camera, distance and light (d2, d3) |", "| --- | --- | --- | --- |"]
    anew, other = {}, {}
    for column in metric_columns(rows) + SCORES:
        unit = spread(rows, column)
        if unit == 0:
            continue
        cells = []
        for judged, plate, limit in ((anew, "d7", 0.1), (other, "d3", 0.2)):
            pairs = _pairs(rows, "d2", plate)
            found, lost = differences(column, pairs)
            whole = max(differences(column, _whole(pairs))[0], default=0) / unit
            judged[column] = max(found) / unit
            cells.append(f"{_judged(judged[column], limit, lost)}, {_judged(whole, limit, 0)}, "
                         f"{median(found) / unit:.2f}")
        lines.append(f"| `{column}` | {unit:.3g} | {cells[0]} | {cells[1]} |")
    return "\n".join(lines), _summary(anew, 0.1), _summary(other, 0.2)


def score_steadiness(rows):
    """Standard deviation of one score, laid anew and under another camera and light."""
    lines = []
    for plate, what, promised in (("d7", "laid anew (d2, d7)", 0.08),
                                  ("d3", "other camera, distance and light (d2, d3)", 0.25)):
        steps = [float(one["score"]) - float(other["score"])
                 for one, other in _pairs(rows, "d2", plate)]
        deviation = (sum(step ** 2 for step in steps) / len(steps) / 2) ** 0.5
        lines.append(f"| {what} | {promised} | {deviation:.3f} | {max(map(abs, steps)):.2f} |")
    return ("| the same coupons | promised | standard deviation of a score | "
            "largest difference |\n| --- | --- | --- | --- |\n" + "\n".join(lines))


def _pairs_by_kind(plates):
    pairs = {kind: [] for kind in kinds()}
    for plate in plates:
        path = SAMPLES / f"{plate}.jpg"
        as_taken = score([path])
        with tempfile.TemporaryDirectory() as scratch:
            for kind, changed in write_changed(path, Path(scratch)):
                rows = score([changed])
                pairs[kind] += [(as_taken[coupon], rows[coupon]) for coupon in as_taken]
                changed.unlink()
    return pairs


def invariance(rows, plates):
    """(table, {kind: sentence}) of photos that were changed after they were taken."""
    pairs = _pairs_by_kind(plates)
    lines = ["| metric | " + " | ".join(pairs) + " |", "| --- |" + " --- |" * len(pairs)]
    judged = {kind: {} for kind in pairs}
    for column in metric_columns(rows) + SCORES:
        unit = spread(rows, column)
        if unit == 0:
            continue
        cells = []
        for kind, changed in pairs.items():
            found, lost = differences(column, changed)
            judged[kind][column] = max(found, default=0) / unit
            cells.append(_judged(judged[kind][column], 0.1, lost))
        lines.append(f"| `{column}` | " + " | ".join(cells) + " |")
    lines.append("| score, points | " + " | ".join(
        f"{max(differences('score', changed)[0]):.2f}" for changed in pairs.values()) + " |")
    return "\n".join(lines), {kind: _summary(worst, 0.1) for kind, worst in judged.items()}
