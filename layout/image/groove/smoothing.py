"""A smooth line through stations of which some are wrong and neighbours err alike."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.quantity import Floats

MOST_PIECES = 32
PRICES = np.geomspace(1e-2, 1e5, 8)
PULL = 0.01
TURNS = (7.0, 5.5, 4.5)
"""Beyond how many scatters a station no longer counts, turn by turn."""


@dataclass(frozen=True, eq=False)
class SmoothLine:
    """A smooth line and how well it is known.

    Parameters
    ----------
    values
        The line at all stations.
    scatter
        Robust standard deviation of single stations about it.
    sd
        Standard uncertainty of the line at any one place, from the scatter; neighbours that err alike tell less.
    """

    values: Floats
    scatter: float
    sd: float


def smooth_line(
    along: Floats, values: Floats, weights: Floats, *, length: float, shortest: float, alike: float
) -> SmoothLine:
    """Fit a smooth line, bent as little as the stations allow.

    Cubic splines whose bending has a price (P-splines, Eilers and Marx 1996), the price chosen by generalised
    cross-validation (Craven and Wahba 1979) in which a degree of freedom counts 1.4 times: with few stations the
    plain rule follows noise now and then. Stations far off the line are left out by Tukey's biweight.

    Parameters
    ----------
    along
        Places of the stations from 0 to ``length``, even, shape (S,).
    values, weights
        Their values, and weights from 0 to 1.
    shortest
        No bend and bend back is shorter.
    alike
        So many neighbours are taken to err alike: the line does not follow them then.
    """
    pieces = int(np.clip(2 * length / shortest, 1, MOST_PIECES))
    basis = _splines(along / length, pieces)
    bends = np.diff(np.eye(basis.shape[1]), 2, axis=0)
    bending = bends.T @ bends
    kept, line = weights, np.full_like(values, np.median(values))
    freedom = scatter = 0.0
    prices = PRICES
    for turn in TURNS:
        # where hardly anything is seen the bends run out into a straight line
        straight = _straight(along / length, values, kept)
        pulled = (kept * values + PULL * straight) / (kept + PULL)
        line, freedom, best = _fit(basis, bending * prices[:, None, None], pulled, kept + PULL, alike)
        # later turns leave stations out, and change little else
        prices = prices[max(best - 1, 0) : best + 2]
        rest = values - line
        scatter = 1.4826 * float(np.median(np.abs(rest[weights > 0]))) if (weights > 0).any() else 0.0
        kept = weights * (1 - np.clip(rest / (turn * (scatter + 1e-3)), -1, 1) ** 2) ** 2
    tell = max(float(kept.sum()), 1.0)
    return SmoothLine(line, scatter, scatter * float(np.sqrt(freedom * _alike(values - line, kept) / tell)))


def _splines(share: Floats, pieces: int) -> Floats:
    """Return cubic B-splines on even knots at shares from 0 to 1, shape (S, pieces + 3)."""
    away = np.abs(share[:, None] * pieces - np.arange(-1, pieces + 2))
    near, far = 2 / 3 - away**2 + away**3 / 2, np.clip(2 - away, 0, None) ** 3 / 6
    return np.where(away < 1, near, far)


def _straight(share: Floats, values: Floats, weights: Floats) -> Floats:
    """Return the straight line through weighted stations."""
    basis = np.column_stack([np.ones_like(share), share - 0.5])
    normal = basis.T @ (weights[:, None] * basis) + 1e-9 * np.eye(2)
    return np.asarray(basis @ np.linalg.solve(normal, basis.T @ (weights * values)), float)


def _fit(
    basis: Floats, bending: Floats, values: Floats, weights: Floats, alike: float
) -> tuple[Floats, float, int]:
    """Return the line at the price that predicts left-out stations best, its degrees of freedom, and which it is."""
    normal = basis.T @ (weights[:, None] * basis)
    priced = normal + bending + 1e-9 * np.eye(len(normal))
    inverse = np.linalg.inv(priced)
    lines = inverse @ (basis.T @ (weights * values)) @ basis.T
    freedom = np.einsum("lij,ji->l", inverse, normal)
    rest = (weights * (values - lines) ** 2).sum(axis=1)
    best = int((rest / np.maximum(weights.sum() - 1.4 * alike * freedom, 1e-3) ** 2).argmin())
    return lines[best], float(freedom[best]), best


def _alike(rest: Floats, kept: Floats) -> float:
    """Return how many stations tell as much as one: 1 + 2 (sum of the first positive autocorrelations)."""
    used = rest * np.sqrt(kept)
    size = used @ used
    total = 1.0
    for lag in range(1, len(rest) // 4):
        correlation = float(used[lag:] @ used[:-lag] / size) if size > 0 else 0.0
        if correlation < 0.05:
            break
        total += 2 * correlation
    return total
