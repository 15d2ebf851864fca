"""Straight lines through traced rulings, and the line pitch.

A scribe's line wobbles, and so does the hand that traces it: the points stand off the straight line by a
Gaussian process along it (Matern 5/2) besides their errors of pointing. The wobble's size and length are shared
by all rulings of a view and learned from all of them together; a draw takes them first, then each line.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.quantity import Floats
from layout.wobble import matern52

STATIONS = 40
SIZES_MM = np.geomspace(0.015, 1.0, 12)
SIZE_PRIOR = (np.log(0.12), 0.8)
LENGTHS_MM = np.array([1.0, 3.0, 8.0, 20.0])

SCATTER_DOF, SCATTER_MM = 3.0, 0.17
"""Prior of the scatter of lines about their regular spacing: worth three lines, about 0.17 mm."""
SKIP = 0.25
"""How probable it is that the next line's ruling was not traced."""
DRIFT_SD_MM = 0.1
MOST_STEPS = 4
WORTH_NAMING = 0.05


@dataclass(frozen=True, eq=False)
class Line:
    """One ruling in the face frame at the nominal scale, mm.

    Parameters
    ----------
    id, runs
        As in the record; ``runs`` is ``vertical`` or ``horizontal``.
    reach
        From where to where it is traced along its run: y of a vertical line, x of a horizontal one.
    middle
        Where along its run the line is centred.
    offset
        x of a vertical line, y of a horizontal one, at the middle; shape (N,).
    slope
        Change of the offset for a step along the run, shape (N,).
    scatter_mm
        Root mean square distance of the points from the line; None with two points.
    """

    id: str
    runs: str
    reach: tuple[float, float]
    middle: float
    offset: Floats
    slope: Floats
    scatter_mm: float | None

    def at(self, along: float) -> Floats:
        """Return the points (N, 2) of the line's draws at a place along its run."""
        across = self.offset + self.slope * (along - self.middle)
        place = np.full_like(across, along)
        return np.stack([across, place] if self.runs == "vertical" else [place, across], axis=-1)

    def mean_at(self, along: float) -> float:
        """Return the mean of the draws across the run, at a place along it."""
        return float(self.offset.mean() + self.slope.mean() * (along - self.middle))


def orthogonal_line(points: Floats) -> tuple[Floats, Floats]:
    """Return the centroid and the unit direction of the line with the least squared distances from points.

    Pearson 1901: the direction is the first principal axis.
    """
    centroid = points.mean(axis=0)
    return centroid, np.linalg.svd(points - centroid, full_matrices=False)[2][0]


@dataclass(frozen=True, eq=False)
class _Trace:
    """One ruling's stations about its own orthogonal line: places along it, distances across, errors."""

    along: Floats
    across: Floats
    noise: Floats
    centroid: Floats
    direction: Floats


def fit_lines(
    traces: list[tuple[str, str, Floats]], pointing_mm: float, draws: int, rng: np.random.Generator
) -> list[Line]:
    """Fit a straight line to each traced ruling.

    Parameters
    ----------
    traces
        Id, ``vertical`` or ``horizontal``, and points of shape (P, 2), mm, two or more that are apart.
    pointing_mm
        Standard uncertainty of one traced point.
    draws
        How many rows; the wobble's size and length are shared by all lines row by row.
    """
    prepared = [_prepare(points, pointing_mm) for _, _, points in traces]
    fits = [_fit_given_wobble(trace) for trace in prepared]
    log_weight = sum((fit.log_evidence for fit in fits), _log_prior())
    weight = np.exp(log_weight - log_weight.max()).ravel()
    cell = rng.choice(weight.size, size=draws, p=weight / weight.sum())
    lines = []
    for (name, runs, points), trace, fit in zip(traces, prepared, fits, strict=True):
        z = rng.standard_normal((2, draws))
        mean_offset, mean_slope, l00, _, l10, l11 = np.take(fit.parameters, cell, axis=1)
        offset, slope = mean_offset + l00 * z[0], mean_slope + l10 * z[0] + l11 * z[1]
        lines.append(_line(name, runs, points, trace, (offset, slope)))
    return lines


def _prepare(points: Floats, pointing_mm: float) -> _Trace:
    """Average a trace into at most 40 stations and turn it by its own direction."""
    parts = np.array_split(points, min(STATIONS, len(points)))
    stations = np.array([part.mean(axis=0) for part in parts])
    noise = max(pointing_mm, 0.005) / np.sqrt([len(part) for part in parts])
    centroid, direction = orthogonal_line(stations)
    away = stations - centroid
    return _Trace(
        away @ direction, away @ np.array([-direction[1], direction[0]]), noise, centroid, direction
    )


@dataclass(frozen=True, eq=False)
class _GivenWobble:
    """A line given each length x size of the wobble: evidence (L, S), and parameters (6, L S).

    The parameters are the means of offset and slope, and the lower triangular root of their covariance.
    """

    log_evidence: Floats
    parameters: Floats


def _log_prior() -> Floats:
    """Return the log prior of the wobble, (L, S)."""
    size = -0.5 * ((np.log(SIZES_MM) - SIZE_PRIOR[0]) / SIZE_PRIOR[1]) ** 2
    return np.tile(size, (len(LENGTHS_MM), 1))


def _fit_given_wobble(trace: _Trace) -> _GivenWobble:
    """Return generalised least squares of one line for every wobble, with its restricted likelihood."""
    design = np.column_stack([np.ones_like(trace.along), trace.along, trace.across]) / trace.noise[:, None]
    apart = np.abs(trace.along[:, None] - trace.along) / LENGTHS_MM[:, None, None]
    correlation = matern52(apart) / np.outer(trace.noise, trace.noise)
    values, bases = np.linalg.eigh(correlation)
    turned = bases.transpose(0, 2, 1) @ design
    variance = SIZES_MM[:, None] ** 2 * np.maximum(values, 0.0)[:, None] + 1  # (L, S, P)
    normal = np.einsum("lpi,lsp,lpj->lsij", turned, 1 / variance, turned)
    a, b = normal[..., :2, :2], normal[..., :2, 2]
    covariance = np.linalg.inv(a)
    mean = (covariance @ b[..., None])[..., 0]
    quad = normal[..., 2, 2] - (b * mean).sum(axis=-1)
    log_det = np.log(variance).sum(axis=-1) + np.log(np.linalg.det(a))
    return _GivenWobble(
        log_evidence=-0.5 * (quad + log_det),
        parameters=np.hstack([mean.reshape(-1, 2), np.linalg.cholesky(covariance).reshape(-1, 4)]).T.copy(),
    )


def _line(name: str, runs: str, points: Floats, trace: _Trace, moved: tuple[Floats, Floats]) -> Line:
    """Bring a line's draws (offset and slope about its own direction) back to the face frame."""
    run, side = (1, 0) if runs == "vertical" else (0, 1)
    normal = np.array([-trace.direction[1], trace.direction[0]])
    shifted, turned = moved
    slope = (trace.direction[side] + turned * normal[side]) / (trace.direction[run] + turned * normal[run])
    middle = float(trace.centroid[run])
    distances = (points - trace.centroid) @ normal
    dof = len(points) - 2
    return Line(
        id=name,
        runs=runs,
        reach=(float(points[:, run].min()), float(points[:, run].max())),
        middle=middle,
        offset=trace.centroid[side] + shifted * (normal[side] - slope * normal[run]),
        slope=slope,
        scatter_mm=float(np.sqrt((distances**2).sum() / dof)) if dof > 0 else None,
    )


# ----------------------------------------------------------------------------------------------- line pitch


@dataclass(frozen=True, eq=False)
class Pitch:
    """The spacing of neighbouring lines at the middle of the traced ones, at the nominal scale.

    Parameters
    ----------
    pitch
        Shape (N,), mm.
    drift
        By how much it grows from one line to the next, shape (N,), mm; None with two lines.
    scatter_mm
        Root mean square distance of the lines from their regular places; None with two lines.
    index
        The number of each line, by the ruling's id, 0 for the uppermost.
    alternatives
        Pitches in mm of other numberings that are not much less probable.
    """

    pitch: Floats
    drift: Floats | None
    scatter_mm: float | None
    index: dict[str, int]
    alternatives: tuple[float, ...]


def fit_pitch(lines: list[Line], draws: int, rng: np.random.Generator) -> Pitch | None:
    """Fit the line pitch by regression on line numbers, which are inferred where rulings are missing.

    Parameters
    ----------
    lines
        Horizontal lines at different heights; None is returned with fewer than two.
    draws
        How many rows.
    """
    if len(lines) < 2:
        return None
    across = float(np.mean([line.middle for line in lines]))
    heights = np.array([line.mean_at(across) for line in lines])
    order = np.argsort(heights)
    y = heights[order]
    if np.diff(y).min() <= 0:
        return None
    numberings = _number(y)
    best = numberings[0]
    design, precision = _design(best.number)
    mean, covariance, scale2, dof = _regress(y, design, precision)
    spread = np.sqrt(scale2 * dof / rng.chisquare(dof, draws))
    z = rng.standard_normal((draws, design.shape[1])) @ np.linalg.cholesky(covariance).T
    drawn = mean + spread[:, None] * z
    straight = len(lines) == 2
    rest = y - design @ mean
    return Pitch(
        pitch=np.abs(drawn[:, 1]),
        drift=None if straight else drawn[:, 2],
        scatter_mm=None if straight else float(np.sqrt((rest**2).sum() / (len(y) - 2))),
        index={lines[at].id: int(k) for at, k in zip(order, best.number, strict=True)},
        alternatives=tuple(
            other.pitch
            for other in numberings[1:]
            if other.log_weight > best.log_weight + np.log(WORTH_NAMING)
        ),
    )


@dataclass(frozen=True, eq=False)
class _Numbering:
    """Line numbers for some heights, their pitch, and how probable they are (log, up to a constant)."""

    number: NDArray[np.int64]
    pitch: float
    log_weight: float


def _number(y: Floats) -> list[_Numbering]:
    """Return the possible numberings of lines at ascending heights, the most probable first.

    The pitch that each gap suggests as one to four steps gives a numbering. It is weighed by the marginal
    likelihood of the regression (scatter and coefficients integrated) and by how often a ruling is missing.
    """
    gaps = np.diff(y)
    found: dict[tuple[int, ...], _Numbering] = {}
    for guess in np.concatenate([gaps / steps for steps in range(1, MOST_STEPS + 1)]):
        steps = np.maximum(np.rint(gaps / guess), 1).astype(np.int64)
        if tuple(steps) in found or steps.max() > 12:
            continue
        number = np.concatenate([[0], np.cumsum(steps)])
        design, precision = _design(number)
        mean, covariance, scale2, dof = _regress(y, design, precision)
        log_weight = -0.5 * dof * np.log(dof * scale2) + 0.5 * np.linalg.slogdet(covariance)[1]
        log_weight += float((np.log(1 - SKIP) + (steps - 1) * np.log(SKIP)).sum())
        found[tuple(steps)] = _Numbering(number, float(mean[1]), float(log_weight))
    return sorted(found.values(), key=lambda numbering: -numbering.log_weight)


def _design(number: NDArray[np.int64]) -> tuple[Floats, Floats]:
    """Return y0 + p k + d k^2 / 2 about the middle of the traced lines, and the prior precision of (y0, p, d).

    The drift's prior is in units of the scatter, as the conjugate form needs it.
    """
    k = number - (number[0] + number[-1]) / 2
    if len(number) == 2:
        return np.column_stack([np.ones_like(k), k]), np.zeros((2, 2))
    return np.column_stack([np.ones_like(k), k, k**2 / 2]), np.diag([0, 0, (SCATTER_MM / DRIFT_SD_MM) ** 2])


def _regress(y: Floats, design: Floats, precision: Floats) -> tuple[Floats, Floats, float, float]:
    """Return mean, covariance over the variance, scale squared and degrees of freedom of the posterior.

    Conjugate regression (Gelman et al. 2013, chapter 14): the variance is scaled inverse chi-squared.
    """
    covariance = np.linalg.inv(design.T @ design + precision)
    mean = covariance @ design.T @ y
    rest = y - design @ mean
    dof = SCATTER_DOF + len(y) - 2
    total = SCATTER_DOF * SCATTER_MM**2 + float((rest**2).sum() + mean @ precision @ mean)
    return mean, np.asarray(covariance, dtype=np.float64), total / dof, dof
