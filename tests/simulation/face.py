"""What a scribe put on the face: column boundaries, line rulings, and numbers in the columns.

Lines are straight lines in the tablet's frame, mm; the wobble of a ruling is added where it is traced.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from tests.simulation.camera import turned
from tests.simulation.wobble import sample_at

Floats = NDArray[np.float64]

STEPS = np.arange(-110.0, 110.0, 0.5)
RULING_WOBBLE = 0.1
RULING_SCATTER_DEG = 0.2
SHORTEST_RULING = 12.0
ATTEMPTS = 200


@dataclass(frozen=True, eq=False)
class Line:
    """A ruling: a point, a direction, and from where to where along it the fragment still shows it."""

    origin: Floats
    direction: Floats
    stretch: tuple[float, float]

    def at(self, along: Floats | float) -> Floats:
        """Return points of the straight line."""
        return np.asarray(self.origin + np.multiply.outer(along, self.direction))

    @property
    def length(self) -> float:
        """How much of it survives, mm."""
        return self.stretch[1] - self.stretch[0]

    @property
    def middle(self) -> Floats:
        """The middle of the surviving stretch."""
        return self.at((self.stretch[0] + self.stretch[1]) / 2)


@dataclass(frozen=True)
class Lines:
    """The regular lines of writing: where they begin, and how the spacing goes on."""

    first: float
    pitch: float
    drift: float
    count: int

    def at(self, index: Floats | float) -> Floats:
        """Return the regular place of a ruling by its number, from 0."""
        number = np.asarray(index, dtype=float)
        return np.asarray(self.first + self.pitch * number + self.drift * number * (number - 1) / 2)

    def pitch_at(self, index: float) -> float:
        """Return the regular spacing about a ruling: the derivative of the place."""
        return self.pitch + self.drift * (index - 0.5)


@dataclass(frozen=True, eq=False)
class Face:
    """The surviving face: rulings from left to right, and by their true number from above."""

    turn_deg: float
    lines: Lines
    vertical: list[Line]
    horizontal: dict[int, Line]
    right_survives: bool

    @property
    def outermost(self) -> Line:
        """The boundary nearest to the surviving edge."""
        return self.vertical[-1 if self.right_survives else 0]

    @property
    def nearest_to_break(self) -> Line:
        """The boundary nearest to the break."""
        return self.vertical[0 if self.right_survives else -1]

    def pitch(self) -> float:
        """Return the line pitch at the middle of the traced rulings."""
        return self.lines.pitch_at((min(self.horizontal) + max(self.horizontal)) / 2)


def draw_face(
    rng: np.random.Generator, fragment: shapely.Polygon, halves: tuple[float, ...], *, drift: float, side: int
) -> Face:
    """Rule the surviving part of a face.

    Parameters
    ----------
    fragment
        The surviving part, mm, in the tablet's frame.
    halves
        To the left, to the right, above and below, mm.
    drift
        By how much the pitch grows from line to line, mm.
    side
        1 where the right edge survives, -1 where the left one does.
    """
    turn = rng.normal(0.0, 0.5)
    inner = fragment.buffer(-1.0)
    shapely.prepare(inner)
    field_of_writing = (-halves[2] + rng.uniform(4.0, 8.0), halves[3] - rng.uniform(3.0, 7.0))
    outermost = (halves[1] if side > 0 else halves[0]) - rng.uniform(3.0, 8.0)
    for _ in range(ATTEMPTS):
        vertical = [
            Line(line.origin, line.direction, clipped(line.stretch, field_of_writing))
            for x in boundaries(rng, inner, outermost, side)
            for line in [draw_line(rng, inner, np.array([side * x, 0.0]), turn, upright=True)]
        ]
        vertical = [line for line in vertical if line.length >= SHORTEST_RULING][::-side]
        if len(vertical) >= 3:
            break
    else:
        message = f"no room for three column boundaries in {ATTEMPTS} attempts"
        raise RuntimeError(message)

    pitch = rng.uniform(5.0, 9.0)
    room = field_of_writing[1] - field_of_writing[0]
    count = min(int(rng.integers(5, 13)), int(room // pitch) + 1)
    lines = Lines(field_of_writing[0], pitch, drift, count)
    horizontal = rule_lines(rng, inner, lines, turn, side * outermost)
    return Face(turn, lines, vertical, horizontal, side > 0)


def rule_lines(
    rng: np.random.Generator, inner: shapely.Polygon, lines: Lines, turn: float, outermost: float
) -> dict[int, Line]:
    """Rule the lines of writing from the break to the outermost boundary; three in ten are not seen."""
    middle = (inner.centroid.x + outermost) / 2
    for _ in range(ATTEMPTS):
        ruled = {}
        for number in np.flatnonzero(rng.random(lines.count) > 0.3).tolist():
            place = np.array([middle, lines.at(number) + rng.normal(0.0, 0.15)])
            line = draw_line(rng, inner, place, turn, upright=False)
            low, high = line.stretch
            reach = outermost - middle
            stretch = (low, min(high, reach)) if outermost > 0 else (max(low, reach), high)
            if stretch[1] - stretch[0] >= SHORTEST_RULING:
                ruled[number] = Line(line.origin, line.direction, stretch)
        if identifiable(sorted(ruled)):
            return ruled
    message = f"no room for three lines in {ATTEMPTS} attempts"
    raise RuntimeError(message)


def identifiable(numbers: list[int]) -> bool:
    """Tell whether the gaps have no common divisor: else nobody could tell the pitch from its multiple."""
    return len(numbers) >= 3 and np.gcd.reduce(np.diff(numbers)) == 1


def boundaries(rng: np.random.Generator, inner: shapely.Polygon, outermost: float, side: int) -> Floats:
    """Return distances of the column boundaries from the axis, the outermost first, towards the break."""
    left, _, right, _ = inner.bounds
    room = outermost - (left if side > 0 else -right) - 2.0
    columns = int(rng.integers(2, int(np.clip(room // 9.0, 2, 6)) + 1))
    narrowest = min(8.0, room / (columns + 0.5))
    spare = max(room * rng.uniform(0.65, 1.0) - columns * narrowest, 0.0)
    widths = np.minimum(narrowest + spare * rng.dirichlet(np.full(columns, 3.0)), 30.0)
    return np.concatenate([[outermost], outermost - np.cumsum(widths)])


def draw_line(
    rng: np.random.Generator, inner: shapely.Polygon, place: Floats, turn_deg: float, *, upright: bool
) -> Line:
    """Draw one ruling through a place in the frame of the rulings, over its longest surviving stretch."""
    origin = turned(turn_deg) @ place
    axis = np.array([0.0, 1.0]) if upright else np.array([1.0, 0.0])
    direction = turned(turn_deg + rng.normal(0.0, RULING_SCATTER_DEG)) @ axis
    points = origin + STEPS[:, None] * direction
    inside = np.concatenate([[False], shapely.contains_xy(inner, points[:, 0], points[:, 1]), [False]])
    begin, end = np.flatnonzero(np.diff(inside.astype(int))).reshape(-1, 2).T
    if len(begin) == 0:
        return Line(origin, direction, (0.0, 0.0))
    longest = int(np.argmax(end - begin))
    return Line(origin, direction, (STEPS[begin[longest]], STEPS[end[longest] - 1]))


def clipped(stretch: tuple[float, float], limits: tuple[float, float]) -> tuple[float, float]:
    """Return the common part of two stretches."""
    return max(stretch[0], limits[0]), min(stretch[1], limits[1])


def trace(rng: np.random.Generator, line: Line, scale: float = 1.0) -> tuple[Floats, Line]:
    """Trace a ruling by 5 to 12 points on its wobbling course; return them, and the line as far as traced.

    ``scale`` multiplies the wobble: with 0 the scribe had a ruler.
    """
    count = int(rng.integers(5, 13))
    gap = (line.stretch[1] - line.stretch[0]) / count
    along = line.stretch[0] + gap * (np.arange(count) + 0.5 + rng.uniform(-0.3, 0.3, count))
    length = 8.0 * np.exp(rng.normal(0.0, 0.4))
    wobble = scale * RULING_WOBBLE * sample_at(rng, along, length)
    normal = np.array([-line.direction[1], line.direction[0]])
    points = line.at(along) + wobble[:, None] * normal
    return points, Line(line.origin, line.direction, (float(along[0]), float(along[-1])))


def column_width(left: Line, right: Line) -> float | None:
    """Return the distance between two lines, the mean over the stretch where both are traced."""
    low, high = clipped(left.stretch, right.stretch)
    if high <= low:
        return None
    direction = left.direction + right.direction
    normal = np.array([direction[1], -direction[0]]) / np.hypot(*direction)
    # the distance of straight lines is linear along them: its mean is its value in the middle
    return float(abs((right.at((low + high) / 2) - left.at((low + high) / 2)) @ normal))
