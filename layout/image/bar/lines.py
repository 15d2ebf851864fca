"""Ticks: lines whose middles are the divisions. Halation moves neither side of a line more than the other."""

from __future__ import annotations

import numpy as np

from layout.image.bar.guide import Guide, Ribbon
from layout.image.bar.lattice import Lattice, Numbered, find_seed, fit_lattice, number_features
from layout.image.bar.ridges import answer, line_filters, peaks_of, zero_near
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

NEARLY = 0.9
TURNS = 4
ENOUGH_PX = 18.0
"""A pitch of so many columns shows how ticks run."""
REACH = 6.0
"""How far across ticks are followed, in pitches."""


def try_ticks(pixels: Pixels, guide: Guide, period: float) -> Trial | None:
    """Measure ticks; where they run askew to the line, on a better line once or twice more."""
    looks: tuple[float, float] | None = None
    known: Lattice | None = None
    merged = max(1, int(period / ENOUGH_PX))
    for turn in range(TURNS):
        # the line is found on a coarser ribbon, the divisions are measured at the photograph's own resolution
        last = turn == TURNS - 1
        ribbon = cut_rows(pixels, guide, 0.7 * period + 4, REACH * period, merged=1 if last else merged)
        row = (ribbon.v[1] - ribbon.v[0]) * 1.1
        profile = mean_profile(ribbon, -row, row)
        looks = _looks_of_lines(ribbon, profile, period) if looks is None else looks
        numbered = None if looks is None else _number_lines(ribbon, profile, period, looks, known)
        if looks is None or numbered is None:
            return None
        (width, sign), lattice = looks, numbered.lattice
        number = numbers_between(lattice, guide)
        if len(number) < LEAST["ticks"]:
            return None
        # on the better line the same lattice holds, if it was nearly whole
        known = lattice if numbered.taken.sum() > NEARLY * len(number) else None
        filters = line_filters(width, ribbon.u[1] - ribbon.u[0])
        sought = number, np.full(len(number), sign)
        lean = look_at(ribbon, lattice, sought, (-0.8 * period, 0.8 * period), filters[::-1]).lean
        heights = sign * contrast_at(ribbon, lattice.at(number) + ribbon.v[:, None] * lean, filters[0])
        band = find_band(heights, ribbon, 1.5 * period)
        if band is None:
            return None
        better = better_line(guide, heights, ribbon, lattice.at(number), 1.5 * period)
        if better is None and merged > 1 and not last:
            merged = 1
            continue
        if last or better is None:
            seen = agree(look_at(ribbon, lattice, sought, band, filters[::-1]))
            return judge("ticks", guide, seen, band, _lengths(heights, ribbon, band))
        guide = better
    return None


def _looks_of_lines(ribbon: Ribbon, profile: Floats, period: float) -> tuple[float, float] | None:
    """Return the width of the filters that see the lines of a profile best, and -1 for dark, 1 for bright lines."""
    places = _lines(ribbon, profile, (period, -1.0))
    seed = find_seed(places, np.zeros(len(places)), period)
    if seed is None:
        return None
    number, taken = seed
    number, lattice = number[taken], fit_lattice(number[taken], places[taken], np.zeros(int(taken.sum())))
    sign, sure, share = _shape(_fold(profile, ribbon, lattice, number))
    if sure < 0.25:
        sign = _sign_of_longer(ribbon, lattice, number, period)
    return float(np.clip(2.2 * share * period, 4.0, period)), sign


def _number_lines(
    ribbon: Ribbon, profile: Floats, period: float, looks: tuple[float, float], known: Lattice | None
) -> Numbered | None:
    """Find which line of one width and sign in a profile is which division."""
    places = _lines(ribbon, profile, looks)
    numbered = number_features(places, np.zeros(len(places)), period, known)
    return None if numbered is None or numbered.taken.sum() < LEAST["ticks"] else numbered


def _lines(ribbon: Ribbon, profile: Floats, looks: tuple[float, float]) -> Floats:
    """Return the places of lines of one width and sign in a profile."""
    width, sign = looks
    step = ribbon.u[1] - ribbon.u[0]
    seen = answer(profile, line_filters(width, step))
    strength = sign * seen.even
    peaks = peaks_of(strength, 0.3 * _usual_height(strength))
    places = zero_near(sign * seen.odd, peaks, max(2, int(0.3 * width / step)))
    return np.asarray(ribbon.u[0] + places[np.isfinite(places)] * step)


def _usual_height(strength: Floats) -> float:
    """Return how high the peaks of an answer usually are."""
    high = strength[peaks_of(strength, 0.0)]
    return float(np.quantile(high, 0.75)) if len(high) else np.inf


def _fold(profile: Floats, ribbon: Ribbon, lattice: Lattice, number: np.ndarray) -> Floats:
    """Return the usual profile about a division, at 33 places over one pitch."""
    at = lattice.at(number[:, None] + np.linspace(-0.5, 0.5, 33))
    inside = (at.min(axis=1) >= ribbon.u[0]) & (at.max(axis=1) <= ribbon.u[-1])
    if not inside.any():
        return np.zeros(33)
    return np.asarray(np.median(np.interp(at[inside], ribbon.u, profile), axis=0))


def _shape(fold: Floats) -> tuple[float, float, float]:
    """Return whether lines are dark (-1) or bright (1), how sure that is, and their width in pitches."""
    low, middle, high = float(fold.min()), float(np.median(fold)), float(fold.max())
    sign = 1.0 if high - middle > middle - low else -1.0
    sure = abs((high - middle) - (middle - low)) / max(high - low, 1e-9)
    width = float((sign * fold > sign * (low + high) / 2).mean())
    return sign, sure, max(width, 0.06)


def _sign_of_longer(ribbon: Ribbon, lattice: Lattice, number: np.ndarray, period: float) -> float:
    """Tell dark lines from bright gaps where both are equally wide: the longer ones among them are lines."""
    # the seed's lattice holds for a dozen more to both sides, so that fives and tens are among them
    number = np.arange(number.min() - 12, number.max() + 13)
    at = lattice.at(number)
    number = number[(at > ribbon.u[0] + period) & (at < ribbon.u[-1] - period)]
    if len(number) == 0:
        return -1.0
    even, _ = line_filters(period, ribbon.u[1] - ribbon.u[0])
    merit = {}
    for sign, phase in ((-1.0, 0.0), (1.0, 0.5)):
        every_row = np.broadcast_to(lattice.at(number + phase), (len(ribbon.v), len(number)))
        heights = sign * contrast_at(ribbon, every_row, even)
        by_fives = [np.median(heights[:, number % 5 == k], axis=1) for k in np.unique(number % 5)]
        merit[sign] = float(np.max(np.max(by_fives, axis=0) - np.median(heights, axis=1)))
    return max(merit, key=lambda sign: merit[sign])


def _lengths(heights: Floats, ribbon: Ribbon, band: tuple[float, float]) -> Floats:
    """Return how far each tick reaches across, in px, from the middle of the band to both sides."""
    inside = (ribbon.v >= band[0]) & (ribbon.v <= band[1])
    strong = heights > 0.5 * float(np.median(heights[inside]))
    middle = int(np.abs(ribbon.v - sum(band) / 2).argmin())
    above = np.cumprod(strong[: middle + 1][::-1], axis=0).sum(axis=0)
    below = np.cumprod(strong[middle + 1 :], axis=0).sum(axis=0)
    return np.asarray((above + below) * (ribbon.v[1] - ribbon.v[0]))
