"""Which ticks of a bar are longer, and what that says of its unit.

On a millimetre bar the fives and tens are longer, on one with half millimetres every second besides, on a bar of
inches every second, fourth, eighth and sixteenth (common practice, no source).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from layout.quantity import Floats

Unit = Literal["decimal", "half", "binary", "unknown"]

PERIODS: dict[Unit, tuple[int, ...]] = {
    "decimal": (10, 5),
    "half": (10, 2),
    "binary": (16, 8, 4, 2),
}
LEAST_EXPLAINED = 0.5
MOST_AS_LONG = 0.2
LEAST_TICKS = 11
LIKELY = 3


@dataclass(frozen=True)
class Hierarchy:
    """The pattern of longer ticks, and the number of one of the longest."""

    unit: Unit
    first: int = 0


def read_hierarchy(number: NDArray[np.int_], lengths: Floats) -> Hierarchy:
    """Tell from the ticks' lengths, each (N,), what bar it is; the unit is unknown where they do not tell.

    Examples
    --------
    >>> n = np.arange(30)
    >>> read_hierarchy(n, np.where(n % 10 == 3, 3.0, np.where(n % 5 == 3, 2.0, 1.0)))
    Hierarchy(unit='decimal', first=3)
    >>> read_hierarchy(n, np.ones(30)).unit
    'unknown'
    """
    total = float(np.abs(lengths - np.median(lengths)).sum())
    if len(number) < LEAST_TICKS or total <= 1e-9:
        return Hierarchy("unknown")
    found: list[tuple[float, Hierarchy]] = []
    for unit, periods in PERIODS.items():
        for first in _likely_firsts(number, lengths, periods[0]):
            share = _explained(number - first, lengths, periods, total)
            found.append((share, Hierarchy(unit, int(first))))
    best, hierarchy = max(found, key=lambda one: one[0])
    return hierarchy if best >= LEAST_EXPLAINED else Hierarchy("unknown")


def _likely_firsts(number: NDArray[np.int_], lengths: Floats, period: int) -> list[int]:
    """Return where the longest may stand: the few places of a period at which ticks are longest on average."""
    place = number % period
    count = np.bincount(place, minlength=period)
    mean = np.bincount(place, weights=lengths, minlength=period) / np.maximum(count, 1)
    return [int(first) for first in np.argsort(-mean)[:LIKELY] if count[first]]


def _explained(number: NDArray[np.int_], lengths: Floats, periods: tuple[int, ...], total: float) -> float:
    """Return the share of the lengths' deviations that a pattern explains, less what as many free medians would."""
    level = np.zeros(len(number), int)
    for rank, period in enumerate(reversed(periods), start=1):
        level[number % period == 0] = rank
    classes = [lengths[level == rank] for rank in range(len(periods) + 1)]
    classes = [members for members in classes if len(members)]
    # the shorter classes are told apart: hardly one is as long as the next; the longest may run out of sight
    apart = pairwise(classes[: max(2, len(periods) - 1)])
    usual = [float(np.median(one)) for one in classes]
    if usual != sorted(usual) or any(
        np.mean(one >= np.median(longer)) > MOST_AS_LONG for one, longer in apart
    ):
        return 0.0
    rest = sum(float(np.abs(members - np.median(members)).sum()) for members in classes)
    return 1 - (rest / total) * (len(lengths) - 1) / max(len(lengths) - len(classes), 1)
