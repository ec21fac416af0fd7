"""Power spectrum of one masked, windowed tile, by numpy and scipy.

Usage: spectrum_reference.py <float64 values> <mask bytes> <side> <float64 power to write>
The power is scaled so that its sum over the whole plane is the weighted variance.
"""
import sys

try:
    import numpy as np
    from scipy.signal import get_window
except ImportError as error:
    print(error, file=sys.stderr)
    sys.exit(77)

values, mask, side, out = sys.argv[1:]
side = int(side)
x = np.fromfile(values, np.float64).reshape(side, side)
m = np.fromfile(mask, np.uint8).reshape(side, side) > 0
hann = get_window("hann", side)  # periodic
w = np.outer(hann, hann) * m
power = np.abs(np.fft.fft2(w * (x - (w * x).sum() / w.sum()))) ** 2 / (w ** 2).sum() / side ** 2
power[:, : side // 2 + 1].tofile(out)
print("ok")
