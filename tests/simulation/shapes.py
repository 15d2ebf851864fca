"""Smooth outlines of hand-made tablets, of several families.

All shapes are mirror-symmetric left to right before the two halves are made unequal. The frame is the
tablet's own: origin where its axes cross, x to the right, y down, mm.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

Floats = NDArray[np.float64]

DENSE = 1024
ANGLES = np.linspace(0.0, 2 * np.pi, 4096, endpoint=False)


@dataclass(frozen=True, eq=False)
class Outline:
    """A smooth closed outline, without the wobble of its edge.

    Parameters
    ----------
    points, normals
        Shape (N, 2), at even steps of arc length, from the middle of the left side over the upper edge.
    perimeter
        In mm.
    halves
        Half-widths to the left and right, half-heights above and below, mm.
    exponents
        Above and below, where the family is ``superellipse``; else nothing.
    """

    points: Floats
    normals: Floats
    perimeter: float
    halves: tuple[float, float, float, float]
    exponents: tuple[float, float] | None

    @property
    def arc(self) -> Floats:
        """Arc length at each point, mm."""
        return np.linspace(0.0, self.perimeter, len(self.points), endpoint=False)


def curve_of_powers(x_powers: tuple[float, float], y_powers: tuple[float, float]) -> Floats:
    """Return |x|^p + |y|^q = 1 with p and q for the part above (first) and below (second)."""
    cosine, sine = np.cos(ANGLES), np.sin(ANGLES)
    above = sine >= 0
    x_power, y_power = np.where(above, *x_powers), np.where(above, *y_powers)
    x = -np.sign(cosine) * np.abs(cosine) ** (2 / x_power)
    y = -np.sign(sine) * np.abs(sine) ** (2 / y_power)
    return np.column_stack([x, y])


def two_exponents(rng: np.random.Generator, size: tuple[float, float]) -> Floats:
    """Return a superellipse whose exponents differ in x and y, and above and below."""
    del size
    x_powers = np.exp(rng.uniform(np.log(2.5), np.log(6.0), 2))
    y_powers = np.clip(x_powers * np.exp(rng.normal(0.0, 0.25, 2)), 2.0, 8.0)
    return curve_of_powers((x_powers[0], x_powers[1]), (y_powers[0], y_powers[1]))


def rounded_rectangle(rng: np.random.Generator, size: tuple[float, float]) -> Floats:
    """Return a rectangle with elliptic corners, other ones above than below, and slightly bulging sides."""
    half_width, half_height = size
    quarter = np.linspace(0.0, np.pi / 2, 200)
    corners = []
    for _ in range(2):
        radii = rng.uniform(0.2, 0.55) * min(size) * np.exp(rng.normal(0.0, 0.15, 2))
        x = half_width - radii[0] + radii[0] * np.cos(quarter)
        y = half_height - radii[1] + radii[1] * np.sin(quarter)
        corners.append(np.column_stack([x, y]))
    above, below = corners
    ring = np.concatenate(
        [above * [-1, -1], above[::-1] * [1, -1], below, below[::-1] * [-1, 1], above[:1] * [-1, -1]]
    )
    ring = along(ring, 2048) / [half_width, half_height]
    bulge_x, bulge_y = rng.uniform(0.01, 0.05, 2)
    return np.column_stack(
        [ring[:, 0] * (1 - bulge_x * ring[:, 1] ** 2), ring[:, 1] * (1 - bulge_y * ring[:, 0] ** 2)]
    )


def barrel(rng: np.random.Generator, size: tuple[float, float]) -> Floats:
    """Return four circular arcs, each side pair with its own curvature, with small round corners."""
    half_width, half_height = size
    steps = np.linspace(-1.0, 1.0, 121)
    upright = arc_of(half_width, half_height * steps, rng.uniform(0.04, 0.14) * half_width)
    sides = np.concatenate(
        [
            np.column_stack([upright, half_height * steps]),
            np.column_stack([-upright, half_height * steps])[::-1],
        ]
    )
    upper, lower = (
        arc_of(half_height, half_width * steps, rng.uniform(0.03, 0.12) * half_height) for _ in range(2)
    )
    ends = np.concatenate(
        [
            np.column_stack([half_width * steps, -upper]),
            np.column_stack([half_width * steps, lower])[::-1],
        ]
    )
    radius = rng.uniform(0.12, 0.3) * min(size)
    body = shapely.intersection(shapely.Polygon(sides), shapely.Polygon(ends))
    rounded = body.buffer(-radius, quad_segs=32).buffer(radius, quad_segs=32)
    return np.asarray(rounded.exterior.coords)[:-1]


def arc_of(reach: float, across: Floats, sagitta: float) -> Floats:
    """Return a circular arc that reaches so far in its middle and ``sagitta`` less at its ends."""
    chord = np.abs(across).max()
    radius = (chord**2 + sagitta**2) / (2 * sagitta)
    return np.asarray(reach - radius + np.sqrt(radius**2 - across**2))


def pillow(rng: np.random.Generator, size: tuple[float, float]) -> Floats:
    """Return a rounded rectangle whose high harmonics are damped."""
    ring = along(rounded_rectangle(rng, size) * size, 1024)
    spectrum = np.fft.fft(ring[:, 0] + 1j * ring[:, 1])
    order = np.fft.fftfreq(len(ring), 1 / len(ring))
    smooth = np.fft.ifft(spectrum * np.exp(-((order / rng.uniform(5.0, 12.0)) ** 2)))
    return np.column_stack([smooth.real, smooth.imag])


FAMILIES: dict[str, Callable[[np.random.Generator, tuple[float, float]], Floats]] = {
    "rounded rectangle": rounded_rectangle,
    "barrel": barrel,
    "two exponents": two_exponents,
    "pillow": pillow,
}
OWN_FAMILY = "superellipse"


def make_outline(rng: np.random.Generator, family: str, size: tuple[float, float]) -> Outline:
    """Make the outline of a tablet of about this width and height, its halves a little unequal."""
    half_size = (size[0] / 2, size[1] / 2)
    exponents = None
    if family == OWN_FAMILY:
        above, below = np.exp(rng.uniform(np.log(2.5), np.log(6.0), 2)).tolist()
        exponents = (above, below)
        ring = curve_of_powers(exponents, exponents)
    else:
        ring = FAMILIES[family](rng, half_size)
    low, high = ring.min(axis=0), ring.max(axis=0)
    unit = (ring - (low + high) / 2) / ((high - low) / 2)
    unequal = 1 + rng.normal(0.0, 0.01, 2)
    # written so that width and height stay about the given ones: left = right (1 + e), right = 2 a / (2 + e)
    right, below_half = 2 * np.array(half_size) / (1 + unequal)
    left, above_half = np.array([right, below_half]) * unequal
    x = unit[:, 0] * np.where(unit[:, 0] < 0, left, right)
    y = unit[:, 1] * np.where(unit[:, 1] < 0, above_half, below_half)
    points, perimeter = even_steps(np.column_stack([x, y]))
    tangents = np.roll(points, -1, axis=0) - np.roll(points, 1, axis=0)
    normals = np.column_stack([tangents[:, 1], -tangents[:, 0]])
    normals /= np.hypot(*normals.T)[:, None]
    return Outline(points, normals, perimeter, (left, right, above_half, below_half), exponents)


def even_steps(ring: Floats) -> tuple[Floats, float]:
    """Return a ring at even steps, begun at the left, over the top; and its perimeter."""
    x, y = ring.T
    if np.sum(x * np.roll(y, -1) - np.roll(x, -1) * y) < 0:
        ring = ring[::-1]
    on_left = np.where(ring[:, 0] < 0, np.abs(ring[:, 1]), np.inf)
    ring = np.roll(ring, -int(np.argmin(on_left)), axis=0)
    closed = np.concatenate([ring, ring[:1]])
    length = np.hypot(*np.diff(closed, axis=0).T).sum()
    return along(closed, DENSE), float(length)


def along(path: Floats, count: int) -> Floats:
    """Return ``count`` points at even steps of a path's length, its last point left out."""
    steps = np.hypot(*np.diff(path, axis=0).T)
    length = np.concatenate([[0.0], np.cumsum(steps)])
    where = np.arange(count) * (length[-1] / count)
    return np.column_stack([np.interp(where, length, path[:, 0]), np.interp(where, length, path[:, 1])])
