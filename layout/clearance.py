"""How much wider than its widest entry this scribe made a column.

The logarithm of a column's clearance is normal about ``mu`` with spread ``tau``: both are the scribe's own,
unknown, and learned from the columns that survive. ``tau`` is half-normal and integrated on a grid; a Student
t, which would come of integrating it in closed form, has no mean once it is exponentiated.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from layout.notices import Assumption, assume
from layout.quantity import Floats
from layout.sign_widths import SignWidths
from layout.signs import SignCounts

TYPICAL = 1.25
TYPICAL_SD_LOG = 0.2
"""Prior of the typical clearance: 95 % from 0.84 (entries run over the rulings) to 1.85. Common practice, no
source."""

SPREAD_SCALE = 0.15
"""Scale of the half-normal prior of the spread (sd of the logarithm) from column to column."""

SPREADS = np.geomspace(0.001, 0.75, 30)
"""Grid of the spread: the half-normal prior leaves 0.5 % below it."""


@dataclass(frozen=True, eq=False)
class Clearance:
    """Joint draws of this scribe's clearance.

    Parameters
    ----------
    ratios
        Clearance of each surviving column, shape (N, C).
    mu
        Logarithm of the typical clearance, shape (N,).
    tau
        Spread from column to column, sd of the logarithm, shape (N,).
    notices
        What was assumed.
    """

    ratios: Floats
    mu: Floats
    tau: Floats
    notices: tuple[Assumption, ...]

    @property
    def typical(self) -> Floats:
        """Typical clearance, shape (N,)."""
        typical: Floats = np.exp(self.mu)
        return typical

    def of_new_column(self, normal: Floats) -> Floats:
        """Return the clearance of a column of which nothing survives.

        Parameters
        ----------
        normal
            Standard normal draws, shape (N,) or (N, columns): which column it is, not which scribe.
        """
        mu, tau = (part.reshape(-1, *[1] * (normal.ndim - 1)) for part in (self.mu, self.tau))
        clearance: Floats = np.exp(mu + tau * normal)
        return clearance


def find_widest(entries: Sequence[SignCounts], widths: SignWidths) -> Floats:
    """Return what the widest of some entries needs, row by row of the draws.

    Parameters
    ----------
    entries
        The entries of one column, one or more.
    widths
        Draws of the widths of signs.

    Returns
    -------
    Floats
        In full digits, shape (N,); zero where nothing is written.
    """
    # entries first: a maximum over rows of contiguous draws is several times faster
    return np.asarray((_undominated(entries) @ widths.ratios.T).max(axis=0))


def _undominated(entries: Sequence[SignCounts]) -> Floats:
    """Return the entries that can be the widest: those of which no other has as many signs of every kind."""
    different = np.array(sorted(set(entries)), dtype=np.float64)
    covered = (different[:, None] <= different).all(axis=2)
    undominated: Floats = different[covered.sum(axis=1) == 1]
    return undominated


def learn_clearance(column_widths: Floats, widest: Floats, rng: np.random.Generator) -> Clearance:
    """Draw the scribe's clearance from its posterior, given each row's widths.

    Given ``tau``, ``mu`` is normal in closed form; the marginal of ``tau`` is taken on a grid, row by row.
    The widest entry that was recorded is taken for the widest that the column held; where many lines are
    lost, that makes the clearance too large.

    Parameters
    ----------
    column_widths
        Widths of the surviving columns with entries, shape (N, C), C may be 0.
    widest
        What the widest entry of each needs by its signs, in the same unit, shape (N, C), above zero.
    rng
        This step's own generator.

    Returns
    -------
    Clearance
        Rows aligned with the widths.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> many = learn_clearance(np.full((1000, 8), 12.0), np.full((1000, 8), 10.0), rng)
    >>> round(float(np.median(many.typical)), 2)
    1.2
    >>> none = learn_clearance(np.empty((1000, 0)), np.empty((1000, 0)), rng)
    >>> none.notices[0].code
    'clearance.none'
    """
    ratios = column_widths / widest
    log_ratios = np.log(ratios)
    rows, columns = ratios.shape
    tau = _draw_spread(log_ratios, rng)
    precision = TYPICAL_SD_LOG**-2 + columns / tau**2
    mean = (np.log(TYPICAL) / TYPICAL_SD_LOG**2 + log_ratios.sum(axis=1) / tau**2) / precision
    mu = mean + rng.standard_normal(rows) / np.sqrt(precision)
    return Clearance(ratios, mu, tau, _notices(columns))


def _draw_spread(log_ratios: Floats, rng: np.random.Generator) -> Floats:
    """Draw tau (N,) from its marginal posterior given log ratios (N, C), mu integrated out."""
    rows, columns = log_ratios.shape
    offset = log_ratios - np.log(TYPICAL)
    # (G, 1) against (N,)
    variance = SPREADS[:, None] ** 2
    whole = variance + columns * TYPICAL_SD_LOG**2
    # the offsets' covariance is tau^2 I + s^2 11': determinant and inverse by Sherman and Morrison
    log_norm = (columns - 1) * np.log(variance) + np.log(whole)
    misfit = (offset**2).sum(axis=1) / variance
    misfit -= offset.sum(axis=1) ** 2 * (TYPICAL_SD_LOG**2 / (whole * variance))
    # the grid is even in log tau, hence the factor tau
    log_prior = np.log(SPREADS) - 0.5 * (SPREADS / SPREAD_SCALE) ** 2
    log_mass = log_prior[:, None] - 0.5 * (log_norm + misfit)
    cumulated = np.cumsum(np.exp(log_mass - log_mass.max(axis=0)), axis=0)
    node = (cumulated < rng.random(rows) * cumulated[-1]).sum(axis=0)
    step = np.log(SPREADS[1] / SPREADS[0])
    # even within the node's cell, so that the spread is a number and not one of a list
    tau: Floats = SPREADS[node] * np.exp(step * (rng.random(rows) - 0.5))
    return tau


def _notices(columns: int) -> tuple[Assumption, ...]:
    """Return what was assumed about the clearance."""
    percent = 100 * TYPICAL_SD_LOG
    if not columns:
        return (assume("clearance.none", "writing", typical=TYPICAL, percent=percent),)
    # the median of a half-normal distribution
    spread = round(100 * 0.6745 * SPREAD_SCALE)
    few = assume("clearance.few", "writing", columns=columns, typical=TYPICAL, percent=percent, spread=spread)
    return (few, assume("clearance.widest", "writing"))
