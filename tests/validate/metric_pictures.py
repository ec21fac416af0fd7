"""Draws the pictures of docs/metrics.md and README.md from the sample plates.

Usage, in the project's folder after a build:
    /usr/bin/python3 tests/validate/metric_pictures.py
Writes docs/pictures/metrics/NAME.png: the lowest and the highest example of one plate, and the
highest with what was found drawn on it; and docs/pictures/first-result.png.
"""

import math
import tempfile
from pathlib import Path

import numpy as np
from PIL import Image, ImageDraw, ImageFont

from run_program import ROOT, SAMPLES, number, record, score

PX_PER_MM = 20
PATCH_PX = 880
SIDE_MM = 12.0
PLAIN_PLACE_MM = (-4.0, -5.0)  # between the holes
OWN_LEVEL = 149  # the coupon's own level in the program's pictures
STRETCH = 1.7    # about it, so that faint textures show in small pictures
BORDER_MM = 19.5              # crops stay on the coupon
# picture, plate, column that orders, kind of its marks
EXAMPLES = [
    ("lines", "d1", "line_contrast", None),
    ("roughness", "d1", "aperiodic_roughness", None),
    ("waviness", "d1", "waviness", None),
    ("cooccurrence", "d1", "cooccurrence_contrast_across", None),
    ("gradient-energy", "d1", "gradient_energy_across_per_mm2", None),
    ("gaps", "d1", "gap_area_pct", "gap"),
    ("ridges", "d1", "ridge_um", "ridge"),
    ("wall-gaps", "d1", "wall_gap_mean_mm", "wall_gap"),
    ("scars", "d1", "scar_length_mm", "scar"),
    ("blobs", "d2", "blob_count_per_cm2", "blob"),
    ("failure", "d2", "failure_area_pct", "failure"),
    ("index-roughness", "d1", "roughness", None),
    ("index-defects", "d1", "defects", None),
]
FIRST_RESULT = ("d1", "B2")  # gaps, scars and wall gaps on one coupon


def _fullest_place(marks):
    """Centre of the crop that holds the most of the marks' points, as near the middle of them as
    the coupon allows."""
    points = [point for mark in marks for point in mark["path_mm"]]
    limit = BORDER_MM - SIDE_MM / 2
    steps = [-limit + 1.5 * i for i in range(int(2 * limit / 1.5) + 1)]

    def held(centre):
        return [(x, y) for x, y in points
                if max(abs(x - centre[0]), abs(y - centre[1])) < SIDE_MM / 2]

    best = max(((x, y) for x in steps for y in steps),
               key=lambda centre: (len(held(centre)), -math.hypot(*centre)))
    middle = [(min(axis) + max(axis)) / 2 for axis in zip(*held(best))]
    return [max(-limit, min(limit, value)) for value in middle]


def _crop(path, centre_mm):
    """Coupon frame: x right, y down; pixel (439.5, 439.5) is the origin."""
    column = PATCH_PX / 2 + centre_mm[0] * PX_PER_MM
    row = PATCH_PX / 2 + centre_mm[1] * PX_PER_MM
    half = SIDE_MM * PX_PER_MM / 2
    crop = Image.open(path).convert("RGB").crop(
        [round(v) for v in (column - half, row - half, column + half, row + half)])
    return crop.point(lambda level: OWN_LEVEL + STRETCH * (level - OWN_LEVEL))


def _picture(crops):
    """The crops side by side, each over its caption."""
    side, gap, caption = crops[0][1].width, 6, 20
    sheet = Image.new("RGB", ((side + gap) * len(crops) - gap, side + caption), "white")
    pen = ImageDraw.Draw(sheet)
    font = ImageFont.truetype("DejaVuSans.ttf", 12)
    for i, (text, crop) in enumerate(crops):
        sheet.paste(crop, (i * (side + gap), 0))
        pen.text((i * (side + gap) + 2, side + 3), text, fill="black", font=font)
    return sheet


def _example(folder, rows, plate, column, kind):
    values = {well: value for (name, well), row in rows.items()
              if name == plate and row["pitch_mm"] and (value := number(row[column])) is not None}
    low = min(values, key=lambda well: (values[well], -float(rows[plate, well]["score"])))
    high = max(values, key=values.get)
    found = next(c for c in record(folder, plate)["coupons"] if c["well"] == high)["marks"]
    marks = [mark for mark in found if mark["kind"] == kind]
    place = _fullest_place(marks) if marks else PLAIN_PLACE_MM
    pictures = folder / "results/pictures"
    crops = [(f"{plate} {well}: {round(values[well], 4):.3g}", _crop(pictures / f"{plate}-{well}.png", place))
             for well in (low, high)]
    if marks:
        crops.append(("as found", _crop(pictures / f"{plate}-{high}-found.png", place)))
    return _picture(crops)


def _save(picture, path, grays, inks):
    """With a palette of even grays and of the inks' own shades: half the size, all hues kept."""
    pixels = np.asarray(picture)
    coloured = np.unique(pixels[np.ptp(pixels, axis=2) > 8] // 8, axis=0) * 8 + 4  # rare ones too
    palette = [level for i in range(grays) for level in [round(255 * i / (grays - 1))] * 3]
    if len(coloured):
        shades = Image.fromarray(coloured.reshape(1, -1, 3)).quantize(inks)
        palette += shades.getpalette()[:3 * inks]
    chosen = Image.new("P", (1, 1))
    chosen.putpalette(palette + palette[:3] * (256 - len(palette) // 3))
    picture.quantize(palette=chosen, dither=Image.Dither.NONE).save(path, optimize=True)


def main():
    target = ROOT / "docs/pictures"
    (target / "metrics").mkdir(exist_ok=True)
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch)
        rows = score([SAMPLES / "d1.jpg", SAMPLES / "d2.jpg"], folder, "all")
        for name, plate, column, kind in EXAMPLES:
            _save(_example(folder, rows, plate, column, kind), target / f"metrics/{name}.png",
                  48, 24)
        whole = Image.open(folder / "results/pictures/{}-{}-found.png".format(*FIRST_RESULT))
        small = whole.convert("RGB").resize((600, round(600 * whole.height / whole.width)),
                                            Image.Resampling.LANCZOS)
        _save(small, target / "first-result.png", 64, 64)


if __name__ == "__main__":
    main()
