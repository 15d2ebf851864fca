"""A strip of a photograph along a traced line: profiles across it, at stations along it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.errors import CallError
from layout.image.photograph import Pixels
from layout.image.sampling import Brightness, luminance
from layout.quantity import Floats

LEAST_STATIONS, MOST_STATIONS = 24, 112
STATION_PX = 4.0
READ_PX = 5
"""A station averages over so many pixels along the line, where stations stand that far apart."""
PIECE_PX = 192.0


@dataclass(frozen=True, eq=False)
class Strip:
    """Stations along a trace, and the pieces of the photograph around them.

    Parameters
    ----------
    trace_px, ends_px
        The trace, shape (P, 2), and how far along it its points lie, shape (P,).
    along_px
        Where the stations stand along the trace, shape (S,), evenly.
    places_px
        The points of the trace over which each station averages, shape (S, A, 2).
    normals
        Unit vector across the trace at each station, shape (S, 2).
    mosaic
        The pieces of the photograph around the stations, side by side.
    corners_px, size_px
        Where each station's piece begins on the photograph and in the mosaic, shape (S, 2, 2), and its size (2,).
    """

    trace_px: Floats
    ends_px: Floats
    along_px: Floats
    places_px: Floats
    normals: Floats
    mosaic: Brightness
    corners_px: Floats
    size_px: Floats

    @property
    def length_px(self) -> float:
        """Length of the trace."""
        return float(self.ends_px[-1])

    @property
    def spacing_px(self) -> float:
        """How far stations stand apart."""
        return self.length_px / len(self.along_px)

    def profiles(self, across_px: Floats, offsets_px: Floats | None = None) -> Brightness:
        """Return the brightness across the trace, shape (S, U), at ``across_px`` (U,) from a course along it.

        ``offsets_px`` (S,) is how far the course lies beside the trace at each station; it runs on between them.
        """
        import cv2

        stations, reads = self.places_px.shape[:2]
        course = np.zeros((stations, reads))
        if offsets_px is not None:
            steps = (np.arange(reads) - (reads - 1) / 2) * self.spacing_px / max(reads, self.spacing_px)
            course = offsets_px[:, None] + np.gradient(offsets_px, self.spacing_px)[:, None] * steps
        beside = course[..., None] + across_px
        # single precision: pieces are small, and this is where the time goes
        beside = beside.astype(np.float32)
        near = (self.places_px - self.corners_px[:, :1]).astype(np.float32)
        rows = []
        for axis in (0, 1):
            row = near[..., axis, None] + beside * self.normals[:, None, None, axis].astype(np.float32)
            # beyond the rim of the photograph its last pixels go on
            row = np.clip(row, 0, np.float32(self.size_px[axis] - 1), dtype=np.float32)
            row += self.corners_px[:, 1, axis].astype(np.float32)[:, None, None]
            rows.append(np.asarray(row.reshape(-1, row.shape[-1]), np.float32))
        seen = np.asarray(cv2.remap(self.mosaic, rows[0], rows[1], cv2.INTER_LINEAR))
        return np.asarray(seen.reshape(stations, reads, -1).mean(axis=1), np.float32)

    def beside(self, offsets_px: Floats, most_px: float) -> Floats:
        """Return the line (S + 2, 2) that runs ``offsets_px`` (S,) beside the trace, on to its ends.

        No point lies further than ``most_px`` from the trace.
        """
        along = np.concatenate([[0.0], self.along_px, [self.length_px]])
        first, last = 1.5 * offsets_px[[0, -1]] - 0.5 * offsets_px[[1, -2]]
        offsets = np.clip(np.concatenate([[first], offsets_px, [last]]), -most_px, most_px) * (1 - 1e-12)
        normals = normals_at(self.trace_px, self.ends_px, along)
        return np.asarray(place_on(self.trace_px, self.ends_px, along) + offsets[:, None] * normals, float)


def lay_strip(pixels: Pixels, trace_px: Floats, reach_px: float) -> Strip:
    """Set stations along a trace and cut out what lies within a reach of them.

    Raises
    ------
    CallError
        If the trace is not two points or more that are apart.
    """
    points = tidy_trace(trace_px)
    runs = np.hypot(*np.diff(points, axis=0).T)
    ends = np.concatenate([[0.0], np.cumsum(runs)])
    length = float(ends[-1])
    count = int(np.clip(length / STATION_PX, LEAST_STATIONS, MOST_STATIONS))
    spacing = length / count
    along: Floats = (np.arange(count, dtype=float) + 0.5) * spacing
    reads = int(np.clip(spacing, 1, READ_PX))
    steps = (np.arange(reads) - (reads - 1) / 2) * spacing / max(reads, spacing)
    places = place_on(points, ends, np.clip(along[:, None] + steps, 0, length))
    normals = normals_at(points, ends, along)
    mosaic, corners, size = _cut(pixels, places, reach_px * normals[:, None], spacing)
    return Strip(points, ends, along, places, normals, mosaic, corners, size)


def tidy_trace(trace_px: Floats) -> Floats:
    """Return a trace without points that repeat the one before them."""
    points = np.asarray(trace_px, dtype=float)
    if points.ndim != 2 or points.shape[-1] != 2 or not np.isfinite(points).all():
        message = f"a traced line needs finite points of shape (P, 2), has {points.shape!r}; trace it again"
        raise CallError(message)
    points = (
        points[np.concatenate([[True], (np.diff(points, axis=0) != 0).any(axis=1)])]
        if len(points)
        else points
    )
    if len(points) < 2:
        message = (
            f"a traced line needs two points or more that are apart, has {len(points)}; trace its other end"
        )
        raise CallError(message)
    return points


def place_on(points: Floats, ends: Floats, along_px: Floats) -> Floats:
    """Return the places (..., 2) on a polyline at distances along it."""
    return np.stack([np.interp(along_px, ends, points[:, axis]) for axis in (0, 1)], axis=-1)


def normals_at(points: Floats, ends: Floats, along_px: Floats) -> Floats:
    """Return unit vectors across a polyline (..., 2), turned smoothly past its corners."""
    length = ends[-1]
    half = max(length / 16, 8.0)
    after = place_on(points, ends, np.clip(along_px + half, 0, length))
    before = place_on(points, ends, np.clip(along_px - half, 0, length))
    run = after - before
    run = run / np.maximum(np.hypot(run[..., 0], run[..., 1])[..., None], 1e-9)
    return np.asarray(np.stack([-run[..., 1], run[..., 0]], axis=-1), float)


def _cut(
    pixels: Pixels, places: Floats, across: Floats, spacing_px: float
) -> tuple[Brightness, Floats, Floats]:
    """Cut out pieces of one size that serve a few stations each: the box around a long line aslant would be large."""
    each = 1 if spacing_px > 2 * READ_PX else max(1, int(PIECE_PX / spacing_px))
    firsts = np.arange(0, len(places), each)
    reached = np.concatenate([places - across, places + across], axis=1)
    low = np.floor(np.minimum.reduceat(reached.min(axis=1), firsts)) - 1
    high = np.ceil(np.maximum.reduceat(reached.max(axis=1), firsts)) + 1
    whole = np.array(pixels.shape[1::-1])
    width, height = size = np.minimum((high - low).max(axis=0) + 1, whole).astype(int)
    corners = np.clip(low, 0, whole - size).astype(int)
    pieces = [pixels[top : top + height, left : left + width] for left, top in corners]
    # along their short sides: no picture may have more than 32767 pixels a side where it is sampled
    aside = 0 if width < height else 1
    own = np.zeros((len(firsts), 2))
    own[:, aside] = np.arange(len(firsts)) * size[aside]
    served = np.repeat(np.arange(len(firsts)), np.diff(np.append(firsts, len(places))))
    mosaic = luminance(np.concatenate(pieces, axis=1 - aside))
    return mosaic, np.stack([corners, own], axis=1)[served], size.astype(float)
