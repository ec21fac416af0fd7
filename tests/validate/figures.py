"""The figures: errors against truth, ranks, differences over spreads."""

import math

from scipy.stats import spearmanr

from run_program import number

FEWEST = 10  # coupons, for a spread


def rank(pairs):
    """Spearman's rank correlation of (measured, true) pairs; unmeasured ones are left out."""
    kept = [pair for pair in pairs if pair[0] is not None]
    return spearmanr(*zip(*kept))[0]


def gap_within(measured, true):
    """Within 0.5 percentage points or 25 %, whichever is larger."""
    return measured is not None and abs(measured - true) <= max(0.5, 0.25 * true)


def spread(rows, column):
    """Standard deviation of a column over all coupons of all plates; 0 where few have it."""
    values = [value for row in rows.values() if (value := number(row[column])) is not None]
    if len(values) < FEWEST:
        return 0.0
    mean = math.fsum(values) / len(values)
    return math.sqrt(math.fsum((value - mean) ** 2 for value in values) / (len(values) - 1))


def difference(column, one, other):
    """Of two cells; None if one is empty. Directions of lines are alike after half a turn."""
    if one is None or other is None:
        return None
    if column.endswith("lay_deg"):
        return abs(math.remainder(one - other, 180))
    return abs(one - other)


def differences(column, pairs):
    """(differences of the pairs of rows, number of pairs of which one alone has a value)."""
    cells = [(number(one[column]), number(other[column])) for one, other in pairs]
    found = [d for one, other in cells if (d := difference(column, one, other)) is not None]
    return found, sum((one is None) != (other is None) for one, other in cells)
