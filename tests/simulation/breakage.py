"""What survives of a tablet whose left side is lost: original edges, breaks, and the traced points on them.

A fragment whose right side is lost is the mirror image, made by the caller.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from tests.simulation.shapes import Outline

Floats = NDArray[np.float64]
Ints = NDArray[np.int_]

ATTEMPTS = 100


@dataclass(frozen=True, eq=False)
class Piece:
    """One piece of a traced outline.

    Parameters
    ----------
    edge
        ``upper``, ``right``, ``lower`` or ``break``.
    points
        Shape (P, 2), mm in the tablet's frame, the wobble of the edge included.
    index
        Which of the outline's even steps the points are, on an original edge; else nothing.
    """

    edge: str
    points: Floats
    index: Ints | None = None


def break_off(
    rng: np.random.Generator, outline: Outline, edge: Floats, lost: float, *, corner_lost: bool
) -> list[Piece]:
    """Break the left side off, and the lower right corner too if so wished.

    Parameters
    ----------
    edge
        Shape (N, 2): the outline's points with their wobble.
    lost
        The share of the width that is lost, on the average over the height.

    Returns
    -------
    list of Piece
        In order around the fragment; each piece begins where the last one ended.
    """
    for _ in range(ATTEMPTS):
        pieces = attempt(rng, outline, edge, lost, corner_lost)
        if pieces and shapely.Polygon(ring_of(pieces)).is_valid:
            return pieces
    message = f"no sound fragment in {ATTEMPTS} attempts"
    raise RuntimeError(message)


def ring_of(pieces: list[Piece]) -> Floats:
    """Return the outline of the fragment, shared ends once."""
    return np.concatenate([piece.points[:-1] for piece in pieces])


def attempt(
    rng: np.random.Generator, outline: Outline, edge: Floats, lost: float, corner_lost: bool
) -> list[Piece]:
    """Try one break; return nothing if it cuts the outline in more than two places."""
    heights, course = course_of_break(rng, outline, lost)
    survives = edge[:, 0] > np.interp(edge[:, 1], heights, course)
    change = np.flatnonzero(np.diff(survives.astype(int)))
    if len(change) != 2 or survives[0]:
        return []
    first, last = change[0] + 1, change[1]
    to_right, to_lower = corners(rng, outline)
    if not first + 3 < to_right < to_lower < last - 3:
        return []

    step = outline.perimeter / len(edge)
    traced = traced_index(rng, [first, to_right, to_lower, last], step)
    ends = [("upper", first, to_right), ("right", to_right, to_lower), ("lower", to_lower, last)]
    pieces = [part(edge, traced, *end) for end in ends]
    if corner_lost:
        pieces[1:] = without_corner(rng, pieces[1], pieces[2], outline.halves[3])
    start, stop = edge[last], edge[first]
    between = (heights < start[1] - 1.0) & (heights > stop[1] + 1.0)
    inner = np.column_stack([course, heights])[between][::-1]
    return [*pieces, Piece("break", np.concatenate([[start], inner, [stop]]))]


def part(edge: Floats, traced: Ints, name: str, start: int, stop: int) -> Piece:
    """Return the piece of original edge between two traced points."""
    index = traced[(traced >= start) & (traced <= stop)]
    return Piece(name, edge[index], index)


def course_of_break(rng: np.random.Generator, outline: Outline, lost: float) -> tuple[Floats, Floats]:
    """Return the break as x over y: a line with a slope and a random walk about it."""
    left, right, above, below = outline.halves
    heights = np.arange(-above - 4.0, below + 4.0, 1.75)
    walk = np.cumsum(rng.normal(0.0, 0.5, len(heights)))
    steepest = lost * (left + right) / (above + below)
    slope = np.clip(rng.normal(0.0, np.tan(np.radians(8.0))), -steepest, steepest)
    course = slope * heights + walk
    return heights, course - course.mean() - left + lost * (left + right)


def corners(rng: np.random.Generator, outline: Outline) -> tuple[int, int]:
    """Return where an observer lets the upper edge end and the lower one begin: about the corners."""
    left, right, above, below = outline.halves
    x = outline.points[:, 0] / np.where(outline.points[:, 0] < 0, left, right)
    y = outline.points[:, 1] / np.where(outline.points[:, 1] < 0, above, below)
    angle = np.degrees(np.arctan2(y, x))
    at = np.array([-45.0, 45.0]) + rng.normal(0.0, 4.0, 2)
    upper, lower = (int(np.argmin(np.abs(angle - one))) for one in at)
    return upper, lower


def traced_index(rng: np.random.Generator, ends: list[int], step: float) -> Ints:
    """Return which steps are traced: one every 1.5 to 2 mm, and the ends of the pieces."""
    gaps = rng.uniform(1.5, 2.0, int((ends[-1] - ends[0]) * step / 1.5) + 1)
    free = ends[0] + np.round(np.cumsum(gaps) / step).astype(int)
    near_end = (np.abs(free[:, None] - np.array(ends)) * step < 0.8).any(axis=1)
    return np.unique(np.concatenate([free[~near_end & (free < ends[-1])], ends]))


def without_corner(rng: np.random.Generator, right: Piece, lower: Piece, half_height: float) -> list[Piece]:
    """Return the right and the lower edge with the corner between them broken off."""
    assert right.index is not None
    assert lower.index is not None
    reach = rng.uniform(0.25, 0.5, 2) * half_height
    keep_right = int(np.sum(distance_from(right.points, right.points[-1]) > reach[0]))
    lose_lower = int(np.sum(distance_from(lower.points, lower.points[0]) <= min(reach[1], 20.0)))
    keep_right, lose_lower = max(keep_right, 3), min(lose_lower, len(lower.points) - 3)
    start, stop = right.points[keep_right - 1], lower.points[lose_lower]
    count = max(int(np.hypot(*(stop - start)) / 1.75), 3)
    share = np.linspace(0.0, 1.0, count)[:, None]
    inward = np.array([-0.7, -0.7]) * (1.5 * np.sin(np.pi * share))
    rough = rng.normal(0.0, 0.4, (count, 1)) * np.sin(np.pi * share) * np.array([0.7, 0.7])
    chord = start + share * (stop - start) + inward + rough
    chord[[0, -1]] = start, stop
    return [
        Piece("right", right.points[:keep_right], right.index[:keep_right]),
        Piece("break", chord),
        Piece("lower", lower.points[lose_lower:], lower.index[lose_lower:]),
    ]


def distance_from(points: Floats, point: Floats) -> Floats:
    """Return the distances of points (P, 2) from one point."""
    return np.asarray(np.hypot(*(points - point).T))
