"""Agreement of the scores with the panel; time and memory."""

import json
import subprocess
import sys
import tempfile
import time

import cv2
import numpy as np
from scipy.stats import spearmanr

from run_program import PLATES, PROGRAM, ROOT, SAMPLES


def _agreement(name, triples):
    grades, scores, deviations = zip(*triples)
    errors = [abs(grade - score) for grade, score in zip(grades, scores)]

    def covered(width):
        within = sum(e <= width * sd for e, sd in zip(errors, deviations))
        return f"{100 * within / len(errors):.0f} %"

    return (f"| {name} | {len(errors)} | {sum(errors) / len(errors):.2f} | "
            f"{spearmanr(grades, scores)[0]:.3f} | {covered(1)} | {covered(2)} |")


def panel_table(rows, grades):
    """Scores against the panel's mean grade, by plate."""
    triples = {coupon: (grade, float(rows[coupon]["score"]), float(rows[coupon]["score_sd"]))
               for coupon, grade in grades.items() if coupon in rows}
    lines = ["| plate | coupons | mean absolute difference | rank correlation | "
             "within 1 sd | within 2 sd |", "| --- | --- | --- | --- | --- | --- |"]
    for plate in PLATES:
        lines.append(_agreement(plate, [t for (p, _), t in triples.items() if p == plate]))
    lines.append(_agreement("all", list(triples.values())))
    return "\n".join(lines)


def left_out_table():
    """What the shipped scale's calibration found with coupons and batches left out."""
    scale = json.loads((ROOT / "calibration/scales/start.json").read_text())
    lines = ["| left out, then foretold | coupons | mean absolute error | root mean square | "
             "rank correlation |", "| --- | --- | --- | --- | --- |"]
    for row in scale["accuracy"]:
        lines.append(f"| {row['left_out']} | {row['coupons']} | {row['mean_absolute_error']:.2f} | "
                     f"{row['rms_error']:.2f} | {row['rank_correlation']:.3f} |")
    return "\n".join(lines)


# Run in a small process of its own: a child starts with its parent's resident set.
_WATCH = """
import os, subprocess, sys
child = subprocess.Popen(sys.argv[1:], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
_, status, usage = os.wait4(child.pid, 0)
print(os.waitstatus_to_exitcode(status), usage.ru_utime + usage.ru_stime, usage.ru_maxrss)
"""


def _run(photo):
    """(seconds of processor time, peak MiB) of the whole process, one thread, pictures off."""
    with tempfile.TemporaryDirectory() as scratch:
        said = subprocess.run([sys.executable, "-c", _WATCH, PROGRAM, "score", photo, "--threads",
                               "1", "--pictures", "none", "--out", scratch],
                              check=True, capture_output=True, text=True).stdout.split()
        if said[0] != "0":
            raise RuntimeError(f"score failed on {photo.name}")
        return float(said[1]), float(said[2]) / 1024


def _decode(photo):
    """Seconds of processor time that OpenCV takes to decode the file."""
    data = np.fromfile(photo, np.uint8)
    start = time.process_time()
    cv2.imdecode(data, cv2.IMREAD_COLOR)
    return time.process_time() - start


def cost_table(repeats=5):
    """Processor time as a multiple of OpenCV's decoding of the same file, each the best of some
    runs."""
    cv2.setNumThreads(1)
    photo = SAMPLES / "d2.jpg"
    whole, decoding = float("inf"), float("inf")
    for _ in range(repeats):
        decoding = min(decoding, _decode(photo))
        whole = min(whole, _run(photo)[0])
    peak = _run(SAMPLES / "d1.jpg")[1]
    return ("| what | promised | measured |\n| --- | --- | --- |\n"
            f"| whole process, 12 megapixels, 6 coupons, one thread, pictures off (times OpenCV's "
            f"decoding) | 3 | {whole / decoding:.1f} |\n"
            f"| peak memory, 24 megapixels, 15 coupons (MiB) | 600 | {peak:.0f} |")
