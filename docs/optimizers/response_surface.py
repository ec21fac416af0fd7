#!/usr/bin/env python3
"""A quadratic response surface by weighted least squares on scores.csv: the best settings inside.

    response_surface.py results/scores.csv

Needs statsmodels (Debian: python3-statsmodels).
"""

import csv
import itertools
import sys

import numpy as np
import statsmodels.api as sm
from scipy.optimize import minimize

SETTINGS = ["line_width_mm", "flow_pct", "speed_mm_s"]
LOW = np.array([0.36, 88.0, 40.0])
HIGH = np.array([0.52, 106.0, 180.0])

with open(sys.argv[1], newline="", encoding="utf-8") as file:
    rows = list(csv.DictReader(file))
# `retake` and `empty` rows have no score; rows without settings cannot be placed. Failed coupons
# are left out of this fit: a cliff would bend the parabola everywhere. They are told instead.
placed = [r for r in rows if r["status"] == "ok" and all(r[name] for name in SETTINGS)]
failed = [r for r in placed if r["fault"] == "failed"]
known = [r for r in placed if r not in failed]
again = [f"{r['batch']} {r['well']}" for r in rows if r["status"] == "retake"]
print(f"{len(known)} coupons; to be photographed again: {', '.join(again) or 'none'}")
for r in failed:
    print("failed at " + ", ".join(f"{name} {r[name]}" for name in SETTINGS))


def coded(settings):
    return (settings - (LOW + HIGH) / 2) / ((HIGH - LOW) / 2)  # -1 to 1


def terms(x):
    x = np.atleast_2d(x)
    products = [x[:, i] * x[:, j] for i, j in
                itertools.combinations_with_replacement(range(x.shape[1]), 2)]
    return np.column_stack([np.ones(len(x)), x, *products])


names = ["mean", *SETTINGS] + [f"{a} * {b}" for a, b in
                               itertools.combinations_with_replacement(SETTINGS, 2)]
x = coded(np.array([[float(r[name]) for name in SETTINGS] for r in known]))
score = np.array([float(r["score"]) for r in known])
variance = np.array([float(r["score_sd"]) for r in known]) ** 2
if len(known) <= len(names):
    sys.exit(f"{len(names)} terms need more than {len(names)} coupons")
fit = sm.WLS(score, terms(x), weights=1 / variance).fit()
for name, value, sd in zip(names, fit.params, fit.bse):
    print(f"{name:32s} {value:7.3f} ± {sd:.3f}")

starts = itertools.product([-0.5, 0.5], repeat=3)
best = min((minimize(lambda at: -fit.predict(terms(at))[0], start, bounds=[(-1, 1)] * 3)
            for start in starts), key=lambda found: found.fun)
following = (LOW + HIGH) / 2 + best.x * (HIGH - LOW) / 2
expected = fit.get_prediction(terms(best.x))
print("next: " + ", ".join(f"{n} {v:.4g}" for n, v in zip(SETTINGS, following)))
print(f"expected there: {expected.predicted_mean[0]:.2f} ± {expected.se_mean[0]:.2f}")
