"""Where a traced outline crosses itself, and the mend of tiny crossings.

A hand that traces an edge runs a little past the corner where the next piece begins, or hesitates and ties a
loop; the outline then crosses itself within a few pixels. That is no error of observation, and what stands
out is cut off at the crossing. Any other crossing is one, and is refused.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.notices import Caveat, warn
from layout.quantity import Floats
from layout.record.model import Record, View

Ints = NDArray[np.intp]

POINTING_PX = 1.0
"""Standard uncertainty of a traced point where the record gives none."""

JOINT = 10.0
"""A crossing is tiny when it cuts off no more than so many pointing uncertainties of either piece."""

SAME_PX = 1e-6
"""Two points that are closer are one."""

PAIRS_AT_ONCE = 1_000_000


@dataclass(frozen=True)
class Crossing:
    """Two segments that meet: (piece, segment) of each, the earlier one first, and where."""

    first: tuple[int, int]
    second: tuple[int, int]
    at: tuple[float, float]


def find_crossings(pieces: list[Floats]) -> list[Crossing]:
    """Find where the segments of traced pieces cross or touch, joints of neighbouring segments apart.

    Parameters
    ----------
    pieces
        Each of shape (P, 2), px; P may be 0 or 1.

    Examples
    --------
    >>> find_crossings([np.array([[0.0, 0.0], [4.0, 4.0], [4.0, 0.0], [0.0, 4.0]])])
    [Crossing(first=(0, 0), second=(0, 2), at=(2.0, 2.0))]
    >>> find_crossings([np.array([[0.0, 0.0]])])
    []
    """
    starts, ends, owners = _segments(pieces)
    found = []
    for i, j in _pairs_side_by_side(starts, ends):
        neighbours = (owners[j, 0] == owners[i, 0]) & (j == i + 1)
        i, j = i[~neighbours], j[~neighbours]
        meet = _meet(starts[i], ends[i], starts[j], ends[j])
        found += list(zip(i[meet], j[meet], strict=True))
    crossings = []
    for i, j in sorted(found):
        at = _meeting_point(starts[i], ends[i], starts[j], ends[j])
        crossings.append(Crossing(_owner(owners[i]), _owner(owners[j]), (float(at[0]), float(at[1]))))
    return [crossing for crossing in crossings if not _is_shared_end(crossing, pieces)]


def mend_crossings(pieces: list[Floats], tiny_px: float) -> tuple[list[Floats], list[Crossing]]:
    """Cut off what crosses within ``tiny_px``: ends of neighbouring pieces at their joint, and loops.

    Pieces follow one another around the fragment, the first after the last.

    Parameters
    ----------
    pieces
        Each of shape (P, 2), px.
    tiny_px
        How far from the crossing the points may lie that are cut off.

    Returns
    -------
    pieces
        The pieces, shortened where they were cut.
    mended
        The crossings that are gone; what is left, ``find_crossings`` tells.
    """
    mended: list[Crossing] = []
    crossings = find_crossings(pieces)
    # a cut renumbers the points behind it, so that each is followed by a new search; it never adds a crossing
    for _ in range(len(crossings)):
        cuts = ((crossing, _cut(crossing, pieces, tiny_px)) for crossing in crossings)
        done = next(((crossing, shorter) for crossing, shorter in cuts if shorter is not None), None)
        if done is None:
            break
        mended.append(done[0])
        pieces = done[1]
        crossings = find_crossings(pieces)
    return pieces, mended


def mend_outlines(record: Record) -> tuple[Record, tuple[Caveat, ...]]:
    """Return the record with tiny crossings of its outlines cut off, and a caveat for each.

    The record that was read is left as it is, so that nothing is mended in the file unasked.
    """
    caveats: list[Caveat] = []
    views = list(record.views)
    for number, view in enumerate(record.views):
        pieces, mended = mend_crossings(pieces_of(view), tiny_px(view))
        if mended:
            changed = (
                piece.model_copy(update={"points": tuple(map(tuple, points.tolist()))})
                for piece, points in zip(view.outline, pieces, strict=True)
            )
            views[number] = view.model_copy(update={"outline": tuple(changed)})
            caveats += [_caveat(number, crossing) for crossing in mended]
    if not caveats:
        return record, ()
    return record.model_copy(update={"views": tuple(views)}), tuple(caveats)


def pieces_of(view: View) -> list[Floats]:
    """Return the outline's pieces as arrays of shape (P, 2), px."""
    return [np.array(piece.points, dtype=float).reshape(-1, 2) for piece in view.outline]


def tiny_px(view: View) -> float:
    """Return how much may be cut off a piece of this view's outline, px."""
    return JOINT * (POINTING_PX if view.pointing_px is None else view.pointing_px)


def _caveat(number: int, crossing: Crossing) -> Caveat:
    """Say which two pieces were cut, and where."""
    x, y = crossing.at
    return warn(
        "outline.crossing",
        view=number,
        first=crossing.first[0],
        second=crossing.second[0],
        x=f"{x:.1f}",
        y=f"{y:.1f}",
    )


def _segments(pieces: list[Floats]) -> tuple[Floats, Floats, Ints]:
    """Return starts and ends (S, 2) and (piece, point) (S, 2) of all segments that have a length."""
    starts = np.vstack([np.empty((0, 2)), *(points[:-1] for points in pieces)])
    ends = np.vstack([np.empty((0, 2)), *(points[1:] for points in pieces)])
    owners = [(piece, point) for piece, points in enumerate(pieces) for point in range(len(points) - 1)]
    long = (starts != ends).any(axis=1)
    return starts[long], ends[long], np.array(owners, dtype=np.intp).reshape(-1, 2)[long]


def _pairs_side_by_side(starts: Floats, ends: Floats) -> Iterator[tuple[Ints, Ints]]:
    """Yield pairs (i < j) of segments whose boxes overlap: sorted by x, no pair is left out."""
    low, high = np.minimum(starts, ends), np.maximum(starts, ends)
    order = np.argsort(low[:, 0], kind="stable")
    position = np.arange(len(order))
    count = np.searchsorted(low[order, 0], high[order, 0], side="right") - position - 1
    rows_at_once = max(1, PAIRS_AT_ONCE // max(1, len(order)))
    for begin in range(0, len(order), rows_at_once):
        rows = position[begin : begin + rows_at_once]
        first = np.repeat(rows, count[rows])
        second = np.concatenate([np.arange(row + 1, row + 1 + count[row]) for row in rows])
        a, b = order[first], order[second]
        overlap = (low[a, 1] <= high[b, 1]) & (low[b, 1] <= high[a, 1])
        yield np.minimum(a, b)[overlap], np.maximum(a, b)[overlap]


def _cross(u: Floats, v: Floats) -> Floats:
    """Return the z component of the cross product of vectors (S, 2)."""
    return u[..., 0] * v[..., 1] - u[..., 1] * v[..., 0]


def _meet(a: Floats, b: Floats, c: Floats, d: Floats) -> NDArray[np.bool_]:
    """Say which ab and cd, whose boxes overlap, meet: neither lies beside the other's line."""
    across_ab = _cross(b - a, c - a) * _cross(b - a, d - a)
    across_cd = _cross(d - c, a - c) * _cross(d - c, b - c)
    return (across_ab <= 0) & (across_cd <= 0)


def _meeting_point(a: Floats, b: Floats, c: Floats, d: Floats) -> Floats:
    """Return where ab meets cd; of two that lie on one line, the beginning of cd."""
    to_a, to_b = _cross(d - c, a - c), _cross(d - c, b - c)
    if to_a == to_b:
        return c
    point: Floats = a + (b - a) * to_a / (to_a - to_b)
    return point


def _is_shared_end(crossing: Crossing, pieces: list[Floats]) -> bool:
    """Say whether two ends of pieces stand on one point, which closes an outline and crosses nothing."""
    (first, _), (second, _) = crossing.first, crossing.second
    if first == second:
        ends = pieces[first][[0, -1]]
        return bool((_distance(ends, crossing.at) < SAME_PX).all())
    return all((_distance(pieces[piece][[0, -1]], crossing.at) < SAME_PX).any() for piece in (first, second))


def _cut(crossing: Crossing, pieces: list[Floats], tiny: float) -> list[Floats] | None:
    """Return the pieces cut at a crossing, or None where that would cut off more than a tiny bit."""
    (i, a), (j, b) = crossing.first, crossing.second
    at, cut = np.array([crossing.at]), list(pieces)
    if i == j and _is_near(pieces[i][a + 1 : b + 1], crossing.at, tiny):
        cut[i] = np.vstack([pieces[i][: a + 1], at, pieces[i][b + 1 :]])
        return cut
    for (tail, last), (head, first) in (((i, a), (j, b)), ((j, b), (i, a))):
        follows = head == (tail + 1) % len(pieces)
        cut_off = np.vstack([pieces[tail][last + 1 :], pieces[head][: first + 1]])
        if follows and _is_near(cut_off, crossing.at, tiny):
            # one after the other: a single piece that closes on itself is both tail and head
            cut[tail] = np.vstack([cut[tail][: last + 1], at])
            cut[head] = np.vstack([at, cut[head][first + 1 :]])
            return cut
    return None


def _is_near(points: Floats, at: tuple[float, float], tiny: float) -> bool:
    """Say whether all points lie within ``tiny`` of one."""
    return bool((_distance(points, at) <= tiny).all())


def _distance(points: Floats, at: tuple[float, float]) -> Floats:
    """Return the distances of points (P, 2) from one point, px."""
    distance: Floats = np.hypot(points[:, 0] - at[0], points[:, 1] - at[1])
    return distance


def _owner(row: Ints) -> tuple[int, int]:
    """Return piece and segment as whole numbers of Python's own."""
    return int(row[0]), int(row[1])
