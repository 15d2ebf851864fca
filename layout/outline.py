"""The shape of the whole tablet from the pieces of original edge that survive.

The outline is a superellipse whose sides and ends may bulge, about a vertical and a horizontal axis:

    |U|^n + |V|^n = 1,    U = u / (1 - s v^2),  V = v / (1 - e u^2),    u = X / a, v = Y / b,

with a of its own left and right, b above and below (hand-made halves differ), n of its own above and below
(rounded differently), and the bulges s of the sides and e of the ends: how much of a half extent a straight run
falls back towards its corner. X, Y are turned by a small angle. The clay's edge and the hand that traced it wobble
about it: the normal distances of the traced points are a Gaussian process with a Matern 5/2 or 3/2 correlation
(Rasmussen and Williams 2006, eq. 4.17) plus independent errors of pointing. The break is no evidence of shape.

The posterior needs no sampler. On a ladder of widths all other shape parameters are fitted together
(Gauss-Newton, all rungs at once); about each rung the residuals are linear, so that for every length and size
of the wobble the rest is Gaussian and its evidence closed (Laplace; Tierney and Kadane 1986). A draw is a
width, a wobble, then the Gaussian rest; some rows are checked against the exact likelihood.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from layout.notices import Caveat, warn
from layout.quantity import Floats, effective_share, quantiles, resample
from layout.wobble import matern32, matern52

STATIONS = 60
"""Of one piece of edge, at most."""

LENGTHS_MM = np.array([3.5, 7.0, 14.0, 5.0, 12.0])
ROUGH = (False, False, False, True, True)
"""Kernels of the wobble: correlation lengths; Matern 3/2 where rough, else 5/2."""
SIZES_MM = np.geomspace(0.08, 1.6, 9)
LENGTH_PRIOR, SIZE_PRIOR = (np.log(8.0), 0.5), (np.log(0.35), 0.5)
TYPICAL = np.array([len(SIZES_MM) + 4])
"""The place of 7 mm and 0.36 mm among all wobbles."""

ROUNDNESS_PRIOR = (np.log(3.5), 0.5)
BULGE_PRIOR = (0.02, 0.018)
PROPORTION_SD = 0.4
TURN_SD = np.deg2rad(2.5)
PLACE_SD_MM = 500.0
"""Priors: log n, bulges, log of height over width, turn, centre. Common practice, no source: wide on purpose."""

FIRST_RUNGS, RUNGS, WIDEST = 18, 22, 6.0
"""Rungs of both ladders, and how many times the surviving width the first one reaches."""
STEPS, WARM_STEPS = 8, 3
APART, ROUGH_MM = 3, 0.4
"""The first fit is rough: every third station, as if independent with this standard deviation."""
NEGLIGIBLE = 9.0
"""Wobbles and widths whose log evidence is lower by this are left out."""
CHECKED = 200
ENOUGH, TOO_FEW, TAIL_DOF = 0.5, 0.1, 6.0
"""Rows checked against the exact posterior, what their effective share must be, tails where all are weighted."""
CLEAR_MM = 5.0
IMPOSSIBLE, SURE = 1e-3, 0.9999
NO_MM, LOG_N = 1e-7, (-1.0, 5.0)
"""What is evaluated: places no nearer to an axis, exponents no further away."""

X0, Y0, TURN, HEIGHT, UPPER, LOWER, SIDES, ENDS, BULGE_ENDS, BULGE_SIDES = range(10)
SHAPES = 10
"""Shape parameters beside the log width: centre, turn, log height, log n above and below, the logarithms of left over
right half-width and of lower over upper half-height, and the bulges."""


@dataclass(frozen=True, eq=False)
class Traced:
    """What was traced, in the face frame at the nominal scale of the outline's plane.

    Parameters
    ----------
    pieces
        Original edges: name (``left``, ``right``, ``upper``, ``lower``) and points, shape (P, 2), mm.
    breaks
        Points of the break, shape (B, 2), mm: no evidence of shape, but they lie inside.
    pointing_mm
        Standard uncertainty of one traced point.
    """

    pieces: tuple[tuple[str, Floats], ...]
    breaks: Floats
    pointing_mm: float


@dataclass(frozen=True, eq=False)
class Outline:
    """Joint draws of the whole outline in the face frame at the nominal scale.

    ``log_width`` has shape (N,), ``shape`` (N, 10) in the order of this module's parameters; ``wobbles`` has one a row.
    """

    log_width: Floats
    shape: Floats
    wobbles: Wobbles

    @cached_property
    def halves(self) -> tuple[Floats, Floats, Floats, Floats]:
        """Left, right, upper and lower half extent in mm, each of shape (N,)."""
        return _halves(self.log_width, self.shape)

    @property
    def wobble_mm(self) -> Floats:
        """Standard deviation of the edge's wobble, shape (N,)."""
        return np.asarray(SIZES_MM[self.wobbles.size])

    @cached_property
    def tangents(self) -> Floats:
        """Where the outline touches its left, right, upper and lower tangent, shape (N, 4, 2)."""
        left, right, upper, lower = self.halves
        zero = np.zeros_like(left)
        own = np.stack(
            [
                np.stack([-left, zero], axis=-1),
                np.stack([right, zero], axis=-1),
                np.stack([zero, -upper], axis=-1),
                np.stack([zero, lower], axis=-1),
            ],
            axis=1,
        )
        return _from_own(own, self.shape)

    def area(self) -> Floats:
        """Return the area in mm2, shape (N,)."""
        left, right, upper, lower = self.halves
        bulges = self.shape[:, BULGE_ENDS], self.shape[:, BULGE_SIDES]
        above, below = (_quadrant(self.shape[:, half], *bulges) for half in (UPPER, LOWER))
        return np.asarray((left + right) * (upper * above + lower * below))

    def polygon(self, quantile: float, points: int = 240) -> Floats:
        """Return the outline whose width stands at a quantile, as a closed polygon (points, 2) in mm.

        It is the mean shape of the rows about that quantile of the width. It begins at the right and goes over the
        lower end; a quarter and three quarters round it meets the vertical axis.
        """
        order = np.argsort(self.log_width)
        middle = int(quantile * (len(order) - 1))
        reach = max(len(order) // 100, 5)
        rows = order[max(middle - reach, 0) : middle + reach + 1]
        log_width, shape = self.log_width[rows].mean(keepdims=True), self.shape[rows].mean(axis=0)[None]
        left, right, upper, lower = (float(half[0]) for half in _halves(log_width, shape))
        t = np.linspace(0, 2 * np.pi, points, endpoint=False)
        cos, sin = np.cos(t), np.sin(t)
        n = np.exp(np.where(sin < 0, shape[0, UPPER], shape[0, LOWER]))
        radius = (np.abs(cos) ** n + np.abs(sin) ** n) ** (-1 / n)
        full_u, full_v = u, v = cos * radius, sin * radius
        for _ in range(20):  # each step brings the point nearer by a factor of about the bulge
            u, v = full_u * (1 - shape[0, BULGE_SIDES] * v**2), full_v * (1 - shape[0, BULGE_ENDS] * u**2)
        own = np.stack([u * np.where(cos < 0, left, right), v * np.where(sin < 0, upper, lower)], axis=-1)
        return np.asarray(_from_own(own[None], shape)[0])


def feet(points: Floats, log_width: Floats, shape: Floats) -> Floats:
    """Return the feet of the perpendiculars from points (P, 2) on one outline, (P, 2)."""
    away, slopes = linearised(points, log_width, shape)
    # moving the centre by a unit towards a point brings it nearer by the normal's component
    normal = -slopes[0, [X0, Y0]].T
    return np.asarray(points - away[0][:, None] * normal)


def _halves(log_width: Floats, shape: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Return left, right, upper, lower half extents for log widths (...,) and shapes (..., 10)."""
    share_left, share_lower = _share(shape[..., SIDES]), _share(shape[..., ENDS])
    width, height = np.exp(log_width), np.exp(shape[..., HEIGHT])
    return width * share_left, width * (1 - share_left), height * (1 - share_lower), height * share_lower


def _share(log_ratio: Floats) -> Floats:
    """Return the share that the first of two halves has, from the logarithm of their ratio."""
    return np.asarray(1 / (1 + np.exp(-log_ratio)))


def _from_own(own: Floats, shape: Floats) -> Floats:
    """Map points (N, P, 2) of the tablet's own axes to the face frame."""
    cos, sin = np.cos(shape[:, TURN, None]), np.sin(shape[:, TURN, None])
    x = shape[:, X0, None] + cos * own[..., 0] - sin * own[..., 1]
    y = shape[:, Y0, None] + sin * own[..., 0] + cos * own[..., 1]
    return np.stack([x, y], axis=-1)


def _quadrant(log_n: Floats, end: Floats, side: Floats) -> Floats:
    """Return the area of a quadrant with unit half extents, shape (N,).

    The superellipse's G(1 + 1/n)^2 / G(1 + 2/n), and beta integrals of what the bulges take away: exact but for terms
    of the third order in them. Tabled over n, which is all that the integrals depend on.
    """
    table = np.linspace(log_n.min(), log_n.max(), 128)
    g = {k: np.array([math.lgamma(1 + k / np.exp(at)) for at in table]) for k in (1, 2, 3, 4, 6)}
    plain, one, both = (
        np.interp(log_n, table, np.exp(integral))
        for integral in (2 * g[1] - g[2], g[1] + g[3] - g[4] - np.log(3), 2 * g[3] - g[6] - np.log(3))
    )
    return np.asarray(plain - (end + side) * one + 3 * end * side * both)


# ---------------------------------------------------------------------------------- distances and slopes


def distances(points: Floats, log_width: Floats, shape: Floats) -> Floats:
    """Return normal distances of points from outlines, positive outside.

    Parameters
    ----------
    points
        Shape (P, 2), in mm of the face frame.
    log_width, shape
        Shapes (G,) and (G, 10): G outlines.

    Returns
    -------
    Floats
        Shape (G, P).
    """
    first, foot = _approach(*_to_own(points, shape), log_width, shape)
    return np.asarray(first.away + foot.away)


def linearised(points: Floats, log_width: Floats, shape: Floats) -> tuple[Floats, Floats]:
    """Return the distances, (G, P), and their slopes in the shape parameters, (G, 10, P)."""
    first, foot = _approach(*_to_own(points, shape), log_width, shape)
    return first.away + foot.away, foot.slopes(shape)


def _to_own(points: Floats, shape: Floats) -> tuple[Floats, Floats]:
    """Return points of the face frame in each tablet's own axes: x and y, (G, P)."""
    cos, sin = np.cos(shape[:, TURN, None]), np.sin(shape[:, TURN, None])
    dx, dy = points[:, 0] - shape[:, X0, None], points[:, 1] - shape[:, Y0, None]
    return cos * dx + sin * dy, cos * dy - sin * dx


def _approach(x: Floats, y: Floats, log_width: Floats, shape: Floats) -> tuple[_Implicit, _Implicit]:
    """Step twice towards the foot of the perpendicular: from the point, then from where that leads."""
    first = _Implicit.at(x, y, log_width, shape)
    step = first.away / first.steep
    return first, _Implicit.at(x - step * first.fx, y - step * first.fy, log_width, shape)


@dataclass(frozen=True, eq=False)
class _Implicit:
    """F = (|U|^n + |V|^n)^(1/n) - 1 and its first derivatives at points of the tablet's own axes.

    Every array is (G, P): the place x, y; dF/dx, dF/dy; the gradient's length; F over it; F's derivatives by
    log |U|, log |V|, log n; and v^2 / (1 - s v^2), u^2 / (1 - e u^2).
    """

    x: Floats
    y: Floats
    fx: Floats
    fy: Floats
    steep: Floats
    away: Floats
    by_u: Floats
    by_v: Floats
    by_n: Floats
    side: Floats
    end: Floats

    @classmethod
    def at(cls, x: Floats, y: Floats, log_width: Floats, shape: Floats) -> _Implicit:
        """Evaluate F and what its derivatives are made of."""
        left, right, upper, lower = (half[:, None] for half in _halves(log_width, shape))
        above, below = np.exp(np.clip(shape[:, [UPPER, LOWER], None], *LOG_N)).transpose(1, 0, 2)
        n = np.where(y < 0, above, below)
        x_abs, y_abs = np.maximum(np.abs(x), NO_MM), np.maximum(np.abs(y), NO_MM)
        u, v = x_abs / np.where(x < 0, left, right), y_abs / np.where(y < 0, upper, lower)
        # a first guess of the ladder may leave points far outside, where the bulges must not turn F round
        u2, v2 = np.minimum(u * u, 2.0), np.minimum(v * v, 2.0)
        end, side = shape[:, BULGE_ENDS, None], shape[:, BULGE_SIDES, None]
        in_u, in_v = np.maximum(1 - side * v2, 0.3), np.maximum(1 - end * u2, 0.3)
        log_u, log_v = np.log(u / in_u), np.log(v / in_v)
        # the larger is taken out, so that no power overflows
        log_max = np.maximum(log_u, log_v)
        power_u, power_v = np.exp(n * (log_u - log_max)), np.exp(n * (log_v - log_max))
        total = power_u + power_v
        log_radius = log_max + np.log(total) / n
        radius = np.exp(log_radius)
        by_u, by_v = radius * power_u / total, radius * power_v / total
        by_side, by_end = v2 / in_u, u2 / in_v
        fx = np.copysign((by_u + 2 * by_v * end * by_end) / x_abs, x)
        fy = np.copysign((by_v + 2 * by_u * side * by_side) / y_abs, y)
        steep = np.sqrt(fx * fx + fy * fy)
        by_n = by_u * log_u + by_v * log_v - radius * log_radius
        return cls(x, y, fx, fy, steep, (radius - 1) / steep, by_u, by_v, by_n, by_side, by_end)

    def slopes(self, shape: Floats) -> Floats:
        """Return how the distance changes with the shape parameters, (G, 10, P)."""
        cos, sin = np.cos(shape[:, TURN, None]), np.sin(shape[:, TURN, None])
        share_left, share_lower = (_share(shape[:, at, None]) for at in (SIDES, ENDS))
        by_half_x, by_half_y = -self.x * self.fx, -self.y * self.fy
        above = self.y < 0
        out = np.empty((len(shape), SHAPES, self.x.shape[1]))
        out[:, X0] = -cos * self.fx + sin * self.fy
        out[:, Y0] = -sin * self.fx - cos * self.fy
        out[:, TURN] = self.y * self.fx - self.x * self.fy
        out[:, HEIGHT] = by_half_y
        out[:, UPPER] = np.where(above, self.by_n, 0.0)
        out[:, LOWER] = self.by_n - out[:, UPPER]
        out[:, SIDES] = by_half_x * np.where(self.x < 0, 1 - share_left, -share_left)
        out[:, ENDS] = by_half_y * np.where(above, -share_lower, 1 - share_lower)
        out[:, BULGE_ENDS] = self.by_v * self.end
        out[:, BULGE_SIDES] = self.by_u * self.side
        out /= self.steep[:, None]
        return out


# -------------------------------------------------------------------------------------------------- the fit


@dataclass(frozen=True, eq=False)
class _Stations:
    """Stations along the edges: points (M, 2), and what makes their residuals independent.

    ``whiten[k]`` (M, M) turns residuals into independent ones under kernel k, whose variances are
    ``size^2 * values[k] + 1``.
    """

    points: Floats
    whiten: Floats
    values: Floats

    @classmethod
    def along(cls, points: Floats, noise: Floats, smooth: Floats) -> _Stations:
        """Correlate stations by the distance between points (M, 2) of a smooth edge; ``noise`` (M,) is their own.

        Between the traced points themselves the wobble would be part of the distance, and where it is steep,
        a little more distance would explain it away.
        """
        apart = np.hypot(*(smooth[:, None] - smooth[None]).transpose(2, 0, 1))
        values, bases = np.linalg.eigh(_correlations(apart) / np.outer(noise, noise))
        return cls(points, bases.transpose(0, 2, 1) / noise, np.maximum(values, 0.0))

    def variances(self, wobbles: Wobbles) -> Floats:
        """Return the variances of the whitened residuals under some wobbles, (C, M)."""
        return np.asarray(SIZES_MM[wobbles.size, None] ** 2 * self.values[wobbles.kernel] + 1)


@dataclass(frozen=True, eq=False)
class Wobbles:
    """Some wobbles: the places of their kernels and sizes on their lists, each of shape (C,)."""

    kernel: NDArray[np.intp]
    size: NDArray[np.intp]

    @classmethod
    def every(cls) -> Wobbles:
        """Return all of them."""
        return cls(*np.divmod(np.arange(len(LENGTHS_MM) * len(SIZES_MM)), len(SIZES_MM)))

    def at(self, places: NDArray[np.intp]) -> Wobbles:
        """Return those at some places."""
        return Wobbles(self.kernel[places], self.size[places])

    @property
    def log_prior(self) -> Floats:
        """Logarithm of the prior, up to a constant, (C,)."""
        length = (np.log(LENGTHS_MM[self.kernel]) - LENGTH_PRIOR[0]) / LENGTH_PRIOR[1]
        size = (np.log(SIZES_MM[self.size]) - SIZE_PRIOR[0]) / SIZE_PRIOR[1]
        return np.asarray(-0.5 * (length**2 + size**2))


def _average(traced: Traced) -> tuple[Floats, Floats]:
    """Average each piece's points into at most 60 stations: points (M, 2), and their own errors (M,)."""
    points, noise = [], []
    for _, piece in traced.pieces:
        for part in np.array_split(piece, min(STATIONS, len(piece))):
            points.append(part.mean(axis=0))
            noise.append(traced.pointing_mm / np.sqrt(len(part)))
    return np.array(points), np.maximum(np.array(noise), 0.01)


def _correlations(apart: Floats) -> Floats:
    """Return the correlations of all kernels at distances (M, M), shape (K, M, M)."""
    return np.stack(
        [
            (matern32 if rough else matern52)(apart / length)
            for length, rough in zip(LENGTHS_MM, ROUGH, strict=True)
        ]
    )


@dataclass(frozen=True, eq=False)
class _Prior:
    """Gaussian prior of the shape parameters given the log width: mean (G, 10) and sd (10,)."""

    centre: Floats
    asymmetry: float

    def mean(self, log_width: Floats) -> Floats:
        """Return the mean for each width: the height's follows the width."""
        mean = np.tile(self.centre, (len(log_width), 1))
        mean[:, HEIGHT] = log_width
        return mean

    def misfit(self, log_width: Floats, shape: Floats) -> Floats:
        """Return minus twice the log density, up to a constant, (G,).

        Any share of the width is as likely to be lost as any other: of a width w of which s survives, s / w is even,
        which makes the density of log w fall with 1 / w.
        """
        return np.asarray((((shape - self.mean(log_width)) / self.sd) ** 2).sum(axis=1) + 2 * log_width)

    @property
    def sd(self) -> Floats:
        """Standard deviations of the ten shape parameters."""
        n = ROUNDNESS_PRIOR[1]
        return np.array(
            [
                PLACE_SD_MM,
                PLACE_SD_MM,
                TURN_SD,
                PROPORTION_SD,
                n,
                n,
                self.asymmetry,
                self.asymmetry,
                BULGE_PRIOR[1],
                BULGE_PRIOR[1],
            ]
        )


@dataclass(frozen=True, eq=False)
class _Ladder:
    """Gaussian posteriors of the shape on every rung under every wobble, and their evidence.

    ``log_width`` (G,); ``log_evidence`` (C, G); ``mean`` (C, G, 10); ``precision`` (C, G, 10, 10).
    """

    log_width: Floats
    wobbles: Wobbles
    log_evidence: Floats
    mean: Floats
    precision: Floats

    @property
    def log_marginal(self) -> Floats:
        """The log width's marginal on the rungs, (G,)."""
        return np.asarray(np.logaddexp.reduce(self.log_evidence, axis=0))

    @property
    def probable(self) -> Wobbles:
        """The wobbles that matter, the most probable first."""
        over_rungs = np.logaddexp.reduce(self.log_evidence, axis=1)
        order = np.argsort(-over_rungs)
        return self.wobbles.at(order[over_rungs[order] > over_rungs[order[0]] - NEGLIGIBLE])


def fit_outline(
    traced: Traced, asymmetry: float, draws: int, rng: np.random.Generator
) -> tuple[Outline | None, list[Caveat]]:
    """Fit the whole outline to the surviving edges and draw from its posterior.

    Parameters
    ----------
    traced
        With an edge on the left or right and one above or below, three points each.
    asymmetry
        Standard deviation of the logarithm of one half extent over its opposite.
    draws
        How many rows.

    Returns
    -------
    tuple
        The outline, or None where the posterior could not be drawn from (``outline.unsure`` then says so),
        and warnings.
    """
    stations, prior, ladder = _fit(traced, asymmetry)
    outline, log_proposal = _draw(ladder, draws, rng)
    rows = rng.permutation(draws)[:CHECKED]
    log_weights = _log_exact(outline, stations, prior, rows) - log_proposal[rows]
    weights, caveats = np.ones(draws), []
    if effective_share(np.exp(log_weights - log_weights.max())) < ENOUGH:
        outline, log_proposal = _draw(ladder, draws, rng, heavy=True)
        # some thousand rows at a time: each meets every station
        parts = np.array_split(np.arange(draws), draws // 5000 + 1)
        log_exact = [_log_exact(outline, stations, prior, part) for part in parts]
        log_weights = np.concatenate(log_exact) - log_proposal
        weights = np.exp(log_weights - log_weights.max())
        effective = effective_share(weights)
        if effective < TOO_FEW:
            return None, [warn("outline.unsure", percent=round(100 * effective))]
        caveats.append(warn("outline.reweighted", percent=round(100 * effective)))
    holds = _holds(outline, _inner(traced.breaks, stations.points))
    weights = weights * holds
    if holds.max() < IMPOSSIBLE or effective_share(weights) < TOO_FEW**2:
        return None, [*caveats, warn("outline.break_outside")]
    chosen = resample(weights, rng)
    return Outline(outline.log_width[chosen], outline.shape[chosen], outline.wobbles.at(chosen)), caveats


def _fit(traced: Traced, asymmetry: float) -> tuple[_Stations, _Prior, _Ladder]:
    """Fit the shape on a first ladder, roughly and then with its wobble, and on a second one laid over the mass."""
    points, noise = _average(traced)
    start, prior = _begin(traced, asymmetry)
    seen = float(np.ptp(np.vstack([points, traced.breaks]), axis=0)[0])
    log_width = np.linspace(np.log(0.97 * seen), np.log(WIDEST * seen), FIRST_RUNGS)
    apart = points[::APART]
    shape = _climb(apart, np.eye(len(apart)) / ROUGH_MM, prior, log_width, start(log_width), STEPS)
    misfit = ((distances(apart, log_width, shape) / ROUGH_MM) ** 2).sum(axis=1)
    best = [int((misfit + prior.misfit(log_width, shape)).argmin())]
    stations = _Stations.along(points, noise, feet(points, log_width[best], shape[best]))
    wobbles = Wobbles.every()
    shape = _climb(points, _root(stations, wobbles.at(TYPICAL)), prior, log_width, shape, WARM_STEPS)
    ladder = _weigh(stations, prior, log_width, shape, wobbles)
    log_width, wobbles = _relaid(ladder), ladder.probable
    shape = np.stack([np.interp(log_width, ladder.log_width, column) for column in shape.T], axis=-1)
    shape = _climb(points, _root(stations, wobbles), prior, log_width, shape, WARM_STEPS)
    return stations, prior, _weigh(stations, prior, log_width, shape, wobbles)


def _begin(traced: Traced, asymmetry: float) -> tuple[_Start, _Prior]:
    """Return where the fit begins, and the prior, both placed by the traced edges."""
    edges: dict[str, list[Floats]] = {}
    for name, points in traced.pieces:
        edges.setdefault(name, []).append(points)
    found = {name: np.vstack(points) for name, points in edges.items()}
    everything = np.vstack([points for _, points in traced.pieces])

    def at(name: str, axis: int, share: float) -> float | None:
        return float(quantiles(found[name][:, axis], (share,))[0]) if name in found else None

    top, bottom = at("upper", 1, 0.5), at("lower", 1, 0.5)
    top = float(everything[:, 1].min()) if top is None else top
    bottom = float(everything[:, 1].max()) if bottom is None else bottom
    height = max(bottom - top, 5.0)
    left, right = at("left", 0, 0.1), at("right", 0, 0.9)
    n = ROUNDNESS_PRIOR[0]
    middle = (top + bottom) / 2
    centre = np.array(
        [everything[:, 0].mean(), middle, 0.0, 0.0, n, n, 0.0, 0.0, BULGE_PRIOR[0], BULGE_PRIOR[0]]
    )
    return _Start(left, right, middle, np.log(height)), _Prior(centre, max(asymmetry, 1e-4))


@dataclass(frozen=True)
class _Start:
    """First guess of the shape on each rung: the surviving sides stay where they are."""

    left: float | None
    right: float | None
    middle: float
    log_height: float

    def __call__(self, log_width: Floats) -> Floats:
        half = np.exp(log_width) / 2
        if self.left is not None and self.right is not None:
            x0 = np.full_like(half, (self.left + self.right) / 2)
        else:
            x0 = self.right - half if self.right is not None else (self.left or 0.0) + half
        shape = np.zeros((len(log_width), SHAPES))
        shape[:, X0], shape[:, Y0], shape[:, HEIGHT] = x0, self.middle, self.log_height
        shape[:, UPPER] = shape[:, LOWER] = ROUNDNESS_PRIOR[0]
        shape[:, BULGE_ENDS] = shape[:, BULGE_SIDES] = BULGE_PRIOR[0]
        return shape


def _root(stations: _Stations, wobbles: Wobbles) -> Floats:
    """Return what whitens residuals to unit variance under the first of some wobbles, (M, M)."""
    return np.asarray(stations.whiten[wobbles.kernel[0]] / np.sqrt(stations.variances(wobbles)[0])[:, None])


def _climb(
    points: Floats, root: Floats, prior: _Prior, log_width: Floats, shape: Floats, steps: int
) -> Floats:
    """Fit the shape on every rung by damped Gauss-Newton; ``root`` (M, M) whitens the residuals."""
    precision = 1 / prior.sd**2
    mean = prior.mean(log_width)
    # how far one step may go: mm, radians, logarithms, shares
    limit = np.array([10.0, 10.0, 0.05, 0.2, 0.4, 0.4, 0.05, 0.05, 0.02, 0.02])
    for _ in range(steps):
        away, slopes = linearised(points, log_width, shape)
        j = slopes @ root.T
        a = j @ j.transpose(0, 2, 1) + np.diag(precision)
        b = (j @ (away @ root.T)[..., None])[..., 0] + precision * (shape - mean)
        step = np.linalg.solve(a, b[..., None])[..., 0]
        shape = shape - step / np.maximum(1.0, np.abs(step / limit).max(axis=1, keepdims=True))
    return shape


def _weigh(stations: _Stations, prior: _Prior, log_width: Floats, shape: Floats, wobbles: Wobbles) -> _Ladder:
    """Return the Gaussian posterior and the evidence of every rung under every wobble (Laplace)."""
    away, slopes = linearised(stations.points, log_width, shape)
    columns = np.concatenate([slopes, away[:, None]], axis=1)  # (G, 11, M)
    variances = stations.variances(wobbles)
    normal = np.empty((len(wobbles.kernel), len(log_width), SHAPES + 1, SHAPES + 1))
    for kernel in set(wobbles.kernel.tolist()):
        white = columns @ stations.whiten[kernel].T
        of = wobbles.kernel == kernel
        normal[of] = (white / variances[of, None, None]) @ white.transpose(0, 2, 1)
    off = shape - prior.mean(log_width)
    inverse = 1 / prior.sd**2
    a = normal[..., :SHAPES, :SHAPES] + np.diag(inverse)
    b = normal[..., :SHAPES, SHAPES] + inverse * off
    solved = np.linalg.solve(a, b[..., None])[..., 0]
    misfit = normal[..., SHAPES, SHAPES] + prior.misfit(log_width, shape) - (b * solved).sum(axis=-1)
    log_noise = np.log(variances).sum(axis=1, keepdims=True)
    evidence = wobbles.log_prior[:, None] - 0.5 * (misfit + log_noise + np.linalg.slogdet(a)[1])
    return _Ladder(log_width, wobbles, evidence, shape - solved, a)


def _relaid(ladder: _Ladder) -> Floats:
    """Lay the rungs anew over the mass of the first ladder, and a little beyond it on each side."""
    fine = np.linspace(ladder.log_width[0], ladder.log_width[-1], 2000)
    log_p = np.interp(fine, ladder.log_width, ladder.log_marginal)
    inside = np.flatnonzero(log_p > log_p.max() - NEGLIGIBLE)
    rung = ladder.log_width[1] - ladder.log_width[0]
    return np.linspace(fine[inside[0]] - 0.15 * rung, fine[inside[-1]] + 0.15 * rung, RUNGS)


def _draw(
    ladder: _Ladder, draws: int, rng: np.random.Generator, *, heavy: bool = False
) -> tuple[Outline, Floats]:
    """Draw widths, wobbles and shapes; return them with the log density that they were drawn from.

    With ``heavy`` tails the shapes follow a multivariate t distribution, as draws that are to be weighted should.
    """
    fine = np.linspace(ladder.log_width[0], ladder.log_width[-1], 1401)
    log_p = np.interp(fine, ladder.log_width, ladder.log_marginal)
    density = np.exp(log_p - log_p.max())
    cumulative = np.concatenate([[0.0], np.cumsum((density[1:] + density[:-1]) / 2)])
    log_width = np.interp(rng.random(draws) * cumulative[-1], cumulative, fine)
    at = (log_width - ladder.log_width[0]) / (ladder.log_width[1] - ladder.log_width[0])
    rung = np.clip(np.floor(at + rng.random(draws)), 0, RUNGS - 1).astype(int)  # a neighbour, by nearness
    share = np.exp(ladder.log_evidence - ladder.log_marginal)
    levels = np.cumsum(share, axis=0)
    cell = np.minimum((levels[:, rung] < rng.random(draws)).sum(axis=0), len(share) - 1)
    lower = np.linalg.cholesky(ladder.precision)
    root = np.linalg.inv(lower).swapaxes(-1, -2)
    half_log_det = np.log(np.diagonal(lower, axis1=-2, axis2=-1)).sum(axis=-1)
    drift = np.gradient(ladder.mean, ladder.log_width, axis=1)
    z = rng.standard_normal((draws, SHAPES))
    if heavy:
        z /= np.sqrt(rng.chisquare(TAIL_DOF, draws) / TAIL_DOF)[:, None]
    squared = np.einsum("ni,ni->n", z, z)
    log_shape = -0.5 * (TAIL_DOF + SHAPES) * np.log1p(squared / TAIL_DOF) if heavy else -0.5 * squared
    mean = ladder.mean[cell, rung] + drift[cell, rung] * (log_width - ladder.log_width[rung])[:, None]
    shape = mean + (root[cell, rung] @ z[..., None])[..., 0]
    log_proposal = np.interp(log_width, fine, log_p) + np.log(np.maximum(share[cell, rung], 1e-300))
    log_proposal += half_log_det[cell, rung] + log_shape
    return Outline(log_width, shape, ladder.wobbles.at(cell)), log_proposal


def _log_exact(outline: Outline, stations: _Stations, prior: _Prior, rows: NDArray[np.intp]) -> Floats:
    """Return the exact log posterior of some rows, up to a constant."""
    log_width, shape, wobbles = outline.log_width[rows], outline.shape[rows], outline.wobbles.at(rows)
    away = distances(stations.points, log_width, shape)
    variances = stations.variances(wobbles)
    misfit = prior.misfit(log_width, shape) + np.log(variances).sum(axis=1)
    for kernel in set(wobbles.kernel.tolist()):
        of = wobbles.kernel == kernel
        misfit[of] += ((away[of] @ stations.whiten[kernel].T) ** 2 / variances[of]).sum(axis=1)
    return np.asarray(wobbles.log_prior - 0.5 * misfit)


def _inner(breaks: Floats, edges: Floats) -> Floats:
    """Return the break's points that stand clear of the edges.

    Where the break meets an edge it lies on the wobbling outline, and says nothing about what is inside.
    """
    if len(breaks) == 0:
        return breaks
    apart = np.hypot(*(breaks[:, None] - edges[None]).transpose(2, 0, 1)).min(axis=1)
    return np.asarray(breaks[apart > CLEAR_MM])


def _holds(outline: Outline, breaks: Floats) -> Floats:
    """Return how probable it is, row by row, that the break lies inside the wobbling outline, (N,)."""
    if len(breaks) == 0:
        return np.ones(len(outline.log_width))
    directions = np.linspace(0, 2 * np.pi, 32, endpoint=False)
    reaching = np.argmax(breaks @ [np.cos(directions), np.sin(directions)], axis=0)
    outermost = breaks[sorted(set(reaching.tolist()))]
    narrow_first = np.argsort(outline.log_width)
    inside = np.ones(len(narrow_first))
    # from the narrowest up, a sixteenth at a time, until the break stands well within all of them
    for rows in np.array_split(narrow_first, 16):
        inside[rows] = _inside(outermost, outline, rows)
        if inside[rows].min() > SURE:
            break
    return inside


def _inside(breaks: Floats, outline: Outline, rows: NDArray[np.intp]) -> Floats:
    """Return how probable it is that the break lies inside the outline in some rows."""
    away = distances(breaks, outline.log_width[rows], outline.shape[rows])
    # the logistic form of the normal distribution (Bowling et al. 2009) is near enough for a soft wall
    z = -away.max(axis=1) / outline.wobble_mm[rows]
    return np.asarray(1 / (1 + np.exp(-np.clip(1.702 * z, -40, 40))))
