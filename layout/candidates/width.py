"""What a candidate needs by its texts, and how dense the lost space is about it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from layout.clearance import find_widest
from layout.errors import CallError
from layout.quantity import Floats
from layout.sign_widths import SignWidths
from layout.signs import SignCounts, count_signs


@dataclass(frozen=True)
class Proposal:
    """A proposal for the lost columns: its name, and the texts of each column, line by line."""

    name: str
    columns: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, eq=False)
class CandidateWidth:
    """What a candidate needs by its texts.

    Parameters
    ----------
    by_column
        What each column's widest entry needs, in full digits, shape (N, columns).
    widest_line
        Each column's widest line, counted from 1: the one with the greatest mean width.
    plain_count
        The widest entries by the convention, added up: a digit without tens is half, any other one.
    """

    by_column: Floats
    widest_line: tuple[int, ...]
    plain_count: float

    @cached_property
    def required(self) -> Floats:
        """What all columns need together, in full digits, shape (N,)."""
        return np.asarray(self.by_column.sum(axis=1))


def measure_candidate(proposal: Proposal, widths: SignWidths) -> CandidateWidth:
    """Return what a candidate's columns need, from its texts alone.

    An entry's own stretch is not added: where entries ran long, the column was made wider, and the clearance
    learned from the surviving columns holds that already. Headings set no width.

    Parameters
    ----------
    proposal
        With one column or more and entries in each.
    widths
        Draws of the widths of signs.

    Raises
    ------
    CallError
        If there is no column, a column without entries (one given by a rule alone, say), a text whose signs
        cannot be counted, or nothing written at all.

    Examples
    --------
    >>> widths = SignWidths(np.full(2, 5.0), np.tile([1.0, 0.5, 0.7, 0.7, 0.67], (2, 1)), 0, ())
    >>> measure_candidate(Proposal("a", (("7,30", "2,13,20"), ("5",))), widths).required.tolist()
    [2.7, 2.7]
    """
    if not proposal.columns:
        message = "needs one column or more, has none"
        raise CallError(message)
    columns = [_count_column(index, texts) for index, texts in enumerate(proposal.columns)]
    if not any(sum(entry) for column in columns for entry in column):
        message = "needs a column with signs, has empty entries only"
        raise CallError(message)
    return CandidateWidth(
        np.stack([find_widest(column, widths) for column in columns]).T,
        tuple(_find_widest_line(column, widths) for column in columns),
        sum(max(entry.plain for entry in column) for column in columns),
    )


def _count_column(index: int, texts: tuple[str, ...]) -> list[SignCounts]:
    """Return a column's entries as signs, line by line."""
    if not texts:
        message = f"needs entries in columns[{index}], has none"
        raise CallError(message)
    counts = []
    for line, text in enumerate(texts):
        try:
            counts.append(count_signs(text))
        except CallError as error:
            message = f"columns[{index}].entries[{line}]: {error.message}"
            raise CallError(message) from error
    return counts


def _find_widest_line(column: list[SignCounts], widths: SignWidths) -> int:
    """Return the line of the greatest mean width, the first of equals; lines count from 1."""
    return 1 + int(np.argmax(np.array(column) @ widths.mean_ratios))


@dataclass(frozen=True, eq=False)
class Space:
    """The lost space and the scribe who filled it, row by row; each (N,).

    Parameters
    ----------
    lost
        Lost space, mm; draws below zero are allowed.
    full
        Width of a full digit, mm.
    mu, tau
        Logarithm of the typical clearance, and its spread.
    """

    lost: Floats
    full: Floats
    mu: Floats
    tau: Floats


def log_support(candidate: CandidateWidth, space: Space) -> float:
    """Return the logarithm of the mean conditional density of the lost space about what a candidate needs.

    Given a row's sign widths and clearance the need of one column is log-normal; the sum over several columns
    is taken as log-normal of the same mean and variance (Fenton 1960, from memory), which is close for spreads
    of a tenth or two. No kernel estimate: its tails are noise.

    Parameters
    ----------
    candidate
        What it needs.
    space
        Rows aligned with the candidate's.

    Returns
    -------
    float
        Of a density per mm; minus infinity where no draw leaves any space.
    """
    required = candidate.required
    evenness = (candidate.by_column**2).sum(axis=1) / required**2
    variance = np.log1p(np.expm1(space.tau**2) * evenness)
    log_median = np.log(required * space.full) + space.mu + (space.tau**2 - variance) / 2
    # rows without any space count as density zero
    some = space.lost > 0
    log_lost = np.log(np.where(some, space.lost, 1.0))
    misfit = (log_lost - log_median) ** 2 / variance
    log_density = -log_lost - 0.5 * (misfit + np.log(2 * np.pi * variance))
    return log_mean(np.where(some, log_density, -np.inf))


def log_mean(logs: Floats) -> float:
    """Return the logarithm of a mean, given logarithms, which may all be far below what a float can hold.

    Examples
    --------
    >>> log_mean(np.array([-1000.0, -1000.0]))
    -1000.0
    """
    highest = logs.max()
    if highest == -np.inf:
        return float(highest)
    return float(highest + np.log(np.mean(np.exp(logs - highest))))
