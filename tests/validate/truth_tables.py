"""Tables of what was measured on the sample plates beside their truth."""

import math
from statistics import median

from figures import gap_within, rank
from run_program import DEVELOPED_ON, LESS_USED, PLATES, number, record

HALVES = [DEVELOPED_ON, LESS_USED, PLATES]
HEADER = "| what | promised | " + " | ".join(
    [" ".join(DEVELOPED_ON), " ".join(LESS_USED), "together"]) + " |\n| --- | --- | --- | --- | --- |"


def _row(name, promised, figures):
    return f"| {name} | {promised} | " + " | ".join(figures) + " |"


class Measured:
    """The coupons of some plates: rows of the table with their truth."""

    def __init__(self, rows, truths, plates):
        self.pairs = [(rows[coupon], truths[coupon]) for coupon in truths if coupon[0] in plates]

    def of_kind(self, *kinds):
        return [pair for pair in self.pairs if pair[1]["kind"] in kinds]

    def whole(self):
        """Coupons that did not fail."""
        return self.of_kind("raster", "ironed")

    def values(self, pairs, column, true):
        return [(number(row[column]), told[true]) for row, told in pairs]

    def rank(self, column, true):
        pairs = self.values(self.whole(), column, true)
        kept = [pair for pair in pairs if pair[0] is not None]
        return f"{rank(kept):.3f} ({len(kept)})"

    def errors(self, column, true):
        return [abs(measured - told) for measured, told in
                self.values(self.of_kind("raster"), column, true)]


def _placement_errors(measured):
    centres = [math.hypot(number(row["center_x_mm"]) - told["at_mm"][0],
                          number(row["center_y_mm"]) - told["at_mm"][1])
               for row, told in measured.pairs]
    turns = [abs(number(row["turn_deg"]) - told["turn_deg"]) for row, told in measured.pairs]
    return max(centres), max(turns)


def _pitch_errors_pct(measured):
    return [100 * abs(one / told - 1) for one, told in
            measured.values(measured.of_kind("raster"), "pitch_mm", "pitch_mm")]


def chain_table(rows, truths, folder):
    """The chain: finding, camera, placement, pitch, lay."""
    halves = [(Measured(rows, truths, plates), plates) for plates in HALVES]

    def across(figure):
        return [figure(measured, plates) for measured, plates in halves]

    def reprojection(_, plates):
        return f"{max(record(folder, plate)['camera']['rms_px'] for plate in plates):.3f}"

    def found(measured, _):
        return f"{sum(row['status'] == 'ok' for row, _ in measured.pairs)} of {len(measured.pairs)}"

    return "\n".join([
        HEADER,
        _row("coupons found and measured", "all", across(found)),
        _row("reprojection, root mean square, worst photo (px)", "0.3", across(reprojection)),
        _row("coupon's centre, worst (mm)", "0.10",
             across(lambda m, _: f"{_placement_errors(m)[0]:.3f}")),
        _row("coupon's turn, worst (°)", "0.2",
             across(lambda m, _: f"{_placement_errors(m)[1]:.3f}")),
        _row("pitch, median error (%)", "0.15",
             across(lambda m, _: f"{median(_pitch_errors_pct(m)):.3f}")),
        _row("pitch, worst error (%)", "0.4",
             across(lambda m, _: f"{max(_pitch_errors_pct(m)):.3f}")),
        _row("lay, worst error (°)", "0.3",
             across(lambda m, _: f"{max(m.errors('lay_deg', 'lay_deg')):.3f}")),
    ])


def _gaps_within(measured):
    pairs = measured.values(measured.whole(), "gap_area_pct", "gap_area_pct")
    return f"{sum(gap_within(*pair) for pair in pairs)} of {len(pairs)}"


def _scars(measured):
    """(coupons with 10 mm of scars that show one, false scars for 10 coupons without any)."""
    pairs = measured.values(measured.whole(), "scar_count", "scar_length_mm")
    scarred = [count for count, told in pairs if told >= 10]
    clean = [count or 0 for count, told in pairs if told == 0]
    found = sum((count or 0) >= 0.5 for count in scarred)
    return f"{found} of {len(scarred)}", f"{10 * sum(clean) / len(clean):.1f} ({len(clean)})"


def _failures(measured):
    """A coupon is called failed where the chief fault says so."""
    failed = measured.of_kind("delaminated")
    found = sum(row["fault"] == "failed" for row, _ in failed)
    false = sum(row["fault"] == "failed" for row, _ in measured.whole())
    return f"{found} of {len(failed)}", f"{false} of {len(measured.whole())}"


def metrics_table(rows, truths):
    """The metrics: gaps, scars, blobs, wall gaps, ridges, failure."""
    halves = [Measured(rows, truths, plates) for plates in HALVES]

    def across(figure):
        return [figure(measured) for measured in halves]

    ranks = [("gap area", "0.95", "gap_area_pct", "gap_area_pct"),
             ("scar length", "0.85", "scar_length_mm", "scar_length_mm"),
             ("blobs", "0.85", "blob_count_per_cm2", "blobs"),
             ("wall gap's width", "0.85", "wall_gap_mean_mm", "ring_gap_mm"),
             ("ridge height", "0.85", "ridge_um", "ridge_um")]
    lines = [HEADER]
    for name, promised, column, true in ranks:
        lines.append(_row(f"{name}, rank correlation (coupons)", promised,
                          across(lambda m, c=column, t=true: m.rank(c, t))))
    lines += [
        _row("gap area within 0.5 percentage points or 25 %", "9 of 10", across(_gaps_within)),
        _row("coupons with scars of 10 mm or more found", "9 of 10",
             across(lambda m: _scars(m)[0])),
        _row("false scars for 10 coupons without any (coupons)", "1",
             across(lambda m: _scars(m)[1])),
        _row("failed coupons found", "all", across(lambda m: _failures(m)[0])),
        _row("others called failed", "none", across(lambda m: _failures(m)[1])),
    ]
    return "\n".join(lines)
