"""One line that says what decides the order of the candidates, and where it would tip."""

from __future__ import annotations

import numpy as np

from layout.candidates.ranking import NONE_OF_THESE
from layout.quantity import Quantity, concise
from layout.results import RankingRow, Results

SAME = 0.005
"""Relative difference of two needs below which width cannot tell them apart."""


def decides(results: Results) -> str:
    """Say which of the two best candidates fits better, and at which clearance the other would overtake it.

    A candidate that needs r sign widths fills a space of C at the clearance C / r. Two of them are equally near
    to it, on a logarithmic scale, at C / sqrt(r1 r2): there the order tips.

    Parameters
    ----------
    results
        With a ranking.

    Returns
    -------
    str
        One sentence, also where nothing is decided.
    """
    ranked = [row for row in results.ranking if row.weight is not None and row.name != NONE_OF_THESE]
    capacity = None if results.capacity is None else results.capacity.sign_widths
    if not ranked or capacity is None or results.clearance is None:
        return "Nothing decides the order: no candidate has both a width and a space to be compared with."
    if len(ranked) == 1:
        return f"{ranked[0].name} is the only candidate that has a width; it competes with '{NONE_OF_THESE}' alone."
    first, second = ranked[:2]
    need, other = _median(first), _median(second)
    if abs(np.log(need / other)) < SAME:
        return f"{first.name} and {second.name} need the same width: width cannot decide between them."
    tips = float(np.median(capacity.draws)) / np.sqrt(need * other)
    side = "above" if need > other else "below"
    return (
        f"{first.name} stands before {second.name} at this scribe's clearance of {_shown(results.clearance.typical)}; "
        f"{side} a clearance of {tips:.2f} {second.name} would overtake it."
    )


def _median(row: RankingRow) -> float:
    """Return what a candidate needs, in sign widths."""
    return 0.0 if row.required is None else float(np.median(row.required.draws))


def _shown(quantity: Quantity) -> str:
    """Return a quantity with its standard uncertainty in brackets."""
    summary = quantity.summary()
    return concise(summary.value or 0.0, summary.sd or 0.0)
