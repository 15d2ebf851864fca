"""Lengths between rulings and the outline: column widths, preserved extent, margin, lost space.

Shapes are fitted in the face frame at the nominal scale; each length is taken between points that are mapped
through the scale row by row, those of the face and those of the outline at their own heights.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.frame import Frame, Plane, Scale
from layout.outline import Outline
from layout.quantity import Floats
from layout.rulings import Line

TAPER_PER_MM = 100.0


@dataclass(frozen=True, eq=False)
class Mapped:
    """The way from the face frame to millimetres, row by row: for points of the inscribed face, and of the outline."""

    face: Plane
    outline: Plane

    @classmethod
    def of(cls, scale: Scale, frame: Frame) -> Mapped:
        """Lay a scale's planes over the face frame."""
        return cls(frame.of_plane(scale.face), frame.of_plane(scale.outline))


def measure_column(left: Line, right: Line, mapped: Mapped) -> tuple[Floats, Floats]:
    """Return a column's width and its taper in mm per 100 mm of height, each of shape (N,).

    The width is the distance across, averaged over the stretch where both rulings are traced; where no such
    stretch is, at the place between them.
    """
    top, bottom = sorted(
        (max(left.reach[0], right.reach[0]), min(left.reach[1], right.reach[1])),
    )
    ends = np.stack([left.at(top), left.at(bottom), right.at(top), right.at(bottom)], axis=1)
    l0, l1, r0, r1 = np.moveaxis(mapped.face.map(ends), 1, 0)
    along = _unit((l1 - l0) + (r1 - r0)) if bottom > top else _unit(_run(left, mapped))
    at_top, at_bottom = _across(along, r0 - l0), _across(along, r1 - l1)
    height = np.hypot(*((l1 - l0 + r1 - r0) / 2).T)
    taper = TAPER_PER_MM * (at_bottom - at_top) / np.where(height > 0, height, np.inf)
    return (at_top + at_bottom) / 2, taper


def _run(line: Line, mapped: Mapped) -> Floats:
    """Return a vertical line's mapped run over 10 mm, (N, 2)."""
    start, end = line.at(line.middle - 5), line.at(line.middle + 5)
    return np.asarray(np.diff(mapped.face.map(np.stack([start, end], axis=1)), axis=1)[:, 0])


def _unit(vectors: Floats) -> Floats:
    """Return vectors (N, 2) at unit length."""
    return np.asarray(vectors / np.hypot(*vectors.T)[:, None])


def _across(along: Floats, vectors: Floats) -> Floats:
    """Return the part of vectors (N, 2) across unit directions, positive to the right of downwards."""
    return np.asarray(vectors[:, 0] * along[:, 1] - vectors[:, 1] * along[:, 0])


@dataclass(frozen=True, eq=False)
class Extent:
    """The whole tablet's tangents in millimetres, row by row, and the direction of its width."""

    left: Floats
    right: Floats
    across: Floats
    width: Floats
    height: Floats

    def to_edge(self, point_mm: Floats, side: str) -> Floats:
        """Return how far points (N, 2) stand from the tangent on a side, (N,)."""
        if side == "left":
            return np.asarray(((point_mm - self.left) * self.across).sum(axis=1))
        return np.asarray(((self.right - point_mm) * self.across).sum(axis=1))


def measure_extent(outline: Outline, mapped: Mapped) -> Extent:
    """Return the whole tablet's width and height between its tangents."""
    left, right, upper, lower = np.moveaxis(mapped.outline.map(outline.tangents), 1, 0)
    return Extent(
        left=left,
        right=right,
        across=_unit(right - left),
        width=np.hypot(*(right - left).T),
        height=np.hypot(*(lower - upper).T),
    )


def measure_to_edge(line: Line, side: str, extent: Extent, mapped: Mapped) -> Floats:
    """Return the distance from a vertical ruling, at the middle of its trace, to the whole tablet's edge."""
    point = mapped.face.map(line.at(line.middle)[:, None])[:, 0]
    return extent.to_edge(point, side)


def polygon_area(points: Floats) -> float:
    """Return the area inside a closed polygon (P, 2), by the shoelace formula."""
    x, y = points.T
    return float(abs(x @ np.roll(y, -1) - y @ np.roll(x, -1)) / 2)


def polygon_centroid(points: Floats) -> Floats:
    """Return the centroid of the area inside a polygon (P, 2); of the points where it has no area."""
    x, y = (points - points.mean(axis=0)).T
    cross = x * np.roll(y, -1) - y * np.roll(x, -1)
    if abs(cross.sum()) < 1e-9:
        return np.asarray(points.mean(axis=0))
    sums = np.array([(x + np.roll(x, -1)) @ cross, (y + np.roll(y, -1)) @ cross])
    return np.asarray(points.mean(axis=0) + sums / (3 * cross.sum()))
