"""How wide each kind of sign is on this fragment.

The extent of an entry is not a sum of independent signs: measured on unbroken lines it scatters by 12 to
15 % however many signs it holds (our own statistics of the MaiCuBeDa annotations, CC0, doi
10.11588/data/QSNIQ2). So each entry has a stretch of its own, and entries, not signs, are the independent
data::

    length = full * (counts . ratios) * exp(s),    s ~ N(0, stretch^2 + scatter^2 / signs)

``full`` is the width of a full digit, ``ratios`` are the widths of the kinds of sign in full digits. The
stretch has median one: half of the entries are longer than ``full`` says.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from layout.notices import Notice, assume, warn
from layout.quantity import Floats, effective_share, resample

Ints = NDArray[np.intp]

FULL_PER_PITCH = 0.9
FULL_UNKNOWN_MM = 5.0
FULL_SD_LOG = 0.4
FLAT_SD_LOG = 100.0
"""Prior of a full digit: about as wide as the lines are apart, or 5 mm where no pitch is known (signs are 2.5
to 6 mm high); 95 % within a factor of 2.2. Common practice, no source."""

KIND_NAMES = ("units-only", "tens-only", "blank", "mean sign")
RATIO_MEANS = np.array([0.45, 0.70, 0.70, 1 / 1.5])
RATIO_SDS = np.array([0.12, 0.22, 0.40, 0.15])
"""Priors of units-only, tens-only, blank and the mean sign, in full digits: normal, cut off at zero."""

STRETCHES = np.geomspace(0.02, 0.45, 10)
STRETCH_MEDIAN = 0.11
STRETCH_SD_LOG = 0.4
"""Grid and log-normal prior of the entries' own stretch."""

SCATTERS = np.array([0.0, 0.1, 0.2])
"""Scatter of single signs, sd of the logarithm, equally likely: from none to what running text shows."""

NEWTON_STEPS = 12
LEAST_RATIO = 0.02
POOR_EFFICIENCY = 0.1


@dataclass(frozen=True)
class FullPrior:
    """Log-normal prior of a full digit's width; ``sd_log`` of ``FLAT_SD_LOG`` says that nothing is known."""

    median: float
    sd_log: float
    notices: tuple[Notice, ...] = ()


def expect_full_digit(pitch: float | None, *, scaled: bool = True) -> FullPrior:
    """Return what is known of a full digit's width before any entry is measured.

    Parameters
    ----------
    pitch
        Line pitch in the unit of the lengths (mm, or pixels where there is no scale); None: unknown.
    scaled
        Whether lengths are in mm.

    Returns
    -------
    FullPrior
        With the assumption that it is. Without a pitch and without a scale nothing is known.
    """
    if pitch is not None:
        notice = assume("signs.full_of_pitch", "writing", share=FULL_PER_PITCH, percent=100 * FULL_SD_LOG)
        return FullPrior(FULL_PER_PITCH * pitch, FULL_SD_LOG, (notice,))
    if not scaled:
        return FullPrior(1.0, FLAT_SD_LOG)
    notice = assume("signs.full", "writing", mm=FULL_UNKNOWN_MM, percent=100 * FULL_SD_LOG)
    return FullPrior(FULL_UNKNOWN_MM, FULL_SD_LOG, (notice,))


@dataclass(frozen=True, eq=False)
class MeasuredEntries:
    """Entries with their measured lengths, at the nominal scale.

    Parameters
    ----------
    counts
        Shape (E, 5), the kinds in the order of ``SignCounts``.
    lengths
        Shape (E,), in mm (without a scale: any one unit).
    pointing
        Standard uncertainty of either end, shape (E,), in the unit of the lengths.
    """

    counts: Floats
    lengths: Floats
    pointing: Floats

    def written(self) -> MeasuredEntries:
        """Return the entries that have signs and a length."""
        kept = (self.counts.sum(axis=1) > 0) & (self.lengths > 0)
        return MeasuredEntries(self.counts[kept], self.lengths[kept], self.pointing[kept])


@dataclass(frozen=True, eq=False)
class SignWidths:
    """Joint draws of the widths of signs.

    Parameters
    ----------
    full
        Width of a full digit, shape (N,), mm; None where neither entries nor a scale say anything.
    ratios
        Widths of all kinds in full digits, shape (N, 5), the kinds in the order of ``SignCounts``.
    entries
        How many entries they were learned from.
    notices
        Assumptions and warnings.
    """

    full: Floats | None
    ratios: Floats
    entries: int
    notices: tuple[Notice, ...]

    @cached_property
    def mean_ratios(self) -> Floats:
        """Mean widths of all kinds in full digits, shape (5,)."""
        return np.asarray(self.ratios.mean(axis=0))


def fit_sign_widths(
    entries: MeasuredEntries, prior: FullPrior, scale_ratio: Floats, rng: np.random.Generator
) -> SignWidths:
    """Draw the widths of signs from their posterior.

    For every stretch and scatter on a grid, a Gaussian approximation of the ratios gives the proposals; they
    are weighed by the exact likelihood, in which ``full`` is integrated in closed form, and resampled; then
    ``full`` is drawn from its exact conditional distribution. Without entries the posterior is the prior, and
    the notices say so.

    Parameters
    ----------
    entries
        Those without signs or without length are left out.
    prior
        Of a full digit, in the unit of the lengths.
    scale_ratio
        Each draw's scale divided by the nominal one, shape (N,).
    rng
        This step's own generator.

    Returns
    -------
    SignWidths
        Rows aligned with ``scale_ratio``.

    Examples
    --------
    >>> none = MeasuredEntries(np.empty((0, 5)), np.empty(0), np.empty(0))
    >>> widths = fit_sign_widths(none, expect_full_digit(5.0), np.ones(4000), np.random.default_rng(1))
    >>> round(float(np.median(widths.full)), 1), widths.entries
    (4.5, 0)
    """
    written = entries.written()
    grid = _lay_grid(written, prior)
    rows = len(scale_ratio)
    proposal = _propose(grid, rows, rng)
    weight = np.exp(proposal.log_weight - proposal.log_weight.max())
    chosen = resample(weight, rng)
    full = None
    if len(written.lengths) or prior.sd_log < FLAT_SD_LOG:
        sd = proposal.full_precision[chosen] ** -0.5
        full = np.exp(proposal.full_log[chosen] + sd * rng.standard_normal(rows)) * scale_ratio
    notices = _notices(written, prior, efficiency=effective_share(weight))
    return SignWidths(
        full, np.vstack((np.ones(rows), proposal.ratios.T[:, chosen])).T, len(written.lengths), notices
    )


@dataclass(frozen=True, eq=False)
class _Grid:
    """The entries and the grid of stretch and scatter (G nodes) on which everything else is conditional."""

    counts: Floats  # (E, 5)
    log_lengths: Floats  # (E,)
    precision: Floats  # (G, E), of an entry's log length
    log_prior: Floats  # (G,), of the nodes
    full_log: float
    full_precision: float

    def full_given(self, node: Ints, ratios: Floats) -> tuple[Floats, Floats, Floats]:
        """Return mean and precision of log full and the log evidence, each (N,), given node and ratios."""
        precision = self.precision[node]
        rest = self.log_lengths - np.log(self.counts[:, 0] + ratios @ self.counts[:, 1:].T)
        total = (self.precision.sum(axis=1) + self.full_precision)[node]
        weighted = precision * rest
        mean = (weighted.sum(axis=1) + self.full_precision * self.full_log) / total
        # completing the square in log full; what does not depend on node or ratios is left out
        misfit = np.einsum("ne,ne->n", weighted, rest) - total * mean**2
        norm = np.log(self.precision).sum(axis=1)[node] - np.log(total)
        return mean, total, 0.5 * (norm - misfit)


def _lay_grid(entries: MeasuredEntries, prior: FullPrior) -> _Grid:
    """Return the grid of stretch and scatter for these entries."""
    stretch, scatter = (axis.ravel() for axis in np.meshgrid(STRETCHES, SCATTERS))
    pointing = 2 * (entries.pointing / entries.lengths) ** 2
    variance = stretch[:, None] ** 2 + scatter[:, None] ** 2 / entries.counts.sum(axis=1) + pointing
    return _Grid(
        entries.counts,
        np.log(entries.lengths),
        1 / variance,
        -0.5 * (np.log(stretch / STRETCH_MEDIAN) / STRETCH_SD_LOG) ** 2,
        float(np.log(prior.median)),
        prior.sd_log**-2,
    )


@dataclass(frozen=True, eq=False)
class _Proposal:
    """Ratios from the Gaussian approximation, what is known of log full given each, and the log weights."""

    ratios: Floats  # (N, 4)
    full_log: Floats  # (N,)
    full_precision: Floats  # (N,)
    log_weight: Floats  # (N,)


def _propose(grid: _Grid, rows: int, rng: np.random.Generator) -> _Proposal:
    """Draw a node and its ratios, row by row, and weigh them by the exact posterior."""
    mode, covariance, log_mass = _approximate(grid)
    mass = np.exp(log_mass - log_mass.max())
    node = rng.choice(len(mass), size=rows, p=mass / mass.sum())
    root = np.linalg.cholesky(covariance)
    normal = rng.standard_normal((mode.shape[1], rows)).T
    ratios = (mode.T[:, node] + np.einsum("ijn,nj->in", root.transpose(1, 2, 0)[..., node], normal)).T
    log_density = -0.5 * (normal**2).sum(axis=1)
    log_density -= np.log(np.diagonal(root, axis1=1, axis2=2)).sum(axis=1)[node]
    full_log, full_precision, log_evidence = grid.full_given(node, np.maximum(ratios, LEAST_RATIO))
    log_target = grid.log_prior[node] + log_evidence + _log_prior(ratios)
    log_target[(ratios < LEAST_RATIO).any(axis=1)] = -np.inf
    return _Proposal(ratios, full_log, full_precision, log_target - log_density - log_mass[node])


def _log_prior(ratios: Floats) -> Floats:
    """Return the log density of ratios (…, 4), but for a constant."""
    log_density: Floats = -0.5 * (((ratios - RATIO_MEANS) / RATIO_SDS) ** 2).sum(axis=-1)
    return log_density


def _approximate(grid: _Grid) -> tuple[Floats, Floats, Floats]:
    """Return each node's mode (G, 4) and covariance (G, 4, 4) of the ratios, and the node's log mass (G,).

    Gauss-Newton for log full and the ratios, all nodes at once.
    """
    nodes = len(grid.log_prior)
    counts = grid.counts[:, 1:]
    prior = np.concatenate(([grid.full_log], RATIO_MEANS))
    prior_precision = np.diag(np.concatenate(([grid.full_precision], RATIO_SDS**-2)))
    theta = np.tile(prior, (nodes, 1))
    theta[:, 0] = grid.full_given(np.arange(nodes), theta[:, 1:])[0]
    for _ in range(NEWTON_STEPS):
        signs = grid.counts[:, 0] + theta[:, 1:] @ counts.T
        slope = np.concatenate((np.ones((nodes, len(counts), 1)), counts / signs[..., None]), axis=2)
        weighted = slope * grid.precision[..., None]
        residual = grid.log_lengths - theta[:, :1] - np.log(signs)
        curvature = slope.transpose(0, 2, 1) @ weighted + prior_precision
        gradient = np.einsum("gek,ge->gk", weighted, residual) - (theta - prior) @ prior_precision
        theta = theta + np.linalg.solve(curvature, gradient[..., None])[..., 0]
        theta[:, 1:] = np.maximum(theta[:, 1:], LEAST_RATIO)
    covariance = np.linalg.inv(curvature)[:, 1:, 1:]
    mode = theta[:, 1:]
    # Laplace: the posterior's height at the mode times the volume of the Gaussian
    log_mass = grid.log_prior + grid.full_given(np.arange(nodes), mode)[2] + _log_prior(mode)
    log_mass += 0.5 * np.linalg.slogdet(covariance)[1]
    return mode, covariance, log_mass


def _notices(entries: MeasuredEntries, prior: FullPrior, *, efficiency: float) -> tuple[Notice, ...]:
    """Return what was assumed: the priors of all kinds of sign that no entry holds, and a poor fit."""
    measured = entries.counts.sum(axis=0) > 0
    kinds = zip(KIND_NAMES, measured[1:], strict=True)
    unseen = [name for name, seen in kinds if not seen]
    notices: list[Notice] = [assume("signs.stretch", "writing")] if len(entries.lengths) else [*prior.notices]
    if unseen:
        notices.append(assume("signs.ratios", "writing", kinds=", ".join(unseen)))
    if efficiency < POOR_EFFICIENCY:
        notices.append(warn("signs.efficiency", percent=f"{100 * efficiency:.1g}"))
    return tuple(notices)
