"""One photograph, changed in ways that must not change what is measured on it."""

import numpy as np
from PIL import Image, JpegImagePlugin


def _linear_from_srgb(value):  # IEC 61966-2-1
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def _srgb_from_linear(value):
    return np.where(value <= 0.0031308, 12.92 * value, 1.055 * value ** (1 / 2.4) - 0.055)


def _gained(photo, gains):
    """Each channel times its gain in linear light, clipped at white."""
    levels = _linear_from_srgb(np.arange(256) / 255)
    table = [_srgb_from_linear(np.clip(levels * gain, 0, 1)) for gain in gains]
    return photo.point(np.rint(255 * np.concatenate(table)).astype(int).tolist())


def _kinds():
    """name -> (function of the picture, JPEG quality or None: coded as the original was)."""
    same = lambda photo: photo
    return {
        "exposure 0.6 to 1.4": [(lambda p, f=f: _gained(p, (f, f, f)), None)
                                for f in (0.6, 0.8, 1.2, 1.4)],
        "white balance": [(lambda p, g=g: _gained(p, g), None)
                          for g in ((1.0, 0.85, 0.65), (0.75, 0.9, 1.0))],
        "quarter turns": [(lambda p, t=t: p.transpose(t), None)
                          for t in (Image.Transpose.ROTATE_90, Image.Transpose.ROTATE_180,
                                    Image.Transpose.ROTATE_270)],
        "size 75 %": [(lambda p: p.resize((p.width * 3 // 4, p.height * 3 // 4),
                                          Image.Resampling.LANCZOS), None)],
        "JPEG quality 80 to 95": [(same, 80), (same, 88), (same, 95)],
    }


def kinds():
    return list(_kinds())


def write_changed(photo_path, folder):
    """Yields (kind, path) of each changed copy; EXIF data is kept."""
    photo = Image.open(photo_path)
    original = {"qtables": photo.quantization, "subsampling": JpegImagePlugin.get_sampling(photo)}
    exif = photo.info["exif"]
    photo.load()
    for kind, changes in _kinds().items():
        for i, (change, quality) in enumerate(changes):
            path = folder / f"{kind.replace(' ', '-').replace('%', 'pct')}-{i}" / photo_path.name
            path.parent.mkdir(parents=True, exist_ok=True)
            coding = original if quality is None else {"quality": quality}
            change(photo).save(path, "JPEG", exif=exif, **coding)
            yield kind, path
