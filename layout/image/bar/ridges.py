"""Lines and edges in a profile, to a fraction of a pixel.

Two filters of one width see a profile: the even one answers to lines, the odd one to edges. Where a line is
symmetric the odd answer vanishes at its middle, and where an edge is symmetric the even answer does; both are
smooth there, so that the place is found between pixels, and neither is moved by the brightness around.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.quantity import Floats


@dataclass(frozen=True, eq=False)
class Answers:
    """What both filters answer along a profile, each (N,): positive for a bright line, for a rise of brightness."""

    even: Floats
    odd: Floats


def line_filters(width: float, step: float) -> tuple[Floats, Floats]:
    """Return filters for lines: one period of a wave as long as ``width`` under a Hann window twice as long."""
    x, window = _reach(width, step)
    even = window * np.cos(2 * np.pi * x / width)
    odd = np.asarray(window * np.sin(2 * np.pi * x / width), float)
    even -= window * even.sum() / window.sum()
    return np.asarray(2 * even / window.sum()), np.asarray(2 * odd / window.sum())


def edge_filters(width: float, step: float) -> tuple[Floats, Floats]:
    """Return filters for edges: second and first derivative of a squared Hann window, which do not ring."""
    x, window = _reach(width, step)
    even = np.cos(np.pi * x / width) + np.cos(2 * np.pi * x / width)
    odd = 2 * window * np.sin(np.pi * x / width)
    even -= window * even.sum() / window.sum()
    total = float(np.abs(odd).sum())
    return np.asarray(even / total), np.asarray(odd / total)


def _reach(width: float, step: float) -> tuple[Floats, Floats]:
    """Return places and a Hann window from ``width`` before to ``width`` behind."""
    reach = max(2, int(np.ceil(width / step)) - 1)
    x = np.arange(-reach, reach + 1) * step
    return np.asarray(x, float), np.asarray(0.5 * (1 + np.cos(np.pi * np.clip(x / width, -1, 1))))


def answer(profile: Floats, filters: tuple[Floats, Floats]) -> Answers:
    """Let an even and an odd filter see a profile (N,)."""
    reach = len(filters[0]) // 2
    padded = np.pad(profile, reach, mode="edge")
    even, odd = (np.correlate(padded, one, "valid") for one in filters)
    return Answers(even, odd)


def peaks_of(strength: Floats, least: float) -> np.ndarray:
    """Return the indices of the local maxima above a limit."""
    inner = strength[1:-1]
    return np.flatnonzero((inner > least) & (inner >= strength[:-2]) & (inner > strength[2:])) + 1


def zero_near(values: Floats, at: np.ndarray, reach: int) -> Floats:
    """Return where falling values cross zero nearest to some indices, as fractional indices; NaN where they do not.

    Parameters
    ----------
    values
        Shape (N,); a crossing from above to below counts.
    at
        Indices, shape (M,).
    reach
        How many samples away a crossing may lie.
    """
    crossing = np.flatnonzero((values[:-1] > 0) & (values[1:] <= 0))
    if len(crossing) == 0:
        return np.full(len(at), np.nan)
    place = crossing + values[crossing] / (values[crossing] - values[crossing + 1])
    right = np.clip(np.searchsorted(place, at), 0, len(place) - 1)
    left = np.maximum(right - 1, 0)
    nearest = np.where(np.abs(place[left] - at) <= np.abs(place[right] - at), place[left], place[right])
    return np.where(np.abs(nearest - at) <= reach, nearest, np.nan)
