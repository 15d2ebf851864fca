"""Which of the proposed contents would have fitted into the lost space, best first.

Weights are relative support within a list that a person made: who leaves the right content out cannot find it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from layout.candidates.width import CandidateWidth, Proposal, Space, log_mean, log_support, measure_candidate
from layout.errors import CallError
from layout.notices import Missing, Notice, assume
from layout.quantity import Floats
from layout.sign_widths import SignWidths

NONE_OF_THESE = "none of these"
TOO_WIDE = 0.95
TOO_NARROW = 0.05


@dataclass(frozen=True, eq=False)
class Ranked:
    """One candidate against the lost space; what cannot be said is None.

    Parameters
    ----------
    name
        The candidate's, or ``NONE_OF_THESE``.
    width
        What it needs by its texts.
    predicted
        The same with each column's own clearance, in full digits, shape (N,).
    probability_too_wide
        Share of the draws in which that exceeds the capacity.
    weight
        Relative support; all weights add up to one.
    verdict
        ``too wide``, ``too narrow`` or ``fits``.
    """

    name: str
    width: CandidateWidth | None = None
    predicted: Floats | None = None
    probability_too_wide: float | None = None
    weight: float | None = None
    verdict: str | None = None


@dataclass(frozen=True, eq=False)
class Ranking:
    """Candidates, best first; those without a width stand last, in the order given."""

    rows: tuple[Ranked, ...]
    notices: tuple[Notice, ...]


def rank(
    proposals: Sequence[Proposal],
    space: Space,
    tablet: Floats,
    widths: SignWidths,
    rng: np.random.Generator,
) -> Ranking:
    """Rank candidates by how well they would have filled the lost space.

    A candidate's weight is the mean over the rows of the conditional density of the lost space, given the
    row's sign widths and clearance. "None of these" competes with a density that knows no preferred width: log-
    uniform from one full digit, about the least that a column holds, to the width of the tablet, the most that
    it can. On a tablet 26 digits wide, a candidate that fits within 12 % has at best eleven times its density.

    The n-th columns of all candidates meet the same draw of the scribe's variation, so that equal candidates
    share equally and another candidate in the list does not shuffle the rest.

    Parameters
    ----------
    proposals
        In the editor's order, which breaks ties.
    space
        Draws of the lost space, and of the sign width and clearance of the scribe who filled it.
    tablet
        Reconstructed width of the tablet, mm, shape (N,).
    widths
        Draws of the widths of signs.
    rng
        This step's own generator.

    Returns
    -------
    Ranking
        With a missing notice for each candidate without a width.
    """
    fits, faults = _measure_all(proposals, widths)
    columns = max((fit.by_column.shape[1] for _, fit in fits), default=0)
    # one row of normals a column: the first columns keep theirs when a candidate with more is added
    variation = rng.standard_normal((columns, len(space.lost))).T
    clearance = np.exp(space.mu[:, None] + space.tau[:, None] * variation)
    rows = [_judge(name, fit, clearance, space.lost / space.full) for name, fit in fits]
    notices: list[Notice] = []
    if rows:
        supports = [*(log_support(fit, space) for _, fit in fits), _support_of_none(space, tablet)]
        rows = _weigh([*rows, Ranked(NONE_OF_THESE)], np.array(supports))
        notices.append(assume("ranking.none", "candidates"))
        if rows[0].weight is None:
            notices.append(
                Missing("ranking", "no draw leaves any space to fill, so that nothing can be weighed")
            )
    notices.extend(Missing(f"ranking[{place}]", text) for place, (_, text) in enumerate(faults, len(rows)))
    return Ranking((*rows, *(Ranked(name) for name, _ in faults)), tuple(notices))


def _measure_all(
    proposals: Sequence[Proposal], widths: SignWidths
) -> tuple[list[tuple[str, CandidateWidth]], list[tuple[str, str]]]:
    """Return the candidates that have a width, and those that have none with the reason, each by name."""
    fits, faults = [], []
    for proposal in proposals:
        try:
            fits.append((proposal.name, measure_candidate(proposal, widths)))
        except CallError as error:
            faults.append((proposal.name, f"{proposal.name}: {error.message}"))
    return fits, faults


def _judge(name: str, fit: CandidateWidth, clearance: Floats, capacity: Floats) -> Ranked:
    """Compare what a candidate would have taken with the capacity, both in full digits."""
    predicted = (fit.by_column * clearance[:, : fit.by_column.shape[1]]).sum(axis=1)
    too_wide = float((predicted > capacity).mean())
    verdict = "too wide" if too_wide > TOO_WIDE else "too narrow" if too_wide < TOO_NARROW else "fits"
    return Ranked(name, fit, predicted, too_wide, verdict=verdict)


def _support_of_none(space: Space, tablet: Floats) -> float:
    """Return the log support of a content of unknown width: log-uniform from a digit to the tablet."""
    possible = (space.lost > space.full) & (space.lost < tablet)
    lost, reach = np.where(possible, (space.lost, tablet / space.full), np.e)
    return log_mean(np.where(possible, -np.log(lost) - np.log(np.log(reach)), -np.inf))


def _weigh(rows: list[Ranked], supports: Floats) -> list[Ranked]:
    """Return the rows with their weights, best first; equals keep their order."""
    if supports.max() == -np.inf:
        return rows
    shares = np.exp(supports - supports.max())
    weighed = [
        replace(row, weight=float(share)) for row, share in zip(rows, shares / shares.sum(), strict=True)
    ]
    return sorted(weighed, key=lambda row: row.weight or 0.0, reverse=True)
