"""A line across a photograph, and the ribbon beside it: its rows run along the line, its columns across."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.image.photograph import Pixels
from layout.image.sampling import Brightness, luminance
from layout.quantity import Floats


@dataclass(frozen=True, eq=False)
class Guide:
    """A straight line across a photograph: its middle, its direction and its half length in pixels."""

    middle: Floats
    along: Floats
    half: float

    @classmethod
    def between(cls, start: Floats, end: Floats) -> Guide:
        """Return the line from one point to another, each (2,)."""
        away = end - start
        length = float(np.hypot(*away))
        return cls((start + end) / 2, away / length, length / 2)

    @property
    def across(self) -> Floats:
        """Return the direction to the right of one who walks along, as the photograph shows it."""
        return np.array([-self.along[1], self.along[0]])

    def at(self, u: Floats, v: Floats | float) -> Floats:
        """Return the pixels, shape (..., 2), of places along (from the middle) and across the line."""
        u, v = np.broadcast_arrays(np.asarray(u, float), np.asarray(v, float))
        return np.asarray(self.middle + u[..., None] * self.along + v[..., None] * self.across)

    def moved(self, across_px: float, turn: float) -> Guide:
        """Return the line moved sideways and then turned about its middle, by radians from x to y."""
        cos, sin = np.cos(turn), np.sin(turn)
        along = np.array([[cos, -sin], [sin, cos]]) @ self.along
        return Guide(self.middle + across_px * self.across, along, self.half)


@dataclass(frozen=True, eq=False)
class Ribbon:
    """Linear brightness (rows, columns) beside a line; ``u`` and ``v`` are the columns' and rows' places in pixels."""

    brightness: Brightness
    u: Floats
    v: Floats


def cut_ribbon(
    pixels: Pixels, guide: Guide, reach: tuple[float, float], size: tuple[int, int], *, cubic: bool = False
) -> Ribbon:
    """Sample the ribbon beside a line.

    Parameters
    ----------
    guide
        The line that runs along its middle.
    reach
        How far it reaches along and across from the line's middle, in pixels.
    size
        Its rows and columns. Where columns lie further apart than a pixel, they are averages.
    cubic
        Interpolate so: a pitch of a few pixels is bent by linear interpolation.
    """
    import cv2

    rows, columns = size
    step_v = 2 * reach[1] / max(rows - 1, 1)
    merged = max(1, round(2 * reach[0] / columns))
    fine = columns * merged
    step_u = 2 * reach[0] / (fine - 1)
    low, high = _box(guide, reach, pixels)
    corner = guide.at(np.array(-reach[0]), -reach[1]) - low
    piece = pixels[low[1] : high[1], low[0] : high[0]]
    sampled = cv2.warpAffine(
        piece,
        np.column_stack([guide.along * step_u, guide.across * step_v, corner]),
        (fine, rows),
        flags=(cv2.INTER_CUBIC if cubic else cv2.INTER_LINEAR) | cv2.WARP_INVERSE_MAP,
        borderMode=cv2.BORDER_REPLICATE,
    )
    if merged > 1:
        sampled = cv2.resize(sampled, (columns, rows), interpolation=cv2.INTER_AREA)
    u = -reach[0] + step_u * (np.arange(columns) * merged + (merged - 1) / 2)
    seen: Pixels = np.asarray(sampled, pixels.dtype)
    return Ribbon(luminance(seen), np.asarray(u), np.asarray(-reach[1] + step_v * np.arange(rows)))


def _box(
    guide: Guide, reach: tuple[float, float], pixels: Pixels
) -> tuple[NDArray[np.int_], NDArray[np.int_]]:
    """Return the corners of the piece of a photograph around a ribbon."""
    signs = np.array([-1.0, 1.0])
    corners = guide.at(signs[:, None] * reach[0], signs[None, :] * reach[1]).reshape(-1, 2)
    size = np.array(pixels.shape[1::-1])
    low = np.clip(np.floor(corners.min(axis=0)).astype(int) - 3, 0, size - 1)
    high = np.clip(np.ceil(corners.max(axis=0)).astype(int) + 4, low + 1, size)
    return low, high
