#!/usr/bin/env python3
"""Times of measures of a coupon's patch in scikit-image and NumPy, on one thread.

    reference_times.py PATCH.f32 COLUMNS

The patch as laygauge_bench writes it: 32-bit floats, row by row. CPU time, the least of five.
"""

import sys
import time

try:
    import numpy as np
    from skimage.feature import graycomatrix, graycoprops, structure_tensor
except ImportError as error:
    sys.exit(str(error))

patch = np.fromfile(sys.argv[1], np.float32).reshape(-1, int(sys.argv[2]))
field = patch[patch.shape[0] // 10:-(patch.shape[0] // 10), patch.shape[1] // 10:-(patch.shape[1] // 10)]
half = field[:field.shape[0] // 2 * 2, :field.shape[1] // 2 * 2]
half = half.reshape(half.shape[0] // 2, 2, half.shape[1] // 2, 2).mean((1, 3))
levels = np.clip((half - 0.175) / 0.05, 0, 28).astype(np.uint8)
hann = np.hanning(129)[:128].astype(np.float32)
window = np.outer(hann, hann)


def cooccurrence():
    matrix = graycomatrix(levels, [2], [0, np.pi / 2], levels=29, symmetric=True, normed=True)
    for name in ("contrast", "dissimilarity", "homogeneity", "ASM", "correlation"):
        graycoprops(matrix, name)


def spectrum():
    for y in range(0, field.shape[0] - 128, 96):
        for x in range(0, field.shape[1] - 128, 96):
            tile = field[y:y + 128, x:x + 128]
            np.abs(np.fft.rfft2((tile - tile.mean()) * window)) ** 2


def tensor():
    structure_tensor(half, sigma=1, order="rc")


print("\nThe like in scikit-image and NumPy (turned and masked: no)")
for name, measure in (("co-occurrence, two directions", cooccurrence),
                      ("spectra of the tiles (of MakeSurface)", spectrum),
                      ("structure tensor", tensor)):
    least = float("inf")
    for _ in range(5):
        start = time.process_time()
        measure()
        least = min(least, time.process_time() - start)
    print(f"{name:<36}{1000 * least:10.2f}")
