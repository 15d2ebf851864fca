"""The drawing's part of the photograph, made small enough to travel inside the page."""

from __future__ import annotations

import base64
import math
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from layout.errors import PhotographError
from layout.sheet.drawing import Box, Drawing

if TYPE_CHECKING:
    from layout.record.model import Record

LONGEST_PX = 1600
JPEG_QUALITY = 82


@dataclass(frozen=True)
class Embedded:
    """A picture as a ``data:`` address, and the part of the photograph that it shows."""

    href: str
    box: Box


def embed(record: Record, drawing: Drawing, folder: Path) -> Embedded | None:
    """Cut the drawing's part out of its photograph.

    Returns
    -------
    Embedded or None
        None where the photograph is missing or unreadable, or is not known to be the one that was traced:
        then the drawing stands alone.
    """
    import cv2

    from layout.image.photograph import read_photograph, sha256_of

    photograph = next(one for one in record.photographs if one.id == drawing.photograph)
    path = folder / photograph.file
    try:
        if photograph.sha256 is None or sha256_of(path) != photograph.sha256:
            return None
        pixels = read_photograph(path)
    except PhotographError:
        return None
    height, width = pixels.shape[:2]
    left, right = _within(drawing.box.x, drawing.box.width, width)
    top, bottom = _within(drawing.box.y, drawing.box.height, height)
    if left >= right or top >= bottom:
        return None
    part = pixels[top:bottom, left:right, ::-1]
    eight_bit = (part >> 8 if part.dtype == np.uint16 else part).astype(np.uint8)
    shrink = min(1.0, LONGEST_PX / max(part.shape[:2]))
    size = (max(1, round((right - left) * shrink)), max(1, round((bottom - top) * shrink)))
    small = cv2.resize(eight_bit, size, interpolation=cv2.INTER_AREA)
    _, encoded = cv2.imencode(".jpg", small, [cv2.IMWRITE_JPEG_QUALITY, JPEG_QUALITY])
    address = "data:image/jpeg;base64," + base64.b64encode(encoded.tobytes()).decode("ascii")
    # pixel centres are on whole numbers, so the picture's edge lies half a pixel outside
    return Embedded(address, Box(left - 0.5, top - 0.5, float(right - left), float(bottom - top)))


def _within(start: float, length: float, limit: int) -> tuple[int, int]:
    """Return the pixels, first and one past the last, that a stretch covers in the photograph."""
    return max(0, math.floor(start + 0.5)), min(limit, math.ceil(start + length + 0.5))
