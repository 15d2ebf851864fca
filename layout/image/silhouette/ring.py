"""Closed rings of points: evenly spaced, smoothed, cut at their corners."""

from __future__ import annotations

import math

import numpy as np

from layout.quantity import Floats

CHORD = 0.04
"""Length of the chords between which a contour turns, as a share of the perimeter."""
MOST_PIECES = 12


def clockwise(ring: Floats) -> Floats:
    """Return a ring (N, 2) so that it runs clockwise as seen, y down."""
    x, y = ring.T
    return ring if float(np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y)) >= 0 else ring[::-1]


def evenly(ring: Floats, step: float) -> Floats:
    """Return a ring (N, 2) resampled to an even spacing of about ``step``."""
    closed = np.vstack([ring, ring[:1]])
    way = np.concatenate([[0.0], np.cumsum(np.hypot(*np.diff(closed, axis=0).T))])
    at = np.linspace(0, way[-1], max(8, round(way[-1] / step)), endpoint=False)
    return np.column_stack([np.interp(at, way, closed[:, k]) for k in (0, 1)])


def cut_at_corners(ring: Floats) -> tuple[Floats, tuple[Floats, ...]]:
    """Cut an evenly spaced ring at its corners.

    A sharp corner, such as the end of a break, is where chords of 4 % of the perimeter, one before and one after,
    turn by 25 degrees or more, and those of half that length by nearly as much. A round corner, such as a tablet's own,
    is where chords of 8 % turn by 55 degrees or more. Neither the swell of a side nor the roughness of a break
    does, nor an ellipse up to 3 : 2.

    Returns
    -------
    tuple
        The ring, beginning at a corner if there is one, and its pieces; one piece if there is no corner.
    """
    chord = max(2, round(CHORD * len(ring)))
    wide, long, short = (turn_deg(ring, length) for length in (2 * chord, chord, max(1, chord // 2)))
    sharp = np.where((long > 25) & (short > 0.65 * long), long, 0)
    corners: list[int] = []
    for strength, apart in (sharp, chord), (np.where(wide > 55, wide, 0), 3 * chord // 2):
        for corner in corners:
            strength[np.arange(corner - apart, corner + apart + 1) % len(ring)] = 0
        while strength.max() > 0 and len(corners) < MOST_PIECES:
            at = int(strength.argmax())
            corners.append(_kink(ring, at, chord))
            strength[np.arange(at - apart, at + apart + 1) % len(ring)] = 0
    if not corners:
        return ring, (ring,)
    corners = sorted(set(corners))
    turned = np.roll(ring, -corners[0], axis=0)
    return turned, tuple(np.split(turned, np.array(corners[1:], dtype=int) - corners[0]))


def turn_deg(ring: Floats, chord: int) -> Floats:
    """Return by how much a ring turns at each point, between the chords before and after it, degrees."""
    before, after = ring - np.roll(ring, chord, axis=0), np.roll(ring, -chord, axis=0) - ring
    cross = before[:, 0] * after[:, 1] - before[:, 1] * after[:, 0]
    return np.asarray(np.degrees(np.abs(np.arctan2(cross, (before * after).sum(axis=1)))))


def _kink(ring: Floats, near: int, chord: int) -> int:
    """Return where near a corner two straight lines, one before and one after, fit the ring best."""
    window = ring[np.arange(near - chord, near + chord + 1) % len(ring)]
    least = max(2, chord // 2)
    misfits = [
        _off_line(window[: at + 1]) + _off_line(window[at:]) for at in range(least, len(window) - least)
    ]
    return (near - chord + least + int(np.argmin(misfits))) % len(ring)


def _off_line(points: Floats) -> float:
    """Return the summed squared distance of points from the straight line that fits them best."""
    return float(np.linalg.svd(points - points.mean(axis=0), compute_uv=False)[1] ** 2)


def running_median(values: Floats, over: int) -> Floats:
    """Return medians over an odd number of neighbours on a ring."""
    half = min(over // 2, (len(values) - 1) // 2)
    closed = np.concatenate([values[len(values) - half :], values, values[:half]])
    return np.asarray(np.median(np.lib.stride_tricks.sliding_window_view(closed, 2 * half + 1), axis=-1))


def smoothed(ring: Floats, sd: float) -> Floats:
    """Return a ring, or columns along it, smoothed along the ring, ``sd`` in points."""
    half = min(math.ceil(4 * sd), len(ring) - 1)
    kernel = np.exp(-0.5 * (np.arange(-half, half + 1) / sd) ** 2)
    closed = np.vstack([ring[len(ring) - half :], ring, ring[:half]])
    kernel /= kernel.sum()
    return np.column_stack([np.convolve(column, kernel, "valid") for column in closed.T])


def normals_of(ring: Floats, sd: float) -> Floats:
    """Return the unit normals of a clockwise ring, pointing inwards, of the ring smoothed over ``sd`` points."""
    smooth = smoothed(ring, sd)
    along = np.roll(smooth, -1, axis=0) - np.roll(smooth, 1, axis=0)
    along /= np.maximum(np.hypot(*along.T), 1e-9)[:, None]
    return np.column_stack([-along[:, 1], along[:, 0]])
