#!/usr/bin/env python3
"""What Pillow sees in a PNG file: mode, size, dots an inch, then the pixels named as x y."""

import sys

from PIL import Image

picture = Image.open(sys.argv[1])
picture.load()
print(picture.mode, *picture.size, *(round(dpi, 3) for dpi in picture.info["dpi"]))
for x, y in zip(sys.argv[2::2], sys.argv[3::2]):
    pixel = picture.getpixel((int(x), int(y)))
    print(*(pixel if isinstance(pixel, tuple) else (pixel,)))
