"""Runs laygauge on photographs and reads its table, the plates' truth and the panel's grades."""

import csv
import json
import subprocess
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
PROGRAM = ROOT / "build/release/laygauge"
SAMPLES = ROOT / "sample-images"
PLATES = [f"d{i}" for i in range(1, 8)]
DEVELOPED_ON = ["d1", "d2", "d4", "d6"]
LESS_USED = ["d3", "d5", "d7"]
# Columns of the table that are no metrics.
NO_METRIC = {"batch", "well", "status", "note", "takes", "score", "score_sd", "why", "fault",
             "unfamiliar", "center_x_mm", "center_y_mm", "turn_deg"}


def number(text):
    """A cell's number; None where it is empty."""
    return float(text) if text else None


def score(photos, folder=None, pictures="none"):
    """Rows of the table by (file stem, well): every photo is a batch of its own, so none is
    averaged with another. `folder` keeps the results."""
    with tempfile.TemporaryDirectory() as scratch:
        out = Path(folder or scratch) / "results"
        photo_list = Path(scratch) / "photos.csv"
        photo_list.write_text("photo,batch\n" + "".join(f"{p.name},{p.stem}\n" for p in photos))
        subprocess.run([PROGRAM, "score", *photos, "--photos", photo_list, "--pictures", pictures,
                        "--out", out], check=True, capture_output=True)
        with open(out / "scores.csv", newline="") as table:
            return {(row["batch"], row["well"]): row for row in csv.DictReader(table)}


def metric_columns(rows):
    """The metrics' columns, in the table's order."""
    return [column for column in next(iter(rows.values())) if column not in NO_METRIC]


def record(folder, stem):
    """What was measured on one photo, as kept in `folder` by `score`."""
    return json.loads((Path(folder) / "results/records" / f"{stem}.json").read_text())


def truth():
    """What each plate was rendered from, by (plate, well)."""
    coupons = {}
    for plate in PLATES:
        told = json.loads((ROOT / "tests/truth" / f"{plate}.truth.json").read_text())
        coupons.update({(plate, coupon["well"]): coupon for coupon in told["coupons"]})
    return coupons


def panel_grades():
    """Mean grade of the invented panel, by (plate, well)."""
    with open(SAMPLES / "photos.csv", newline="") as table:
        batch_of = {row["photo"].removesuffix(".jpg"): row["batch"]
                    for row in csv.DictReader(table)}
    grades = {}
    with open(SAMPLES / "panel.csv", newline="") as table:
        for row in csv.DictReader(table):
            for plate in PLATES:
                if batch_of[plate] == row["batch"]:
                    grades.setdefault((plate, row["well"]), []).append(float(row["grade"]))
    return {coupon: sum(given) / len(given) for coupon, given in grades.items()}
