"""The divisions of a scale bar between two rough points.

What runs regularly beside the line is looked for first (``regular``), then measured as ticks or blocks (``trial``).
Which of several stands nearest to the line, and is no more than the longer ticks of a finer one, is the answer;
the pattern of longer ticks tells half millimetres and inches from millimetres (``hierarchy``).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.errors import CallError
from layout.image.bar.blocks import share_of_lesser_level, try_blocks
from layout.image.bar.guide import Guide
from layout.image.bar.hierarchy import read_hierarchy
from layout.image.bar.lines import try_ticks
from layout.image.bar.regular import Found, find_regular
from layout.image.bar.trial import LEAST, Kind, Trial
from layout.image.photograph import Pixels
from layout.quantity import MM_PER_INCH, Floats

BESIDE_MM = 2.5
"""How far the line may lie beside the divisions: what is asked of the person who points, and a little more."""
LEAST_LENGTH_PX = 20.0
FINER_SCORE = 0.9
"""How regular something finer must look to be tried after a good find."""


@dataclass(frozen=True)
class Division:
    """One division: its place and reading, and the standard uncertainty of its place along the bar in pixels."""

    at: tuple[float, float]
    mm: float
    sd_px: float


@dataclass(frozen=True)
class Divisions:
    """The divisions of a bar that were seen between two points.

    Parameters
    ----------
    marks
        In the order of their readings.
    kind
        Ticks, or the edges of blocks.
    step
        Millimetres from one division to the next.
    missing
        The readings of divisions in between that were not seen.
    pitch_px
        The distance of neighbours, at the middle.
    scatter_px
        Robust standard deviation of single divisions about even ones in perspective.
    spread_px
        By how much dark blocks come out wider than they are: halation and the spreading of ink.
    """

    marks: tuple[Division, ...]
    kind: Kind
    step: float
    missing: tuple[float, ...]
    pitch_px: float
    scatter_px: float
    spread_px: float


def find_divisions(
    pixels: Pixels,
    start: tuple[float, float],
    end: tuple[float, float],
    *,
    step: float = 1.0,
    first: float = 0.0,
) -> Divisions:
    """Find the divisions of a bar between two rough points.

    Parameters
    ----------
    pixels
        The photograph.
    start, end
        On the bar, up to 2 mm beside the divisions, the line between them up to 3 degrees off.
    step
        Millimetres from one division to the next: 1 for ticks, as a rule 5 or 10 for blocks.
    first
        What the division nearest to ``start`` reads.

    Raises
    ------
    CallError
        If the points are outside the photograph or less than 20 pixels apart, ``step`` is not positive, or no
        regular divisions are found between them.
    """
    points = np.array([start, end], dtype=float)
    _check(pixels, points, step)
    line = Guide.between(*points)
    trials: list[Trial] = []
    inches = False
    for regular in find_regular(pixels, line):
        for found in regular:
            if any(_explains(one, found, line) or _outdoes(one, found, line, step) for one in trials):
                continue
            trial = _try(pixels, line, found)
            if trial is not None:
                trials.append(trial)
        if any(_settles(one, line, step) for one in trials):
            break
    trials = [one for one in trials if not any(_is_coarser(one, other) for other in trials)]
    read: list[Trial] = []
    for trial in trials:
        in_mm = _by_the_step(trial, step)
        inches |= in_mm is None
        if in_mm is not None and _beside(in_mm, line) * step / in_mm.pitch <= BESIDE_MM:
            read.append(in_mm)
    if not read:
        raise CallError(_none_found(points, inches=inches))
    best = max(read, key=lambda one: one.merit * np.exp(-_beside(one, line) * step / one.pitch))
    return _divisions(best, step, first)


def _try(pixels: Pixels, line: Guide, found: Found) -> Trial | None:
    """Measure what was found beside a line; None where it does not stand."""
    guide = line.moved(found.across, found.turn)
    even_share = share_of_lesser_level(pixels, guide, found.period)
    if even_share > 0.27:
        trial = try_blocks(pixels, guide, found.period / 2)
        if trial is not None or even_share > 0.36:
            return trial
    return try_ticks(pixels, guide, found.period)


def _check(pixels: Pixels, points: Floats, step: float) -> None:
    """Hold what a call needs."""
    height, width = pixels.shape[:2]
    for x, y in points:
        if not (-0.5 <= x <= width - 0.5 and -0.5 <= y <= height - 0.5):
            message = f"({x:g}, {y:g}) lies outside the photograph ({width} x {height}); point on the bar"
            raise CallError(message)
    length = float(np.hypot(*(points[1] - points[0])))
    if length < LEAST_LENGTH_PX:
        message = (
            f"needs two points {LEAST_LENGTH_PX:g} px apart or more, has {length:.1f} px; point further apart"
        )
        raise CallError(message)
    if not 0 < step < 1e6:
        message = f"needs a step above 0 mm, has {step:g}; give the millimetres from one division to the next"
        raise CallError(message)


def _none_found(points: Floats, *, inches: bool) -> str:
    """Say that there are no divisions, and what to do."""
    (x0, y0), (x1, y1) = points
    where = f"from ({x0:g}, {y0:g}) to ({x1:g}, {y1:g})"
    if inches:
        return (
            f"finds parts of an inch {where}, every second, fourth and eighth longer; point along the millimetres, "
            f"or give the step of sixteenths: {MM_PER_INCH / 16:g} mm"
        )
    return (
        f"finds no regular divisions {where}; point along the divisions themselves, past six of them or more"
    )


def _across(trial: Trial, line: Guide) -> float:
    """Return how far a trial's divisions lie across from the line."""
    return float((trial.guide.middle - line.middle) @ line.across)


def _beside(trial: Trial, line: Guide) -> float:
    """Return how far beside the line the divisions begin, px; zero where the line crosses them."""
    return max(0.0, abs(_across(trial, line)) - trial.band / 2)


def _explains(trial: Trial, found: Found, line: Guide) -> bool:
    """Say whether a find is a trial once more."""
    period = trial.pitch * (2 if trial.kind == "blocks" else 1)
    whole = trial.there.sum() > 0.8 * 2 * line.half / trial.pitch
    return (
        whole
        and abs(_across(trial, line) - found.across) < trial.band
        and abs(np.log(found.period / period)) < 0.12
    )


def _settles(trial: Trial, line: Guide, step: float) -> bool:
    """Say whether a trial is so good, and so near to the line, that only something finer could be better."""
    near = _beside(trial, line) * step / trial.pitch < 1.0
    return bool(near and trial.there.sum() >= 2 * LEAST[trial.kind] and trial.there.mean() > 0.85)


def _outdoes(trial: Trial, found: Found, line: Guide, step: float) -> bool:
    """Say whether a trial leaves nothing to be hoped from a find."""
    finer = found.period < 0.7 * trial.pitch and found.score > FINER_SCORE
    return not finer and _settles(trial, line, step)


def _is_coarser(trial: Trial, other: Trial) -> bool:
    """Say whether a trial is only the longer ticks among another's."""
    ratio = trial.pitch / other.pitch * (2 if trial.kind == "blocks" else 1)
    least = 4.5 if trial.kind == "blocks" else 1.5
    if other.kind == "blocks" or other.merit < 0.5 * trial.merit or ratio < least:
        return False
    near = abs((trial.guide.middle - other.guide.middle) @ other.guide.across) < 8 * other.pitch
    return bool(near and abs(ratio - round(ratio)) < 0.04 * ratio)


def _by_the_step(trial: Trial, step: float) -> Trial | None:
    """Return the divisions that lie a step apart, where longer ticks tell which; None for inches read as mm."""
    if trial.kind == "blocks":
        return trial
    told = trial.there & (trial.lengths > 0)
    pattern = read_hierarchy(trial.number[told], trial.lengths[told])
    if pattern.unit == "binary":
        sixteenths = step / (MM_PER_INCH / 64)
        return trial if abs(sixteenths - round(sixteenths)) < 0.02 else None
    finest = {"half": 0.5, "decimal": 1.0}.get(pattern.unit)
    stride = 1 if finest is None else step / finest
    if stride in (2, 5, 10, 20):
        coarse = trial.every(int(stride), pattern.first)
        return coarse if coarse.there.sum() >= 3 else trial
    return trial


def _divisions(trial: Trial, step: float, first: float) -> Divisions:
    """Return what is there, read from the first that is."""
    seen = trial.number[trial.there]
    readings = {int(n): first + step * int(n - seen[0]) for n in trial.number}
    at = trial.guide.at(trial.places[trial.there], 0.0)
    marks = zip(at, seen, trial.sd[trial.there], strict=True)
    return Divisions(
        marks=tuple(Division((float(x), float(y)), readings[int(n)], float(sd)) for (x, y), n, sd in marks),
        kind=trial.kind,
        step=step,
        missing=tuple(readings[int(n)] for n in trial.number[~trial.there] if seen[0] < n < seen[-1]),
        pitch_px=trial.pitch,
        scatter_px=trial.scatter,
        spread_px=2 * trial.lattice.spread,
    )
