"""Brightness of a piece of a photograph, and its profiles: what all finders read.

Finders look at a crop, never at the whole photograph: their cost does not grow with its size.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from layout.image.photograph import Pixels
from layout.quantity import Floats

Brightness = NDArray[np.float32]
Grey = NDArray[np.uint8]

LUMINANCE = np.array([0.2126, 0.7152, 0.0722], np.float32)
"""Shares of linear red, green and blue in the luminance: Recommendation ITU-R BT.709."""


@dataclass(frozen=True, eq=False)
class Crop:
    """A piece of a photograph: linear luminance from 0 to 1, shape (height, width), and its first pixel's place."""

    brightness: Brightness
    corner_px: Floats

    def sample(self, points_px: Floats) -> Brightness:
        """Return the brightness at points of the photograph, shape (..., 2), bilinear, repeated beyond the rim."""
        import cv2

        x, y = np.moveaxis(np.asarray(points_px - self.corner_px, np.float32), -1, 0)
        shape = x.shape
        rows = x.reshape(-1, shape[-1]), y.reshape(-1, shape[-1])
        seen = cv2.remap(self.brightness, *rows, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
        return np.asarray(seen.reshape(shape), np.float32)

    def holds(self, points_px: Floats) -> NDArray[np.bool_]:
        """Say which points, shape (..., 2), lie between pixels of the crop."""
        height, width = self.brightness.shape
        away = points_px - self.corner_px
        return np.asarray(((away >= 0) & (away <= [width - 1, height - 1])).all(axis=-1))


def crop_around(pixels: Pixels, points_px: Floats, margin_px: float) -> Crop:
    """Cut out what lies within a margin of some points, shape (..., 2), as far as the photograph reaches.

    Examples
    --------
    >>> white = np.full((40, 60, 3), 255, np.uint8)
    >>> piece = crop_around(white, np.array([[10.0, 5.0], [20.0, 5.0]]), 3.0)
    >>> piece.brightness.shape, piece.corner_px
    ((7, 17), array([7., 2.]))
    """
    height, width = pixels.shape[:2]
    points = points_px.reshape(-1, 2)
    left, top = np.clip(np.floor(points.min(axis=0) - margin_px), 0, [width - 1, height - 1]).astype(int)
    right, bottom = np.clip(np.ceil(points.max(axis=0) + margin_px), 0, [width - 1, height - 1]).astype(int)
    piece = pixels[top : bottom + 1, left : right + 1]
    return Crop(luminance(piece), np.array([left, top], dtype=float))


def luminance(pixels: Pixels) -> Brightness:
    """Return linear luminance from 0 to 1, shape (height, width), of pixels in sRGB.

    Light is blurred by lens and sensor before it is encoded: an edge stands where the linear brightness is
    half way, not the encoded one.
    """
    import cv2

    shares = cv2.transform(linear_light(pixels), LUMINANCE[None])
    return np.asarray(shares, np.float32).reshape(pixels.shape[:2])


def linear_light(pixels: Pixels) -> Brightness:
    """Return linear red, green and blue from 0 to 1, shape (height, width, 3), of pixels in sRGB."""
    import cv2

    table = _decoding(int(np.iinfo(pixels.dtype).max))
    # OpenCV looks bytes up several times faster
    fast = pixels.dtype == np.uint8 and pixels.size
    return np.asarray(cv2.LUT(pixels, table) if fast else table[pixels], np.float32)


def grey(pixels: Pixels) -> Grey:
    """Return a picture in grey, 8 bits, as encoded: corners and markers are found in either brightness."""
    import cv2

    eight: Any = pixels if pixels.dtype == np.uint8 else (pixels >> 8).astype(np.uint8)
    return np.asarray(cv2.cvtColor(eight, cv2.COLOR_RGB2GRAY), np.uint8)


@cache
def _decoding(most: int) -> Brightness:
    """Return the linear light of each encoded value: IEC 61966-2-1 (sRGB)."""
    encoded = np.arange(most + 1) / most
    linear = np.where(encoded <= 0.04045, encoded / 12.92, ((encoded + 0.055) / 1.055) ** 2.4)
    return linear.astype(np.float32)
