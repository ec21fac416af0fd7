#!/usr/bin/env python3
"""The scripts of docs/optimizers/ on tables that laygauge wrote, and on one with a known optimum.

    optimizers_test.py PROGRAM
"""

import csv
import itertools
import random
import re
import subprocess
import sys
import tempfile
import unittest
from pathlib import Path

PROJECT = Path(__file__).resolve().parents[2]
SCRIPTS = ["gaussian_process", "response_surface", "derivative_free"]
LOW = {"line_width_mm": 0.36, "flow_pct": 88, "speed_mm_s": 40}
HIGH = {"line_width_mm": 0.52, "flow_pct": 106, "speed_mm_s": 180}
COLUMNS = ["batch", "well", *LOW, "status", "note", "takes", "score", "score_sd", "loss", "why",
           "fault"]
BEST = {"line_width_mm": 0.42, "flow_pct": 98.8, "speed_mm_s": 85}


def run_script(name, table):
    """The settings that the script proposes, as shares of the range, and what it printed."""
    done = subprocess.run([sys.executable, str(PROJECT / f"docs/optimizers/{name}.py"),
                           str(table)], text=True, capture_output=True, check=False)
    assert done.returncode == 0, done.stderr
    assert done.stderr == "", done.stderr
    line = re.search(r"^next: (.*)$", done.stdout, re.MULTILINE).group(1)
    values = dict(part.rsplit(" ", 1) for part in line.split(", "))
    assert list(values) == list(LOW)
    return [(float(values[n]) - LOW[n]) / (HIGH[n] - LOW[n]) for n in LOW], done.stdout


def row(number, settings, score, score_sd=0.1, status="ok", fault=""):
    return {"batch": "k1", "well": f"A{number}", **settings, "status": status, "note": "",
            "takes": 1, "score": score, "score_sd": score_sd if score != "" else "",
            "loss": round(10 - score, 3) if score != "" else "", "why": "", "fault": fault}


def true_score(settings):
    return 9 - 9 * sum(((settings[n] - BEST[n]) / (HIGH[n] - LOW[n])) ** 2 for n in LOW)


def known_table():
    """Box and Behnken's design of three factors ("Some new three level designs for the study of
    quantitative variables", Technometrics 2 (1960) 455) on a parabola with its top at BEST, and
    noise of 0.1."""
    noise = random.Random(7)
    points = [(0, 0, 0)] * 3
    for i, j in itertools.combinations(range(3), 2):
        for a, b in itertools.product((-1, 1), repeat=2):
            point = [0, 0, 0]
            point[i], point[j] = a, b
            points.append(tuple(point))
    rows = []
    for number, point in enumerate(points):
        settings = {n: round(LOW[n] + (p + 1) / 2 * (HIGH[n] - LOW[n]), 3)
                    for n, p in zip(LOW, point)}
        rows.append(row(number, settings, round(true_score(settings) + noise.gauss(0, 0.1), 3)))
    return rows


class OptimizersTest(unittest.TestCase):
    @classmethod
    def setUpClass(cls):
        cls.place = tempfile.TemporaryDirectory(prefix="laygauge-optimizers-")
        cls.folder = Path(cls.place.name)

    @classmethod
    def tearDownClass(cls):
        cls.place.cleanup()

    def write(self, rows, columns=None):
        table = self.folder / "table.csv"
        with open(table, "w", newline="", encoding="utf-8") as file:
            writer = csv.DictWriter(file, columns or COLUMNS)
            writer.writeheader()
            writer.writerows(rows)
        return table

    def test_read_the_programs_table_without_a_hand_edit(self):
        # Batch b2 has a coupon without settings (ironed) and one that failed.
        plates = PROJECT / "sample-images"
        subprocess.run([PROGRAM, "score", plates / "d1.jpg", plates / "d2.jpg",
                        "--runs", plates / "runs.csv", "--photos", plates / "photos.csv",
                        "--loss", "--pictures", "none", "--out", self.folder],
                       check=True, stdout=subprocess.DEVNULL)
        table = self.folder / "scores.csv"
        with open(table, newline="", encoding="utf-8") as file:
            rows = list(csv.DictReader(file))
        self.assertEqual(len(rows), 21)
        for name in SCRIPTS:
            with self.subTest(name):
                following, told = run_script(name, table)
                for share in following:
                    self.assertTrue(-1e-9 <= share <= 1 + 1e-9, following)
                # What has no score is neither good nor bad: the proposal stays as it was.
                gone = dict(rows[0], well="Z1", status="retake", score="", score_sd="", loss="",
                            why="", fault="")
                none = dict(gone, well="Z2", status="empty")
                again, told_again = run_script(name, self.write([*rows, gone, none], rows[0]))
                self.assertEqual(again, following)
                self.assertIn("to be photographed again: none", told)
                self.assertIn("to be photographed again: b1 Z1", told_again)

    def test_find_a_known_optimum(self):
        table = self.write(known_table())
        best = [(BEST[n] - LOW[n]) / (HIGH[n] - LOW[n]) for n in LOW]
        # The parabola's top by least squares has a standard error of 0.1 / (2 * 9) * about 1 =
        # 0.01 of a range; a surface that is drawn back to the mean is off by more.
        for name, tolerance in (("response_surface", 0.03), ("derivative_free", 0.1)):
            with self.subTest(name):
                following, _ = run_script(name, table)
                for found, true in zip(following, best):
                    self.assertAlmostEqual(found, true, delta=tolerance)

    def test_explore_and_come_to_a_known_optimum(self):
        # The Gaussian process first looks where it knows little. Each proposal is printed and
        # scored; the best of six is as good as the optimum to within 3 standard
        # deviations of the noise.
        rows = known_table()
        tried = []
        for number in range(6):
            shares, _ = run_script("gaussian_process", self.write(rows))
            settings = {n: LOW[n] + s * (HIGH[n] - LOW[n]) for n, s in zip(LOW, shares)}
            tried.append(true_score(settings))
            rows.append(row(50 + number, settings, round(tried[-1], 3)))
        self.assertGreater(max(tried), 9 - 0.3, tried)

    def test_trust_a_coupon_by_its_standard_deviation(self):
        rows = known_table()
        corner = dict(LOW)
        for name in SCRIPTS:
            with self.subTest(name):
                without, _ = run_script(name, self.write(rows))
                moved = []
                for score_sd in (0.05, 50):
                    odd = row(99, corner, 10, score_sd)
                    following, _ = run_script(name, self.write([*rows, odd]))
                    moved.append(max(abs(a - b) for a, b in zip(without, following)))
                self.assertGreater(moved[0], 0.1)   # a sure 10 at the corner draws the search
                self.assertLess(moved[1], 0.05)     # a guess does not

    def test_take_a_failure_for_what_it_is(self):
        rows = known_table()
        failed = row(98, {"line_width_mm": 0.36, "flow_pct": 106, "speed_mm_s": 180}, 1.0,
                     fault="failed")
        table = self.write([*rows, failed])
        for name in SCRIPTS:
            with self.subTest(name):
                following, told = run_script(name, table)
                away = max(abs(share - at) for share, at in zip(following, (0, 1, 1)))
                self.assertGreater(away, 0.3)
        plain, _ = run_script("response_surface", self.write(rows))
        with_failure, told = run_script("response_surface", self.write([*rows, failed]))
        self.assertEqual(with_failure, plain)
        self.assertIn("failed at line_width_mm 0.36, flow_pct 106, speed_mm_s 180", told)


if __name__ == "__main__":
    PROGRAM = sys.argv.pop(1)
    unittest.main()
