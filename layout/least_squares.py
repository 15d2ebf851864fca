"""Least squares of a few parameters: Levenberg 1944 and Marquardt 1963, with numerical derivatives."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from layout.quantity import Floats

MOST_STEPS = 40
ENOUGH = 1e-7
"""The sum of squares no longer falls by this share of itself."""


@dataclass(frozen=True, eq=False)
class Fitted:
    """Parameters (p,), their covariance (p, p) for residuals of unit variance, and the sum of squares."""

    parameters: Floats
    covariance: Floats
    chi2: float


def fit_least_squares(residuals: Callable[[Floats], Floats], start: Floats, steps: Floats) -> Fitted:
    """Minimise the sum of squared residuals.

    Parameters
    ----------
    residuals
        From parameters (p,) to residuals (n,), each of unit variance.
    start
        Where to begin, shape (p,).
    steps
        How far apart the parameters are taken for derivatives, shape (p,).

    Examples
    --------
    >>> line = lambda p: np.array([p[0] - 1.0, p[0] + p[1] - 3.0, p[0] + 2 * p[1] - 5.0])
    >>> fit_least_squares(line, np.zeros(2), np.full(2, 1e-6)).parameters.round(6)
    array([1., 2.])
    """
    at, damping = np.array(start, dtype=float), 1e-3
    rest = residuals(at)
    chi2 = float(rest @ rest)
    slopes = _slopes(residuals, at, steps)
    for _ in range(MOST_STEPS):
        normal, right = slopes.T @ slopes, slopes.T @ rest
        scale = np.diag(normal) + 1e-300
        change = np.linalg.lstsq(normal + damping * np.diag(scale), right, rcond=None)[0]
        tried = at - change
        new = residuals(tried)
        better = float(new @ new)
        if not np.isfinite(better) or better > chi2:
            damping *= 10
            if damping > 1e12:
                break
            continue
        done = chi2 - better < ENOUGH * chi2
        at, rest, chi2, damping = tried, new, better, max(damping / 10, 1e-12)
        slopes = _slopes(residuals, at, steps)
        if done:
            break
    return Fitted(at, np.asarray(np.linalg.pinv(slopes.T @ slopes, hermitian=True)), chi2)


def _slopes(residuals: Callable[[Floats], Floats], at: Floats, steps: Floats) -> Floats:
    """Return the derivatives (n, p) by central differences."""
    return np.stack(
        [
            (residuals(at + step) - residuals(at - step)) / (2 * step.sum())
            for step in np.diag(np.asarray(steps, dtype=float))
        ],
        axis=1,
    )
