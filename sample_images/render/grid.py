"""The square lattice of points on which heights, colours and light are held."""

from __future__ import annotations

from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

Field = NDArray[np.float32]
Mask = NDArray[np.bool_]
Points = NDArray[np.float64]


@dataclass(frozen=True)
class Grid:
    """A lattice of ``width`` x ``height`` points; ``left``, ``upper``: the first point's x and y in mm."""

    left: float
    upper: float
    width: int
    height: int
    px_per_mm: float

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return self.height, self.width

    @property
    def x(self) -> Field:
        """Shape (1, width), mm."""
        return (self.left + np.arange(self.width, dtype=np.float32) / self.px_per_mm)[None, :]

    @property
    def y(self) -> Field:
        """Shape (height, 1), mm."""
        return (self.upper + np.arange(self.height, dtype=np.float32) / self.px_per_mm)[:, None]

    def index(self, points_mm: Points) -> Points:
        """Return where points (N, 2) lie on the lattice, in (column, row), fractions kept."""
        return np.asarray((points_mm - np.array([self.left, self.upper])) * self.px_per_mm, np.float64)

    def coarser(self, factor: float) -> Grid:
        """Return a lattice over the same area with points ``factor`` times as far apart."""
        width = max(4, round(self.width / factor) + 1)
        height = max(4, round(self.height / factor) + 1)
        return Grid(self.left, self.upper, width, height, self.px_per_mm / factor)

    def fill(self, polygon_mm: Points) -> Mask:
        """Return which points lie in a polygon (N, 2)."""
        fixed = np.round(self.index(polygon_mm) * 16).astype(np.int32)
        canvas = np.zeros(self.shape, np.uint8)
        cv2.fillPoly(canvas, [fixed], (1,), shift=4)
        return canvas.astype(bool)


def grid_over(left: float, upper: float, right: float, lower: float, px_per_mm: float) -> Grid:
    """Return the lattice over a rectangle in mm."""
    width = int(np.ceil((right - left) * px_per_mm)) + 1
    height = int(np.ceil((lower - upper) * px_per_mm)) + 1
    return Grid(left, upper, width, height, px_per_mm)


def resample(field: Field, source: Grid, target: Grid) -> Field:
    """Return a smooth field of one lattice at the points of another."""
    columns = ((target.x - source.left) * source.px_per_mm).astype(np.float32)
    rows = ((target.y - source.upper) * source.px_per_mm).astype(np.float32)
    map_x = np.broadcast_to(columns, target.shape).copy()
    map_y = np.broadcast_to(rows, target.shape).copy()
    sampled = cv2.remap(field, map_x, map_y, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    return np.asarray(sampled, np.float32)


def blur(field: Field, sigma_px: float) -> Field:
    """Return the field after a Gaussian blur; a wide one is made on a coarser lattice."""
    if sigma_px > 8:
        factor = sigma_px / 4
        size = (max(4, round(field.shape[1] / factor)), max(4, round(field.shape[0] / factor)))
        small = cv2.resize(field, size, interpolation=cv2.INTER_AREA)
        smooth = cv2.GaussianBlur(small, (0, 0), 4.0)
        back = cv2.resize(smooth, (field.shape[1], field.shape[0]), interpolation=cv2.INTER_CUBIC)
        return np.asarray(back, np.float32)
    return np.asarray(cv2.GaussianBlur(field, (0, 0), sigma_px), np.float32)
