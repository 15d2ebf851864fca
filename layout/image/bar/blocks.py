"""Blocks: their edges are the divisions.

Halation and ink move them to one side where brightness rises, to the other where it falls; the lattice holds that
shift, so that it cancels.
"""

from __future__ import annotations

import numpy as np

from layout.image.bar.guide import Guide, Ribbon
from layout.image.bar.lattice import Lattice, number_features
from layout.image.bar.ridges import answer, edge_filters, peaks_of, zero_near
from layout.image.bar.rows import (
    agree,
    better_line,
    contrast_at,
    cut_rows,
    find_band,
    look_at,
    mean_profile,
    numbers_between,
)
from layout.image.bar.trial import LEAST, Trial, judge
from layout.image.photograph import Pixels
from layout.quantity import Floats

LEAST_BLOCK_PX = 12.0
REACH, ROWS = 0.7, 77
"""How far across blocks are followed, in pitches, and on how many rows at most: some are thin."""
LEAST_CONTRAST = 0.6
"""Edges of blocks are alike; frames and figures beside them make fainter ones."""


def share_of_lesser_level(pixels: Pixels, guide: Guide, period: float) -> float:
    """Return how much of a row is on the lesser of two levels, zero where it is not on two levels."""
    if period < 2 * LEAST_BLOCK_PX:
        return 0.0
    row = mean_profile(cut_rows(pixels, guide, 0.0, 1.5), -1.5, 1.5)
    low, high = np.quantile(row, [0.1, 0.9])
    level = (row - low) / max(high - low, 1e-6)
    dark, bright = float((level < 0.25).mean()), float((level > 0.75).mean())
    return min(dark, bright) if dark + bright > 0.7 else 0.0


def try_blocks(pixels: Pixels, guide: Guide, pitch: float) -> Trial | None:
    """Measure blocks; where their row runs askew to the line, on a better line once or twice more."""
    for last in (False, False, True):
        ribbon = cut_rows(pixels, guide, 0.6 * pitch, REACH * pitch, ROWS)
        width = float(np.clip(0.4 * pitch, 4.0, 30.0))
        numbered = _number_edges(ribbon, guide, pitch, width)
        if numbered is None:
            return None
        lattice, number, signs = numbered
        filters = edge_filters(width, ribbon.u[1] - ribbon.u[0])
        sought = number, signs
        lean = look_at(ribbon, lattice, sought, (-0.2 * pitch, 0.2 * pitch), filters).lean
        heights = signs * contrast_at(
            ribbon, lattice.at(number, signs) + ribbon.v[:, None] * lean, filters[1]
        )
        band = find_band(heights, ribbon, 0.2 * pitch)
        if band is None:
            return None
        better = better_line(guide, heights, ribbon, lattice.at(number), 0.2 * pitch)
        if last or better is None:
            seen = agree(look_at(ribbon, lattice, sought, band, filters))
            return judge("blocks", guide, seen, band, np.zeros(len(number)))
        guide = better
    return None


def _number_edges(
    ribbon: Ribbon, guide: Guide, pitch: float, width: float
) -> tuple[Lattice, np.ndarray, Floats] | None:
    """Find which edge along the middle of a ribbon is which division.

    Return their lattice, the numbers of all that may be between the points, and for each 1 where brightness rises
    and -1 where it falls.
    """
    step = ribbon.u[1] - ribbon.u[0]
    row = (ribbon.v[1] - ribbon.v[0]) * 1.1
    seen = answer(mean_profile(ribbon, -row, row), edge_filters(width, step))
    strength = np.abs(seen.odd)
    high = strength[peaks_of(strength, 0.0)]
    if len(high) == 0:
        return None
    peaks = peaks_of(strength, LEAST_CONTRAST * float(np.quantile(high, 0.9, method="higher")))
    signs = np.sign(seen.odd[peaks])
    reach = max(2, int(0.4 * width / step))
    # before a rise the even filter sees a dark line, behind it a bright one
    places = np.where(signs > 0, zero_near(-seen.even, peaks, reach), zero_near(seen.even, peaks, reach))
    good = np.isfinite(places)
    places, signs = ribbon.u[0] + places[good] * step, signs[good]
    numbered = number_features(places, signs, pitch)
    if numbered is None or numbered.taken.sum() < LEAST["blocks"]:
        return None
    taken = numbered.number[numbered.taken]
    number = numbers_between(numbered.lattice, guide)
    rising = 1.0 if (signs[numbered.taken] * (1 - 2 * (taken % 2))).sum() > 0 else -1.0
    return numbered.lattice, number, rising * (1.0 - 2.0 * (number % 2))
