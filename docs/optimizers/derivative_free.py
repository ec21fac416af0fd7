#!/usr/bin/env python3
"""A derivative-free minimiser on the `loss` of scores.csv: the next settings to print.

    derivative_free.py results/scores.csv        (made with laygauge score --loss)

A minimiser asks for the loss at any settings, at once; a print takes an hour. So it is given a
smooth surface through the table; after the next batch the table is longer and the surface truer.
Needs NLopt (Debian: python3-nlopt).
"""

import csv
import sys

import nlopt
import numpy as np
from scipy.linalg import solve
from scipy.spatial.distance import cdist

SETTINGS = ["line_width_mm", "flow_pct", "speed_mm_s"]
LOW = np.array([0.36, 88.0, 40.0])
HIGH = np.array([0.52, 106.0, 180.0])
REACH = 0.6  # over which share of the range one coupon tells about its neighbours

with open(sys.argv[1], newline="", encoding="utf-8") as file:
    rows = list(csv.DictReader(file))
# `retake` and `empty` rows have no loss: they are left out, not set to 0 (the best) or 9 (the
# worst). Failed coupons have a loss near 9 and stay.
known = [r for r in rows if r["status"] == "ok" and all(r[name] for name in SETTINGS)]
again = [f"{r['batch']} {r['well']}" for r in rows if r["status"] == "retake"]
print(f"{len(known)} coupons; to be photographed again: {', '.join(again) or 'none'}")

x = (np.array([[float(r[name]) for name in SETTINGS] for r in known]) - LOW) / (HIGH - LOW)
loss = np.array([float(r["loss"]) for r in known])
variance = np.array([float(r["score_sd"]) for r in known]) ** 2  # of the loss too

# Kernel ridge regression: each coupon gives way by its own noise.
height = max(loss.var(), 0.01)
closeness = height * np.exp(-0.5 * (cdist(x, x) / REACH) ** 2)
weights = solve(closeness + np.diag(variance), loss - loss.mean(), assume_a="pos")


def surface(at, gradient):  # nlopt passes an empty gradient to a derivative-free method
    near = height * np.exp(-0.5 * (cdist([at], x) / REACH) ** 2)
    return float(loss.mean() + (near @ weights)[0])


minimiser = nlopt.opt(nlopt.LN_BOBYQA, 3)
minimiser.set_min_objective(surface)
minimiser.set_lower_bounds(np.zeros(3))
minimiser.set_upper_bounds(np.ones(3))
minimiser.set_xtol_rel(1e-4)
minimiser.set_maxeval(500)
best = minimiser.optimize(x[loss.argmin()].clip(0, 1))
following = LOW + best * (HIGH - LOW)
print("next: " + ", ".join(f"{n} {v:.4g}" for n, v in zip(SETTINGS, following)))
print(f"expected there: loss {minimiser.last_optimum_value():.2f}, after "
      f"{minimiser.get_numevals()} questions")
