"""Quantities as joint draws, their summaries, and numbers as the GUM writes them.

GUM Supplement 1 (JCGM 101:2008) propagates distributions by Monte Carlo: a quantity is an array of draws.
Row ``i`` of every quantity of one measurement belongs to the same state of the world, so that whatever
depends on one scale, one pointing or one axis stays correlated without a further line of code.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypedDict

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

MM_PER_INCH = 25.4
SIGNIFICANT = 6
SHARES = (0.025, 0.5, 0.975)


class QuantityJson(TypedDict):
    """A quantity in the results; a one-sided bound has no value, no sd and one of low, high."""

    value: float | None
    sd: float | None
    low: float | None
    high: float | None
    unit: str


@dataclass(frozen=True)
class Summary:
    """Median, standard deviation and 95 % coverage interval of a quantity.

    A one-sided bound (``at least``) has ``value`` and ``sd`` None and one of ``low``, ``high``.
    """

    value: float | None
    sd: float | None
    low: float | None
    high: float | None
    unit: str

    def to_json(self) -> QuantityJson:
        """Return the summary to six significant digits."""
        value, sd, low, high = (
            None if number is None else significant(number)
            for number in (self.value, self.sd, self.low, self.high)
        )
        return {"value": value, "sd": sd, "low": low, "high": high, "unit": self.unit}


@dataclass(frozen=True, eq=False)
class Quantity:
    """A unit and N joint draws.

    Parameters
    ----------
    unit
        ``"mm"``, ``"mm2"``, ``"deg"``, ``"mm/px"``, ``"sign widths"``, ``"1"`` …
    draws
        Shape (N,), finite.

    Raises
    ------
    ValueError
        If the draws are not a non-empty one-dimensional array of finite numbers.

    Examples
    --------
    >>> Quantity("mm", np.array([1.0, 2.0, 3.0])).summary().value
    2.0
    """

    unit: str
    draws: Floats

    def __post_init__(self) -> None:
        if self.draws.ndim != 1 or len(self.draws) == 0:
            message = f"needs draws of shape (N,), has {self.draws.shape!r}"
            raise ValueError(message)
        if not np.isfinite(self.draws).all():
            message = f"needs finite draws, has {int((~np.isfinite(self.draws)).sum())} that are not"
            raise ValueError(message)

    def summary(self) -> Summary:
        """Return median, standard deviation and the 95 % interval (equal tails)."""
        low, value, high = quantiles(self.draws, SHARES)
        sd = self.draws.std(ddof=1) if len(self.draws) > 1 else 0.0
        return Summary(float(value), float(sd), float(low), float(high), self.unit)


def quantiles(values: Floats, shares: Sequence[float]) -> Floats:
    """Return quantiles, linear between order statistics, as np.percentile, which takes four times as long.

    Examples
    --------
    >>> quantiles(np.array([3.0, 1.0, 2.0]), (0.0, 0.5, 0.75)).tolist()
    [1.0, 2.0, 2.5]
    """
    last = len(values) - 1
    return np.interp([share * last for share in shares], np.arange(last + 1), np.sort(values))


def effective_share(weights: Floats) -> float:
    """Return the effective sample size of weighted draws over their number (Kong 1992).

    Examples
    --------
    >>> effective_share(np.array([1.0, 1.0, 0.0, 0.0]))
    0.5
    """
    return float(weights.sum() ** 2 / (weights**2).sum() / len(weights))


def resample(weights: Floats, rng: np.random.Generator) -> NDArray[np.intp]:
    """Return as many rows as there are weights, in proportion to them: systematically, then permuted.

    Permuted, so that rows of independent fits pair at random.
    """
    rows = len(weights)
    edges = np.cumsum(weights)
    chosen = np.searchsorted(edges / edges[-1], (np.arange(rows) + rng.random()) / rows)
    return rng.permutation(np.minimum(chosen, rows - 1))


def significant(number: float, digits: int = SIGNIFICANT) -> float:
    """Round a number to so many significant digits.

    Examples
    --------
    >>> significant(41.3812345)
    41.3812
    >>> significant(0.0)
    0.0
    """
    return float(f"{number:.{digits - 1}e}")


def decimals_of(sd: float) -> int:
    """Return how many decimals show two digits of a standard uncertainty (GUM 7.2.6)."""
    return 1 - int(f"{sd:.1e}".split("e")[1])


def concise(value: float, sd: float) -> str:
    """Write a value with two digits of its standard uncertainty in brackets (GUM 7.2.2).

    Examples
    --------
    >>> concise(41.378, 0.2231)
    '41.38(22)'
    >>> concise(1234.0, 56.0)
    '1234(56)'
    >>> concise(98765.0, 4321.0)
    '98800(4300)'
    >>> concise(3.0, 0.0)
    '3'
    >>> concise(-0.001, 0.19)
    '0.00(19)'
    """
    if sd == 0 or not math.isfinite(sd):
        return f"{value:g}"
    places = decimals_of(sd)
    value = round(value, places) + 0.0  # what rounds to zero does not keep its minus sign
    if places <= 0:
        return f"{value:.0f}({round(sd, places):.0f})"
    digits = f"{sd * 10**places:.0f}"
    # 1.0 mm and more: the decimal point stays in the bracket, so that 12.3(1.4) cannot be misread
    bracket = digits if sd < 1 else f"{sd:.{places}f}"
    return f"{value:.{places}f}({bracket})"
