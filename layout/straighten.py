"""Moving all points of a view: out of the lens's distortion, and to where a square camera would have seen them."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from layout.lens import Lens, undistort
from layout.quantity import Floats
from layout.record.model import Point, View

Move = Callable[[Floats], Floats]


def free_of_lens(view: View, lens: Lens) -> View:
    """Return a view whose points a lens without distortion would have shown.

    Raises
    ------
    CallError
        If a point lies where the lens, as calibrated, shows nothing.
    """
    return moved(view, lambda points: undistort(lens, points))


def moved(view: View, move: Move) -> View:
    """Return a view with all its points moved by a function of points (P, 2)."""

    def many(points: tuple[Point, ...]) -> tuple[Point, ...]:
        if not points:
            return points
        return tuple((float(x), float(y)) for x, y in move(np.array(points, dtype=float)))

    def one(point: Point) -> Point:
        return many((point,))[0]

    scale = view.scale.model_copy(
        update={
            "marks": tuple(mark.model_copy(update={"at": one(mark.at)}) for mark in view.scale.marks),
            "known": tuple(
                known.model_copy(update={"from_": one(known.from_), "to": one(known.to)})
                for known in view.scale.known
            ),
        }
    )
    return view.model_copy(
        update={
            "scale": scale,
            "outline": tuple(
                piece.model_copy(update={"points": many(piece.points)}) for piece in view.outline
            ),
            "rulings": tuple(
                ruling.model_copy(update={"points": many(ruling.points)}) for ruling in view.rulings
            ),
            "writing": tuple(
                entry.model_copy(update={"from_": one(entry.from_), "to": one(entry.to)})
                for entry in view.writing
            ),
        }
    )
