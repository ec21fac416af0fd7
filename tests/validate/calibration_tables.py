"""What a calibration learns from few grades, scored on coupons that it did not see."""

import csv
import itertools
import subprocess
import tempfile
from pathlib import Path

import numpy as np
from scipy.stats import spearmanr

from run_program import PROGRAM, ROOT, SAMPLES

BARE = ROOT / "calibration/scales/bare.json"  # knows no grade
PHOTOS_OF = {"b1": ["d1"], "b2": ["d2", "d3", "d7"], "b4": ["d4"], "b5": ["d5"], "b6": ["d6"]}
GRADER = "ash"
DRAWS = 6  # of which coupons are graded
SEED = 20261201


def _panel():
    with open(SAMPLES / "panel.csv", newline="") as table:
        return [(r["grader"], (r["batch"], r["well"]), float(r["grade"]))
                for r in csv.DictReader(table)]


def _means(panel):
    grades = {}
    for _, coupon, grade in panel:
        grades.setdefault(coupon, []).append(grade)
    return {coupon: float(np.mean(given)) for coupon, given in grades.items()}


def _calibrate(folder, results, out, base, grades=(), pairs=()):
    command = [PROGRAM, "calibrate", "--results", results, "--base", base, "--out", out]
    if grades:
        file = Path(folder) / "grades.csv"
        file.write_text("grader,batch,well,grade\n" +
                        "".join(f"{g},{c[0]},{c[1]},{v}\n" for g, c, v in grades))
        command += ["--grades", file]
    if pairs:
        file = Path(folder) / "pairs.csv"
        file.write_text("grader,better_batch,better_well,worse_batch,worse_well\n" +
                        "".join(f"{GRADER},{a[0]},{a[1]},{b[0]},{b[1]}\n" for a, b in pairs))
        command += ["--pairs", file]
    subprocess.run(command, check=True, capture_output=True)
    return out


def _scores(folder, batches, scale):
    """(score, sd) of every coupon of the batches, by (batch, well)."""
    out = Path(folder) / "scored"
    command = [PROGRAM, "score", "--photos", SAMPLES / "photos.csv", "--pictures", "none", "--out",
               out]
    if scale:
        command += ["--scale", scale]
    photos = [SAMPLES / f"{plate}.jpg" for batch in batches for plate in PHOTOS_OF[batch]]
    subprocess.run(command + photos, check=True, capture_output=True)
    with open(out / "scores.csv", newline="") as table:
        return {(r["batch"], r["well"]): (float(r["score"]), float(r["score_sd"]))
                for r in csv.DictReader(table)}


def _compare(means, scores, coupons):
    """Errors, rank correlation, share within 1 and 2 sd."""
    errors = np.array([abs(means[c] - scores[c][0]) for c in coupons])
    deviations = np.array([scores[c][1] for c in coupons])
    rank = spearmanr([means[c] for c in coupons], [scores[c][0] for c in coupons])[0]
    return errors.mean(), rank, np.mean(errors <= deviations), np.mean(errors <= 2 * deviations)


def _row(name, figures):
    error, rank, within_1, within_2 = figures
    return f"| {name} | {error:.2f} | {rank:.3f} | {100 * within_1:.0f} % | {100 * within_2:.0f} % |"


def calibration_table():
    """Left-out batches, few grades of one grader, and pairs."""
    random = np.random.default_rng(SEED)
    panel = _panel()
    means = _means(panel)
    lines = ["| scale made from | scored | mean absolute error | rank correlation | within 1 sd | "
             "within 2 sd |", "| --- | --- | --- | --- | --- | --- |"]
    with tempfile.TemporaryDirectory() as folder:
        results = Path(folder) / "all"
        subprocess.run([PROGRAM, "score", "--photos", SAMPLES / "photos.csv", "--pictures", "none",
                        "--out", results,
                        *[SAMPLES / f"{p}.jpg" for p in itertools.chain(*PHOTOS_OF.values())]],
                       check=True, capture_output=True)
        own = Path(folder) / "own.json"
        without = {}
        foretold = {}
        for batch in PHOTOS_OF:
            without[batch] = _calibrate(folder, results, Path(folder) / f"without-{batch}.json",
                                        BARE, [g for g in panel if g[1][0] != batch])
            foretold.update(_scores(folder, [batch], without[batch]))
        lines.append(_row("the panel's grades of the other batches | each batch",
                          _compare(means, foretold, list(means))))
        design = [c for c in means if c[0] == "b1"]
        lines.append(_row("the panel's grades of the other batches | b1, one 15-run design",
                          _compare(means, foretold, design)))

        # Few grades of one grader on gray; the scale to start from knows no gray coupon.
        not_gray = _calibrate(folder, results, Path(folder) / "not-gray.json", BARE,
                              [g for g in panel if g[1][0] not in ("b1", "b2")])
        gray = [g for g in panel if g[0] == GRADER and g[1][0] in ("b1", "b2")]
        for count in (6, 8, 10, 12):
            figures = []
            for _ in range(DRAWS):
                chosen = [gray[i] for i in random.permutation(len(gray))[:count]]
                try:
                    _calibrate(folder, results, own, not_gray, chosen)
                except subprocess.CalledProcessError:
                    continue  # refused: all grades too alike to learn from
                rest = [c for _, c, _ in gray if c not in [c for _, c, _ in chosen]]
                figures.append(_compare(means, _scores(folder, ["b1", "b2"], own), rest))
            lines.append(_row(f"{count} grades of {GRADER} on gray, {len(figures)} draws | "
                              "the other gray coupons", np.mean(figures, axis=0)))

        figures = []
        for _ in range(DRAWS):
            pairs = []
            of_grader = {c: v for g, c, v in panel if g == GRADER and c[0] == "b1"}
            every = list(itertools.combinations(of_grader, 2))
            for i in random.permutation(len(every)):
                a, b = every[i]
                if of_grader[a] != of_grader[b] and len(pairs) < 40:
                    pairs.append((a, b) if of_grader[a] > of_grader[b] else (b, a))
            _calibrate(folder, results, own, without["b1"], pairs=pairs)
            figures.append(_compare(means, _scores(folder, ["b1"], own), design))
        lines.append(_row(f"40 pairs of {GRADER} over b1, {DRAWS} draws | b1",
                          np.mean(figures, axis=0)))
    return "\n".join(lines)
