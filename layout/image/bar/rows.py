"""A ribbon's rows: where across divisions stand on them, and what groups of them see of every division.

Every division is measured on several groups of rows, so that dirt or a figure on some of them is outvoted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.image.bar.guide import Guide, Ribbon, cut_ribbon
from layout.image.bar.lattice import Lattice, fit_lattice
from layout.image.bar.ridges import answer, peaks_of, zero_near
from layout.image.photograph import Pixels
from layout.quantity import Floats

Filters = tuple[Floats, Floats]

PRESENT = 0.4
"""A division is there if its contrast is this share of the usual one."""
OFF_PITCH = 0.2
"""How far from its place a division may stand, in pitches."""
MOST = 0.7
"""What share of the divisions must reach a row that counts as theirs."""
MOST_ROWS, GROUPS = 39, 9
LEAST_FOR_ROWS = 9
FINE_REACH = 90.0
"""Ribbons that reach less far across, px, show divisions so close that linear interpolation would bend them."""


@dataclass(frozen=True, eq=False)
class Rows:
    """What groups of rows see of the divisions.

    Parameters
    ----------
    number, signs
        Of the divisions; for edges 1 where brightness rises and -1 where it falls, for lines zeros.
    expected, pitch
        Where each should lie, and how far its neighbours, px.
    across
        Where each group lies across, shape (groups,).
    off, contrasts
        How far from its place each group sees a division, and how strongly, (groups, divisions); NaN where it
        sees none.
    others
        Places and strengths of all that might be a division.
    """

    number: np.ndarray
    signs: Floats
    expected: Floats
    pitch: Floats
    across: Floats
    off: Floats
    contrasts: Floats
    others: tuple[Floats, Floats]

    @property
    def lean(self) -> Floats:
        """Return how far along each division runs for every pixel across: a straight line over the bar."""
        half = len(self.across) // 2
        if len(self.across) < 3:
            return np.zeros(len(self.expected))
        lean = _nan_median(self.off[-half:]) - _nan_median(self.off[:half])
        lean = lean / (self.across[-half:].mean() - self.across[:half].mean())
        known = np.isfinite(lean)
        if known.sum() < 4:
            return np.full(len(self.expected), float(np.median(lean[known])) if known.any() else 0.0)
        parts = np.array_split(np.flatnonzero(known), 2)
        (u0, u1), (lean0, lean1) = (
            [float(np.median(of[part])) for part in parts] for of in (self.expected, lean)
        )
        return np.asarray(lean0 + (lean1 - lean0) * (self.expected - u0) / (u1 - u0))


@dataclass(frozen=True, eq=False)
class Seen:
    """Every division, measured by itself: place, contrast, standard uncertainty (px); NaN where nothing is."""

    rows: Rows
    places: Floats
    contrast: Floats
    sd: Floats


def cut_rows(
    pixels: Pixels, guide: Guide, beyond: float, half_height: float, most: int = MOST_ROWS, merged: int = 1
) -> Ribbon:
    """Cut a ribbon along the line: at the photograph's own resolution, or so many pixels merged to one column."""
    rows = int(np.clip(2 * half_height + 1, 5, most)) | 1
    reach = guide.half + beyond
    size = (rows, int(2 * reach) // merged + 1)
    return cut_ribbon(pixels, guide, (reach, half_height), size, cubic=half_height < FINE_REACH)


def mean_profile(ribbon: Ribbon, low: float, high: float) -> Floats:
    """Return the mean brightness of the rows between two places across, or of the row nearest to them."""
    rows = (ribbon.v >= low) & (ribbon.v <= high)
    if not rows.any():
        rows[int(np.abs(ribbon.v - (low + high) / 2).argmin())] = True
    return np.asarray(ribbon.brightness[rows].mean(axis=0), float)


def numbers_between(lattice: Lattice, guide: Guide) -> np.ndarray:
    """Return the numbers of the divisions between the points, the nearest to each point included."""
    ends = lattice.number(np.array([-guide.half, guide.half]))
    return np.arange(np.floor(ends[0] + 0.5), np.floor(ends[1] + 0.5) + 1).astype(int)


def contrast_at(ribbon: Ribbon, places: Floats, filter_: Floats) -> Floats:
    """Return what a filter answers at each row's own places, both (rows, places)."""
    reach = len(filter_) // 2
    middle = np.round((places - ribbon.u[0]) / (ribbon.u[1] - ribbon.u[0])).astype(int)
    index = np.clip(middle[..., None] + np.arange(-reach, reach + 1), 0, len(ribbon.u) - 1)
    rows = np.arange(len(ribbon.v))[:, None, None]
    return np.asarray(ribbon.brightness[rows, index] @ filter_.astype(np.float32), float)


def find_band(heights: Floats, ribbon: Ribbon, near: float) -> tuple[float, float] | None:
    """Return from where to where across most divisions reach: the rows about the strongest one near the middle."""
    usual = np.quantile(heights, 1 - MOST, axis=1)
    close = np.abs(ribbon.v) <= max(near, float(np.abs(ribbon.v).min()))
    peak = int(np.where(close, usual, -np.inf).argmax())
    if usual[peak] <= 0:
        return None
    strong = usual > 0.5 * usual[peak]
    above, below = np.flatnonzero(~strong[:peak]), np.flatnonzero(~strong[peak:])
    first = above[-1] + 1 if len(above) else 0
    last = peak + below[0] - 1 if len(below) else len(strong) - 1
    row = ribbon.v[1] - ribbon.v[0]
    return float(ribbon.v[first] - row / 2), float(ribbon.v[last] + row / 2)


def better_line(guide: Guide, heights: Floats, ribbon: Ribbon, places: Floats, near: float) -> Guide | None:
    """Return the line along the middle of the divisions where that is another one; None where it is this one."""
    thirds = np.array_split(np.arange(len(places)), 3)
    bands = [find_band(heights[:, third], ribbon, near) if len(third) > 1 else None for third in thirds]
    if bands[0] is None or bands[1] is None or bands[2] is None:
        return None
    run = float(places[thirds[2]].mean() - places[thirds[0]].mean())
    slope, middle = (sum(bands[2]) - sum(bands[0])) / 2 / run, sum(bands[1]) / 2
    tall = bands[1][1] - bands[1][0]
    if abs(slope) * guide.half < 0.06 * tall and abs(middle) < 0.2 * tall:
        return None
    return guide.moved(middle, float(np.arctan(slope)))


def look_at(
    ribbon: Ribbon,
    lattice: Lattice,
    sought: tuple[np.ndarray, Floats],
    band: tuple[float, float],
    filters: Filters,
) -> Rows:
    """Look for every division on groups of rows.

    Parameters
    ----------
    sought
        The divisions' numbers, and the sign of what is sought at each: of a line, or of an edge.
    filters
        The one whose answer vanishes at a division, and the one whose answer is strongest there.
    """
    number, signs = sought
    edges = signs if np.ptp(signs) > 0 else np.zeros(len(signs))
    step = ribbon.u[1] - ribbon.u[0]
    expected, pitch = lattice.at(number, edges), lattice.pitch(number)
    inner = 0.08 * (band[1] - band[0])
    rows = np.flatnonzero((ribbon.v >= band[0] + inner) & (ribbon.v <= band[1] - inner))
    if len(rows) == 0:
        rows = np.array([int(np.abs(ribbon.v - sum(band) / 2).argmin())])
    index = (expected - ribbon.u[0]) / step
    reach = max(2, int(0.3 * float(pitch.max()) / step))
    falls = _falls(filters)
    places, contrasts, across = [], [], []
    for group in np.array_split(rows, min(GROUPS, max(1, len(rows) // 2))):
        seen = answer(np.asarray(ribbon.brightness[group].mean(axis=0), float), filters)
        # the answer that vanishes falls through zero at a bright line's middle or at a rise, else it rises
        zero = seen.even * falls
        found = np.where(signs > 0, zero_near(zero, index, reach), zero_near(-zero, index, reach))
        strong = np.interp(np.nan_to_num(found), np.arange(len(seen.odd)), seen.odd)
        places.append(ribbon.u[0] + found * step)
        contrasts.append(np.where(np.isfinite(found), signs * strong, 0.0))
        across.append(float(ribbon.v[group].mean()) - sum(band) / 2)
    contrast = np.array(contrasts)
    usual = np.median(contrast[contrast > 0]) if (contrast > 0).any() else np.inf
    off = np.array(places) - expected
    good = (contrast > PRESENT * usual) & (np.abs(np.nan_to_num(off, nan=1e12)) < OFF_PITCH * pitch)
    whole = answer(np.asarray(ribbon.brightness[rows].mean(axis=0), float), filters).odd
    strength = np.abs(whole) if edges.any() else whole * signs[0]
    peaks = peaks_of(strength, 0.0)
    return Rows(
        number=number,
        signs=edges,
        expected=expected,
        pitch=pitch,
        across=np.array(across),
        off=np.where(good, off, np.nan),
        contrasts=np.where(good, contrast, np.nan),
        others=(ribbon.u[0] + peaks * step, strength[peaks]),
    )


def _falls(filters: Filters) -> float:
    """Return the sign under which the vanishing answer falls at a bright line or at a rise."""
    vanishing, _ = filters
    # an odd filter before a bright line sees it ahead: positive; an even one before a rise sees a dark line
    return 1.0 if vanishing[-2] * vanishing[1] < 0 else -1.0


def agree(rows: Rows) -> Seen:
    """Let the groups of rows agree on each division, which may run aslant across them."""
    off = rows.off - rows.across[:, None] * rows.lean
    off = np.where(_even_rows(off, rows)[:, None], off, np.nan)
    count = np.isfinite(off).sum(axis=0)
    middle = _nan_median(off)
    away = np.abs(off - middle)
    spread = 1.4826 * _nan_median(away)
    near = away <= 2.5 * spread + 0.02
    mean = np.where(near, np.nan_to_num(off), 0.0).sum(axis=0) / np.maximum(near.sum(axis=0), 1)
    enough = count >= max(1, (int(np.isfinite(off).any(axis=1).sum()) + 1) // 2)
    return Seen(
        rows=rows,
        places=np.where(enough, rows.expected + mean, np.nan),
        contrast=np.where(enough, np.nan_to_num(_nan_median(rows.contrasts)), 0.0),
        sd=np.nan_to_num(spread) / np.sqrt(np.maximum(count, 1)),
    )


def _even_rows(off: Floats, rows: Rows) -> np.ndarray:
    """Say on which groups of rows divisions are even: on others figures or dirt cross them."""
    if len(rows.number) < LEAST_FOR_ROWS:
        return np.ones(len(off), bool)
    scatter = np.full(len(off), np.inf)
    for k, row in enumerate(off + rows.expected):
        seen = np.isfinite(row)
        if seen.sum() >= LEAST_FOR_ROWS:
            lattice = fit_lattice(rows.number[seen], row[seen], rows.signs[seen])
            # a fit through few places follows them: what is left says less than it seems
            freedom = seen.sum() / (seen.sum() - 4)
            misfit = row[seen] - lattice.at(rows.number[seen], rows.signs[seen])
            scatter[k] = float(np.sqrt(np.mean(np.clip(np.abs(misfit), 0, 3.0) ** 2) * freedom))
    best = float(scatter.min())
    return scatter <= 2.0 * best + 0.03 if np.isfinite(best) else np.ones(len(off), bool)


def _nan_median(values: Floats) -> Floats:
    """Return the median over the rows, NaN where a column has none; without a warning."""
    ordered = np.sort(values, axis=0)
    count = np.isfinite(values).sum(axis=0)
    low, high = np.maximum((count - 1) // 2, 0), np.maximum(count // 2, 0)
    columns = np.arange(values.shape[1])
    middle = (
        ordered[np.minimum(low, len(values) - 1), columns]
        + ordered[np.minimum(high, len(values) - 1), columns]
    ) / 2
    return np.asarray(np.where(count > 0, middle, np.nan))
