"""Gray-level co-occurrence of a photograph, by scikit-image.

Usage: cooccurrence_reference.py <raw file to write>
Writes the first photograph's 8-bit pixels and prints one line per case:
photo rows columns shift distance angle contrast dissimilarity homogeneity ASM correlation
for levels = pixel >> shift. Photographs: scikit-image's brick and grass (CC0).
"""
import sys

try:
    import numpy as np
    import skimage.data
    from skimage.feature import graycomatrix, graycoprops
except ImportError as error:
    print(error, file=sys.stderr)
    sys.exit(77)

PROPERTIES = ("contrast", "dissimilarity", "homogeneity", "ASM", "correlation")
for photo in ("brick", "grass"):
    image = getattr(skimage.data, photo)()
    image.tofile(sys.argv[1] + "-" + photo)
    for shift in (3, 4):
        for distance in (1, 2, 5):
            for angle in range(4):
                matrix = graycomatrix(image >> shift, [distance], [angle * np.pi / 4],
                                      levels=256 >> shift, symmetric=True, normed=True)
                values = [graycoprops(matrix, name)[0, 0] for name in PROPERTIES]
                print(photo, *image.shape, shift, distance, angle,
                      *("%.15g" % value for value in values))
