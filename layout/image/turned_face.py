"""A face turned by its rulings, and how much each place of it looks like a groove."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.image.groove.course import evidence_of
from layout.image.photograph import Pixels
from layout.image.sampling import Brightness, luminance
from layout.quantity import Floats

FINE = 6.0
"""The face is looked at in pixels of which a groove's width has so many."""
SMALLEST = 4 * int(FINE)
"""A face of fewer pixels has no room for rulings."""
BLOCK = 2.0
"""Evidence is pooled over so many widths along the rulings."""
AROUND = 8.0
"""Brightness is compared with that of so many widths of the face around."""
INSIDE = (1.0, 2.0)
"""What lies nearer to the outline than so many widths, along and across, is left out: edges look like grooves."""


@dataclass(frozen=True, eq=False)
class Face:
    """A face turned so that rulings run along rows.

    Parameters
    ----------
    evidence
        How much each block of each row looks like the groove, shape (rows, blocks); 0 beside the face.
    inside
        Which blocks lie on the face.
    corner, step_px, frame
        The place of the first row's beginning along and across; row spacing; unit vectors along and across.
    """

    evidence: Brightness
    inside: NDArray[np.bool_]
    corner: Floats
    step_px: float
    frame: Floats

    @property
    def along(self) -> Floats:
        """Where the blocks' middles lie along the rulings, from the corner, px."""
        return np.asarray((np.arange(self.evidence.shape[1]) + 0.5) * self.step_px * BLOCK * FINE, float)

    def points(self, path: NDArray[np.intp], blocks: NDArray[np.intp]) -> Floats:
        """Return the points (P, 2) of a path (rows for all blocks) at some blocks."""
        turned = self.corner + np.column_stack([self.along, path * self.step_px])[blocks]
        return np.asarray(turned @ self.frame, float)

    def rows_of(self, line: Floats) -> Floats:
        """Return the rows at which a line (P, 2) passes the blocks."""
        turned = line @ self.frame.T - self.corner
        order = np.argsort(turned[:, 0])
        return np.asarray(np.interp(self.along, turned[order, 0], turned[order, 1]) / self.step_px, float)


def turn_face(pixels: Pixels, polygon: Floats, frame: Floats, width_px: float, angle: int) -> Face:
    """Turn a face by its rulings, at a scale at which they are six pixels wide, and look for the like."""
    import cv2

    size = np.array(pixels.shape[1::-1])
    low, high = (
        np.clip(np.round(edge).astype(int), 0, size - 1)
        for edge in (polygon.min(axis=0), polygon.max(axis=0))
    )
    piece = np.ascontiguousarray(pixels[low[1] : high[1] + 1, low[0] : high[0] + 1])
    step = max(1.0, width_px / FINE)
    small = np.maximum(np.round(np.array(piece.shape[1::-1]) / step).astype(int), 1)
    shrunk = luminance(
        np.asarray(cv2.resize(piece, small.tolist(), interpolation=cv2.INTER_AREA), pixels.dtype)
    )
    turned = polygon @ frame.T
    corner = turned.min(axis=0)
    wide, tall = np.ceil(np.ptp(turned, axis=0) / step).astype(int) + 1
    # from the turned face to the photograph, and on to the shrunk piece, whose pixels cover `factor` px each
    factor = np.array(piece.shape[1::-1]) / small
    back = np.column_stack([frame.T * step, corner @ frame - low + 0.5]) / factor[:, None]
    back[:, 2] -= 0.5
    flags = cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP
    seen = cv2.warpAffine(shrunk, back, (int(wide), int(tall)), flags=flags, borderMode=cv2.BORDER_REPLICATE)
    mask = np.zeros((tall, wide), np.uint8)
    cv2.fillPoly(mask, [np.round((turned - corner) / step).astype(np.int32)], (1,))
    kernel = np.ones([2 * int(part * FINE) + 1 for part in INSIDE[::-1]], np.uint8)
    inside = np.asarray(cv2.erode(mask, kernel, borderValue=0), np.float32)
    evidence, blocks = _evidence(np.asarray(seen, np.float32), inside, angle)
    return Face(evidence, blocks, corner, step, frame)


def _evidence(seen: Brightness, inside: Brightness, angle: int) -> tuple[Brightness, NDArray[np.bool_]]:
    """Return the evidence of grooves (rows, blocks) in a turned face, and which blocks lie on it."""
    import cv2

    if min(seen.shape) < SMALLEST:
        return np.zeros((len(seen), 1), np.float32), np.zeros((len(seen), 1), bool)
    around = (int(AROUND * FINE) | 1,) * 2
    level = cv2.blur(seen * inside, around) / np.maximum(cv2.blur(inside, around), 1e-3)
    contrast = np.clip(seen / np.maximum(level, 1e-3) - 1, -0.8, 1) * inside
    long = int(BLOCK * FINE)
    many = seen.shape[1] // long
    pooled, covered = (
        part[:, : many * long].reshape(len(seen), many, long).mean(axis=2) for part in (contrast, inside)
    )
    blocks = covered > 0.9
    matched = evidence_of(np.ascontiguousarray(pooled.T, np.float32), FINE, angle).T
    return np.asarray(matched * blocks, np.float32), blocks
