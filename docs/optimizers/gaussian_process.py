#!/usr/bin/env python3
"""Gaussian-process regression on scores.csv: the next settings to print.

    gaussian_process.py results/scores.csv

Needs scikit-learn (Debian: python3-sklearn).
"""

import csv
import sys
import warnings

import numpy as np
from scipy.stats import norm
from sklearn.exceptions import ConvergenceWarning
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import RBF

SETTINGS = ["line_width_mm", "flow_pct", "speed_mm_s"]
LOW = np.array([0.36, 88.0, 40.0])
HIGH = np.array([0.52, 106.0, 180.0])

with open(sys.argv[1], newline="", encoding="utf-8") as file:
    rows = list(csv.DictReader(file))
# `retake` and `empty` rows have no score: unknown is not bad, so they are left out. Rows without
# settings (a reference coupon) cannot teach about settings. Failed coupons are `ok` rows with a
# score near 1: they stay, and keep the search away.
known = [r for r in rows if r["status"] == "ok" and all(r[name] for name in SETTINGS)]
again = [f"{r['batch']} {r['well']}" for r in rows if r["status"] == "retake"]
print(f"{len(known)} coupons; to be photographed again: {', '.join(again) or 'none'}")

settings = np.array([[float(r[name]) for name in SETTINGS] for r in known])
score = np.array([float(r["score"]) for r in known])
score_sd = np.array([float(r["score_sd"]) for r in known])

x = (settings - LOW) / (HIGH - LOW)
mean, spread = score.mean(), max(score.std(), 0.1)
# A setting that does not matter gets the longest range there is; that is no cause for a warning.
warnings.simplefilter("ignore", ConvergenceWarning)
model = GaussianProcessRegressor(RBF([0.5] * 3, (0.2, 10)), alpha=(score_sd / spread) ** 2,
                                 n_restarts_optimizer=3, random_state=1)
model.fit(x, (score - mean) / spread)

# Expected improvement over the best that the model believes of what was printed.
candidates = np.random.default_rng(1).uniform(0, 1, (5000, 3))
predicted, sd = model.predict(candidates, return_std=True)
best = model.predict(x).max()
gain = (predicted - best) * norm.cdf((predicted - best) / sd) + sd * norm.pdf(
    (predicted - best) / sd)
choice = gain.argmax()
following = LOW + candidates[choice] * (HIGH - LOW)
print("next: " + ", ".join(f"{n} {v:.4g}" for n, v in zip(SETTINGS, following)))
print(f"expected there: {mean + spread * predicted[choice]:.2f} ± {spread * sd[choice]:.2f}")
