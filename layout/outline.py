"""The shape of the whole tablet from the pieces of original edge that survive.

The outline is two pairs of half superellipses about a vertical and a horizontal axis,

    |X / a|^p + |Y / b|^q = 1,

with a of its own left and right, b above and below (hand-made halves differ), n = sqrt(p q) of its own above and
below (rounded differently) and p / q near one; X, Y are turned by a small angle. The clay's edge and the hand that
traced it wobble about it: the normal distances of the traced points are a Gaussian process with a Matern 5/2 or
3/2 correlation (Rasmussen and Williams 2006, eq. 4.17) plus independent errors of pointing. The break is no
evidence of shape.

The posterior needs no sampler. On a ladder of widths all other shape parameters are fitted together
(Gauss-Newton, all rungs at once); about each rung the residuals are linear, so that for every length and size
of the wobble the rest is Gaussian and its evidence closed (Laplace; Tierney and Kadane 1986). A draw is a
width, a wobble, then the Gaussian rest; some rows are checked against the exact likelihood.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.notices import Caveat, warn
from layout.quantity import Floats

STATIONS = 60
FIRST_RUNGS, RUNGS = 18, 22
STEPS, WARM_STEPS = 12, 8
LENGTHS_MM = np.array([3.0, 5.5, 9.0, 16.0, 5.0, 12.0])
ROUGH = (False, False, False, False, True, True)
LENGTH_PRIOR = (np.log(8.0), 0.6)
SIZES_MM = np.geomspace(0.06, 2.4, 11)
SIZE_PRIOR = (np.log(0.35), 0.6)
TYPICAL_KERNEL, TYPICAL_SIZE = 2, 5
"""The places of 9 mm and of 0.38 mm on these lists."""
ROUNDNESS_PRIOR = (np.log(3.5), 0.5)
ACROSS_SD = 0.07
PROPORTION_SD = 0.4
TURN_SD = np.deg2rad(2.5)
PLACE_SD_MM = 500.0
WIDEST = 6.0
"""How many times the surviving width the ladder reaches."""
CLEAR_MM = 5.0
CHECKED = 300
ENOUGH, TOO_FEW = 0.5, 0.1
IMPOSSIBLE, SURE = 1e-3, 0.9999

X0, Y0, TURN, HEIGHT, UPPER, LOWER, SIDES, ENDS, ACROSS = range(9)
"""Shape parameters beside the log width: centre, turn, log height, log n above and below, the logarithms
of left over right half-width and of lower over upper half-height, and
of sqrt(p / q)."""


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

    ``log_width`` has shape (N,), ``shape`` (N, 9) in the order of this module's parameters; ``size`` is
    the wobble's standard deviation in mm and ``kernel`` the place of its correlation on the list, shape (N,).
    """

    log_width: Floats
    shape: Floats
    size: Floats
    kernel: NDArray[np.intp]

    @property
    def halves(self) -> tuple[Floats, Floats, Floats, Floats]:
        """Left, right, upper and lower half extent in mm, each of shape (N,)."""
        return _halves(self.log_width, self.shape)

    def tangents(self) -> Floats:
        """Return where the outline touches its left, right, upper and lower tangent, shape (N, 4, 2)."""
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
        """Return the area in mm2, shape (N,): quadrants of a b G(1 + 1/p) G(1 + 1/q) / G(1 + 1/p + 1/q)."""
        left, right, upper, lower = self.halves
        of_upper, of_lower = (_quadrant(*_exponents(self.shape, half)) for half in (UPPER, LOWER))
        return np.asarray((left + right) * (upper * of_upper + lower * of_lower))

    def polygon(self, quantile: float, points: int = 240) -> Floats:
        """Return the outline whose width stands at a quantile, as a closed polygon (points, 2) in mm.

        It is the mean shape of the rows about that quantile of the width.
        """
        order = np.argsort(self.log_width)
        middle = int(quantile * (len(order) - 1))
        reach = max(len(order) // 100, 5)
        rows = order[max(middle - reach, 0) : middle + reach + 1]
        log_width, shape = self.log_width[rows].mean(keepdims=True), self.shape[rows].mean(axis=0)[None]
        left, right, upper, lower = (float(half[0]) for half in _halves(log_width, shape))
        t = np.linspace(0, 2 * np.pi, points, endpoint=False)
        cos, sin = np.cos(t), np.sin(t)
        above, below = _exponents(shape[0], UPPER), _exponents(shape[0], LOWER)
        p, q = (np.where(sin < 0, one, other) for one, other in zip(above, below, strict=True))
        x = np.where(cos < 0, left, right) * np.sign(cos) * np.abs(cos) ** (2 / p)
        y = np.where(sin < 0, upper, lower) * np.sign(sin) * np.abs(sin) ** (2 / q)
        return np.asarray(_from_own(np.stack([x, y], axis=-1)[None], shape)[0])


def feet(points: Floats, log_width: Floats, shape: Floats) -> Floats:
    """Return the feet of the perpendiculars from points (P, 2) on one outline, (P, 2)."""
    away, slopes = distances(points, log_width, shape)
    # moving the centre by a unit towards a point brings it nearer by the normal's component
    normal = -slopes[0][:, [X0, Y0]]
    return np.asarray(points - away[0][:, None] * normal)


def _halves(log_width: Floats, shape: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Return left, right, upper, lower half extents for log widths (...,) and shapes (..., 9)."""
    share_left = 1 / (1 + np.exp(-shape[..., SIDES]))
    share_lower = 1 / (1 + np.exp(-shape[..., ENDS]))
    width, height = np.exp(log_width), np.exp(shape[..., HEIGHT])
    return width * share_left, width * (1 - share_left), height * (1 - share_lower), height * share_lower


def _from_own(own: Floats, shape: Floats) -> Floats:
    """Map points (N, P, 2) of the tablet's own axes to the face frame."""
    cos, sin = np.cos(shape[:, TURN, None]), np.sin(shape[:, TURN, None])
    x = shape[:, X0, None] + cos * own[..., 0] - sin * own[..., 1]
    y = shape[:, Y0, None] + sin * own[..., 0] + cos * own[..., 1]
    return np.stack([x, y], axis=-1)


def _exponents(shape: Floats, half: int) -> tuple[Floats, Floats]:
    """Return the exponents across and along, p and q, of the upper or the lower half."""
    n, ratio = np.exp(shape[..., half]), np.exp(shape[..., ACROSS])
    return n * ratio, n / ratio


def _quadrant(p: Floats, q: Floats) -> Floats:
    """Return the area of a quadrant with unit half extents."""
    return np.exp(_log_gamma(1 + 1 / p) + _log_gamma(1 + 1 / q) - _log_gamma(1 + 1 / p + 1 / q))


def _log_gamma(x: Floats) -> Floats:
    """Return the logarithm of the gamma function for x of 1 or more: Stirling's series at x + 8 (from memory)."""
    z = x + 8
    series = (z - 0.5) * np.log(z) - z + 0.5 * np.log(2 * np.pi) + 1 / (12 * z) - 1 / (360 * z**3)
    return np.asarray(series - np.log(np.prod([x + step for step in range(8)], axis=0)))


# ---------------------------------------------------------------------------------- distances and slopes


def distances(points: Floats, log_width: Floats, shape: Floats) -> tuple[Floats, Floats]:
    """Return normal distances of points from outlines, and their slopes in the parameters.

    Two steps towards the foot of the perpendicular: F / |grad F| with F = (|u|^p + |v|^q)^(1/n) - 1, first at the
    point, then at the foot that this gives.

    Parameters
    ----------
    points
        Shape (P, 2), in mm of the face frame.
    log_width, shape
        Shapes (G,) and (G, 9): G outlines.

    Returns
    -------
    tuple
        Distances (G, P), positive outside; slopes (G, P, 9) in the shape parameters.
    """
    cos, sin = np.cos(shape[:, TURN, None]), np.sin(shape[:, TURN, None])
    dx, dy = points[:, 0] - shape[:, X0, None], points[:, 1] - shape[:, Y0, None]
    x, y = cos * dx + sin * dy, cos * dy - sin * dx
    first = _Implicit.at(x, y, log_width, shape)
    away = first.f / first.steep
    x, y = x - away * first.fx / first.steep, y - away * first.fy / first.steep
    foot = _Implicit.at(x, y, log_width, shape)
    return away + foot.f / foot.steep, foot.slopes(x, y, shape, cos, sin)


@dataclass(frozen=True, eq=False)
class _Implicit:
    """F and its derivatives at points of the tablet's own axes, every array (G, P)."""

    f: Floats
    fx: Floats
    fy: Floats
    steep: Floats
    f_half_x: Floats  # by the logarithm of the half extent that the point lies on
    f_half_y: Floats
    f_n: Floats  # by log n
    f_across: Floats  # by the exponents' ratio

    @classmethod
    def at(cls, x: Floats, y: Floats, log_width: Floats, shape: Floats) -> _Implicit:
        """Evaluate F = (|u|^p + |v|^q)^(1/n) - 1."""
        left, right, upper, lower = (half[:, None] for half in _halves(log_width, shape))
        a, b = np.where(x < 0, left, right), np.where(y < 0, upper, lower)
        n = np.exp(np.where(y < 0, shape[:, UPPER, None], shape[:, LOWER, None]))
        log_u = np.log(np.maximum(np.abs(x) / a, 1e-9))
        log_v = np.log(np.maximum(np.abs(y) / b, 1e-9))
        p, q = n * np.exp(shape[:, ACROSS, None]), n * np.exp(-shape[:, ACROSS, None])
        power_u, power_v = np.exp(p * log_u), np.exp(q * log_v)
        g = power_u + power_v
        log_g = np.log(g)
        radius = np.exp(log_g / n)
        share_u, share_v = power_u * p / (g * n), power_v * q / (g * n)
        fx = radius * share_u / np.where(x < 0, np.minimum(x, -1e-9), np.maximum(x, 1e-9))
        fy = radius * share_v / np.where(y < 0, np.minimum(y, -1e-9), np.maximum(y, 1e-9))
        return cls(
            f=radius - 1,
            fx=fx,
            fy=fy,
            steep=np.hypot(fx, fy),
            f_half_x=-radius * share_u,
            f_half_y=-radius * share_v,
            f_n=radius * (share_u * log_u + share_v * log_v - log_g / n),
            f_across=radius * (share_u * log_u - share_v * log_v),
        )

    def slopes(self, x: Floats, y: Floats, shape: Floats, cos: Floats, sin: Floats) -> Floats:
        """Return how the distance changes with the shape parameters, (G, P, 9)."""
        share_left = (1 / (1 + np.exp(-shape[:, SIDES])))[:, None]
        share_lower = (1 / (1 + np.exp(-shape[:, ENDS])))[:, None]
        out = np.empty((*x.shape, 9))
        out[..., X0] = -cos * self.fx + sin * self.fy
        out[..., Y0] = -sin * self.fx - cos * self.fy
        out[..., TURN] = y * self.fx - x * self.fy
        out[..., HEIGHT] = self.f_half_y
        out[..., UPPER] = np.where(y < 0, self.f_n, 0.0)
        out[..., LOWER] = np.where(y < 0, 0.0, self.f_n)
        out[..., SIDES] = self.f_half_x * np.where(x < 0, 1 - share_left, -share_left)
        out[..., ENDS] = self.f_half_y * np.where(y < 0, -share_lower, 1 - share_lower)
        out[..., ACROSS] = self.f_across
        return out / self.steep[..., None]


# -------------------------------------------------------------------------------------------------- the fit


@dataclass(frozen=True, eq=False)
class _Stations:
    """Stations along the edges: points (M, 2), their own errors (M,), and the wobble's eigenbases.

    ``whiten[l]`` (M, M) turns residuals into independent ones under length l, whose variances are
    ``size^2 * values[l] + 1``.
    """

    points: Floats
    noise: Floats
    kernels: NDArray[np.intp]
    whiten: Floats
    values: Floats

    @classmethod
    def of(cls, traced: Traced) -> _Stations:
        """Average each piece's points into at most 60 stations, under the typical wobble only."""
        points, noise = [], []
        for _, piece in traced.pieces:
            for part in np.array_split(piece, min(STATIONS, len(piece))):
                points.append(part.mean(axis=0))
                noise.append(traced.pointing_mm / np.sqrt(len(part)))
        place = np.array(points)
        return cls.along(place, np.maximum(np.array(noise), 0.01), place, np.array([TYPICAL_KERNEL]))

    @classmethod
    def along(cls, points: Floats, noise: Floats, smooth: Floats, kernels: NDArray[np.intp]) -> _Stations:
        """Correlate stations by the distance between points (M, 2) of a smooth edge.

        Between the traced points themselves the wobble would be part of the distance, and where it is steep,
        a little more distance would explain it away.
        """
        apart = np.hypot(*(smooth[:, None] - smooth[None]).transpose(2, 0, 1))
        values, bases = np.linalg.eigh(_correlations(apart, kernels) / np.outer(noise, noise))
        return cls(points, noise, kernels, bases.transpose(0, 2, 1) / noise, np.maximum(values, 0.0))


def _correlations(apart: Floats, kernels: NDArray[np.intp]) -> Floats:
    """Return the correlations of some wobbles at distances (M, M), shape (L, M, M)."""
    return np.stack(
        [(matern32 if ROUGH[kernel] else matern52)(apart / LENGTHS_MM[kernel]) for kernel in kernels]
    )


def matern32(ratio: Floats) -> Floats:
    """Return the Matern 3/2 correlation at a distance over the correlation length."""
    s = np.sqrt(3) * ratio
    return np.asarray((1 + s) * np.exp(-s))


def matern52(ratio: Floats) -> Floats:
    """Return the Matern 5/2 correlation at a distance over the correlation length."""
    s = np.sqrt(5) * ratio
    return np.asarray((1 + s + s**2 / 3) * np.exp(-s))


@dataclass(frozen=True, eq=False)
class _Prior:
    """Gaussian prior of the shape parameters given the log width: mean (G, 9) and sd (9,)."""

    centre: Floats
    asymmetry: float

    def mean(self, log_width: Floats) -> Floats:
        """Return the mean for each width: the height's follows the width."""
        mean = np.tile(self.centre, (len(log_width), 1))
        mean[:, HEIGHT] = log_width
        return mean

    @property
    def sd(self) -> Floats:
        """Standard deviations of the nine shape parameters."""
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
                ACROSS_SD,
            ]
        )


@dataclass(frozen=True, eq=False)
class _Ladder:
    """Gaussian posteriors of the shape on every rung x length x size, and their evidence.

    ``log_width`` (G,); ``log_evidence`` (G, L, S); ``mean`` (G, L, S, 9);
    ``root`` (G, L, S, 9, 9) with covariance root root'.
    """

    log_width: Floats
    log_evidence: Floats
    mean: Floats
    root: Floats
    log_det: Floats

    @property
    def wobble(self) -> tuple[int, int]:
        """The most probable length and size of the wobble, as places on their grids."""
        over_rungs = np.exp(self.log_evidence - self.log_evidence.max()).sum(axis=0)
        length, size = np.unravel_index(int(over_rungs.argmax()), over_rungs.shape)
        return int(length), int(size)

    @property
    def log_marginal(self) -> Floats:
        """The log width's marginal on the rungs, (G,)."""
        return np.asarray(np.logaddexp.reduce(self.log_evidence.reshape(len(self.log_width), -1), axis=1))


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
    stations = _Stations.of(traced)
    start, prior = _begin(traced, asymmetry)
    seen = float(np.ptp(np.vstack([stations.points, traced.breaks]), axis=0)[0])
    log_width = np.linspace(np.log(0.97 * seen), np.log(WIDEST * seen), FIRST_RUNGS)
    shape = _climb(stations, prior, log_width, start(log_width), (0, TYPICAL_SIZE), STEPS)
    best = [int(_weigh(stations, prior, log_width, shape).log_marginal.argmax())]
    smooth = feet(stations.points, log_width[best], shape[best])
    stations = _Stations.along(stations.points, stations.noise, smooth, np.arange(len(LENGTHS_MM)))
    shape = _climb(stations, prior, log_width, shape, (TYPICAL_KERNEL, TYPICAL_SIZE), WARM_STEPS)
    ladder = _weigh(stations, prior, log_width, shape)
    log_width = _relaid(ladder)
    warm = np.stack([np.interp(log_width, ladder.log_width, column) for column in shape.T], axis=-1)
    shape = _climb(stations, prior, log_width, warm, ladder.wobble, WARM_STEPS)
    ladder = _weigh(stations, prior, log_width, shape)
    outline, log_proposal = _draw(ladder, draws, rng)
    rows = rng.permutation(draws)[:CHECKED]
    log_weights = _log_exact(outline, stations, prior, rows) - log_proposal[rows]
    effective = _effective_share(log_weights)
    if effective < TOO_FEW:
        return None, [warn("outline.unsure", percent=round(100 * effective))]
    weights, caveats = np.ones(draws), []
    if effective < ENOUGH:
        log_weights = _log_exact(outline, stations, prior, np.arange(draws)) - log_proposal
        weights = np.exp(log_weights - log_weights.max())
        caveats.append(warn("outline.reweighted", percent=round(100 * effective)))
    holds = _holds(outline, _inner(traced.breaks, stations.points))
    weights = weights * holds
    if holds.max() < IMPOSSIBLE or _effective_share(np.log(weights)) < TOO_FEW**2:
        return None, [*caveats, warn("outline.break_outside")]
    return _resampled(outline, weights, rng), caveats


def _begin(traced: Traced, asymmetry: float) -> tuple[_Start, _Prior]:
    """Return where the fit begins, and the prior, both placed by the traced edges."""
    edges: dict[str, list[Floats]] = {}
    for name, points in traced.pieces:
        edges.setdefault(name, []).append(points)
    found = {name: np.vstack(points) for name, points in edges.items()}
    everything = np.vstack([points for _, points in traced.pieces])
    top = float(np.median(found["upper"][:, 1])) if "upper" in found else float(everything[:, 1].min())
    bottom = float(np.median(found["lower"][:, 1])) if "lower" in found else float(everything[:, 1].max())
    height = max(bottom - top, 5.0)
    left = float(np.percentile(found["left"][:, 0], 10)) if "left" in found else None
    right = float(np.percentile(found["right"][:, 0], 90)) if "right" in found else None
    n = ROUNDNESS_PRIOR[0]
    middle = (top + bottom) / 2
    centre = np.array([everything[:, 0].mean(), middle, 0.0, 0.0, n, n, 0.0, 0.0, 0.0])
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
        shape = np.zeros((len(log_width), 9))
        shape[:, X0], shape[:, Y0], shape[:, HEIGHT] = x0, self.middle, self.log_height
        shape[:, UPPER] = shape[:, LOWER] = ROUNDNESS_PRIOR[0]
        return shape


def _climb(
    stations: _Stations, prior: _Prior, log_width: Floats, shape: Floats, wobble: tuple[int, int], steps: int
) -> Floats:
    """Fit the shape on every rung under one wobble (its kernel's and size's place) by damped Gauss-Newton."""
    length, size = wobble
    variance = SIZES_MM[size] ** 2 * stations.values[length] + 1
    root = stations.whiten[length] / np.sqrt(variance)[:, None]
    precision = 1 / prior.sd**2
    mean = prior.mean(log_width)
    limit = np.array([10.0, 10.0, 0.05, 0.2, 0.4, 0.4, 0.05, 0.05, 0.1])
    for _ in range(steps):
        away, slopes = distances(stations.points, log_width, shape)
        r, j = away @ root.T, root @ slopes
        a = j.transpose(0, 2, 1) @ j + np.diag(precision)
        b = (j.transpose(0, 2, 1) @ r[..., None])[..., 0] + precision * (shape - mean)
        step = np.linalg.solve(a, b[..., None])[..., 0]
        shape = shape - step / np.maximum(1.0, np.abs(step / limit).max(axis=1, keepdims=True))
    return shape


def _weigh(stations: _Stations, prior: _Prior, log_width: Floats, shape: Floats) -> _Ladder:
    """Return the Gaussian posterior and the evidence of every rung x length x size (Laplace)."""
    away, slopes = distances(stations.points, log_width, shape)
    both = np.concatenate([slopes, away[..., None]], axis=-1)  # (G, M, 10)
    turned = stations.whiten[:, None] @ both[None]  # (L, G, M, 10)
    variance = SIZES_MM[:, None] ** 2 * stations.values[:, None] + 1  # (L, S, M)
    weighted = turned[:, None].transpose(0, 1, 2, 4, 3) / variance[:, :, None, None]  # (L, S, G, 10, M)
    normal = weighted @ turned[:, None]  # (L, S, G, 10, 10)
    off = shape - prior.mean(log_width)
    precision = 1 / prior.sd**2
    a = normal[..., :9, :9] + np.diag(precision)
    b = normal[..., :9, 9] + precision * off
    solved = np.linalg.solve(a, b[..., None])[..., 0]
    quad = normal[..., 9, 9] + (precision * off**2).sum(axis=-1) - (b * solved).sum(axis=-1)
    upper = np.linalg.cholesky(a)
    half_log_det = np.log(np.diagonal(upper, axis1=-2, axis2=-1)).sum(axis=-1)
    log_noise = 0.5 * np.log(variance).sum(axis=-1)[:, :, None]
    evidence = -0.5 * quad - log_noise - half_log_det + _log_wobble_prior()[stations.kernels][:, :, None]
    root = np.linalg.inv(upper).swapaxes(-1, -2)
    return _Ladder(
        log_width=log_width,
        log_evidence=np.moveaxis(evidence, 2, 0),
        mean=np.moveaxis(shape - solved, 2, 0),
        root=np.moveaxis(root, 2, 0),
        log_det=np.moveaxis(half_log_det, 2, 0),
    )


def _log_wobble_prior() -> Floats:
    """Return the log prior of every length x size of the wobble, (L, S), up to a constant."""
    length = -0.5 * ((np.log(LENGTHS_MM) - LENGTH_PRIOR[0]) / LENGTH_PRIOR[1]) ** 2
    size = -0.5 * ((np.log(SIZES_MM) - SIZE_PRIOR[0]) / SIZE_PRIOR[1]) ** 2
    return np.asarray(length[:, None] + size)


def _relaid(ladder: _Ladder) -> Floats:
    """Lay the rungs anew over the mass of the first ladder, one rung beyond it on each side."""
    fine = np.linspace(ladder.log_width[0], ladder.log_width[-1], 2000)
    log_p = np.interp(fine, ladder.log_width, ladder.log_marginal)
    inside = np.flatnonzero(log_p > log_p.max() - 9.0)
    rung = ladder.log_width[1] - ladder.log_width[0]
    return np.linspace(fine[inside[0]] - 0.15 * rung, fine[inside[-1]] + 0.15 * rung, RUNGS)


def _draw(ladder: _Ladder, draws: int, rng: np.random.Generator) -> tuple[Outline, Floats]:
    """Draw widths, wobbles and shapes; return them with the log density that they were drawn from."""
    fine = np.linspace(ladder.log_width[0], ladder.log_width[-1], 1401)
    log_p = np.interp(fine, ladder.log_width, ladder.log_marginal)
    density = np.exp(log_p - log_p.max())
    cumulative = np.concatenate([[0.0], np.cumsum((density[1:] + density[:-1]) / 2)])
    step = fine[1] - fine[0]
    log_norm = np.log(cumulative[-1] * step)
    log_width = np.interp(rng.random(draws) * cumulative[-1], cumulative, fine)
    at = (log_width - ladder.log_width[0]) / (ladder.log_width[1] - ladder.log_width[0])
    rung = np.clip(np.floor(at + rng.random(draws)), 0, RUNGS - 1).astype(int)  # a neighbour, by nearness
    flat = np.exp(ladder.log_evidence - ladder.log_marginal[:, None, None]).reshape(RUNGS, -1)
    levels = np.cumsum(flat, axis=1)
    cell = np.minimum((levels[rung] < rng.random(draws)[:, None]).sum(axis=1), flat.shape[1] - 1)
    length, size = np.divmod(cell, len(SIZES_MM))
    drift = np.gradient(ladder.mean, ladder.log_width, axis=0)
    where = (rung, length, size)
    z = rng.standard_normal((draws, 9))
    mean = ladder.mean[where] + drift[where] * (log_width - ladder.log_width[rung])[:, None]
    shape = mean + np.einsum("nij,nj->ni", ladder.root[where], z)
    log_cell = np.log(np.maximum(flat[rung, cell], 1e-300))
    log_proposal = (
        np.interp(log_width, fine, log_p) - log_p.max() - log_norm + log_cell + ladder.log_det[where]
    ) - 0.5 * (z**2).sum(axis=1)
    return Outline(log_width, shape, SIZES_MM[size], length), log_proposal


def _log_exact(outline: Outline, stations: _Stations, prior: _Prior, rows: NDArray[np.intp]) -> Floats:
    """Return the exact log posterior of some rows, up to a constant."""
    log_width, shape = outline.log_width[rows], outline.shape[rows]
    away, _ = distances(stations.points, log_width, shape)
    length = outline.kernel[rows]
    size = np.searchsorted(SIZES_MM, outline.size[rows] - 1e-9)
    log_likelihood = np.empty(len(rows))
    for at in range(len(LENGTHS_MM)):
        of = length == at
        variance = outline.size[rows][of, None] ** 2 * stations.values[at] + 1
        white = away[of] @ stations.whiten[at].T
        log_likelihood[of] = -0.5 * (white**2 / variance + np.log(variance)).sum(axis=1)
    off = (shape - prior.mean(log_width)) / prior.sd
    return np.asarray(log_likelihood - 0.5 * (off**2).sum(axis=1) + _log_wobble_prior()[length, size])


def _effective_share(log_weights: Floats) -> float:
    """Return the effective sample size over the sample size (Kong 1992)."""
    weights = np.exp(log_weights - log_weights.max())
    return float(weights.sum() ** 2 / (weights**2).sum() / len(weights))


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
    narrow = np.argsort(outline.log_width)[: max(len(outline.log_width) // 100, 10)]
    if _inside(breaks, outline, narrow).min() > SURE:
        return np.ones(len(outline.log_width))
    return _inside(breaks, outline, np.arange(len(outline.log_width)))


def _inside(breaks: Floats, outline: Outline, rows: NDArray[np.intp]) -> Floats:
    """Return how probable it is that the break lies inside the outline in some rows."""
    directions = np.linspace(0, 2 * np.pi, 32, endpoint=False)
    outermost = np.unique(np.argmax(breaks @ np.array([np.cos(directions), np.sin(directions)]), axis=0))
    away, _ = distances(breaks[outermost], outline.log_width[rows], outline.shape[rows])
    # the logistic form of the normal distribution (Bowling et al. 2009) is near enough for a soft wall
    z = -away.max(axis=1) / outline.size[rows]
    return np.asarray(1 / (1 + np.exp(-np.clip(1.702 * z, -40, 40))))


def _resampled(outline: Outline, weights: Floats, rng: np.random.Generator) -> Outline:
    """Draw rows by weight (systematic), and permute them, so that rows of other steps pair at random."""
    draws = len(weights)
    levels = np.cumsum(weights) / weights.sum()
    rows = np.minimum(np.searchsorted(levels, (np.arange(draws) + rng.random()) / draws), draws - 1)
    rows = rng.permutation(rows)
    return Outline(outline.log_width[rows], outline.shape[rows], outline.size[rows], outline.kernel[rows])
