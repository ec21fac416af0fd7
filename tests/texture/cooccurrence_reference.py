"""Gray-level co-occurrence of a photograph, by scikit-image.

Usage: cooccurrence_reference.py <raw file to write>
Writes the first photograph's 8-bit pixels and prints one line per case:
photo rows columns shift distance angle contrast dissimilarity homogeneity ASM correlation
for levels = pixel >> shift. A shift of 0 stands for 85 steps, pixel * 85 // 256, of which five at a
time are shared among levels by SciPy's quadratic B-spline. Photographs: scikit-image's brick and
grass (CC0).
"""
import sys

try:
    import numpy as np
    import skimage.data
    from scipy.interpolate import BSpline
    from skimage.feature import graycomatrix, graycoprops
except ImportError as error:
    print(error, file=sys.stderr)
    sys.exit(77)

PROPERTIES = ("contrast", "dissimilarity", "homogeneity", "ASM", "correlation")
STEPS, STEPS_PER_LEVEL = 85, 5
# Weight of each step, in its middle, on each level: the first and the last lie beyond the scale.
PLACES = (np.arange(STEPS) + 0.5) / STEPS_PER_LEVEL + 0.5
SHARES = np.nan_to_num(BSpline.basis_element([-1.5, -0.5, 0.5, 1.5], extrapolate=False)(
    PLACES[:, None] - np.arange(STEPS // STEPS_PER_LEVEL + 2)))


def counts(image, shift, distance, angle):
    """Shares of pairs of levels, four-dimensional as graycoprops wants them."""
    quantised = image >> shift if shift else (image.astype(int) * STEPS // 256).astype(np.uint8)
    matrix = graycomatrix(quantised, [distance], [angle * np.pi / 4],
                          levels=256 >> shift if shift else STEPS, symmetric=True, normed=True)
    if shift:
        return matrix
    return (SHARES.T @ matrix[:, :, 0, 0] @ SHARES)[:, :, None, None]


for photo in ("brick", "grass"):
    image = getattr(skimage.data, photo)()
    image.tofile(sys.argv[1] + "-" + photo)
    for shift in (3, 4, 0):
        for distance in (1, 2, 5):
            for angle in range(4):
                matrix = counts(image, shift, distance, angle)
                values = [graycoprops(matrix, name)[0, 0] for name in PROPERTIES]
                print(photo, *image.shape, shift, distance, angle,
                      *("%.15g" % value for value in values))
