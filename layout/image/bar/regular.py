"""Where, beside a line, something regular runs: its turn, its distance from the line, its period.

Every row of a ribbon around the line is compared with itself (autocorrelation), for all turns up to a few
degrees. What is regular agrees with itself after one period and after two, and disagrees after a half. Where
many periods fit, the ribbon is cut along the line, so that a period that grows in perspective does no harm.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.image.bar.guide import Guide, Ribbon, cut_ribbon
from layout.image.photograph import Pixels
from layout.quantity import Floats

TURN_DEG = 3.6
"""How far the line may be off: a little more than what is asked of the person who points."""
REACH = 0.25
"""How far from the line it is looked for, in lengths of the line."""
COLUMNS, COARSE_COLUMNS, ROWS, TURNS, LAGS = 1536, 128, 53, 9, 160
PIECES = 8
LEAST_PERIOD_PX = 3.3
LEAST_SCORE = 0.3


@dataclass(frozen=True)
class Found:
    """Something regular: its turn (radians), its distance across the line and its period (px), and its score.

    The score is how much better the ribbon agrees with itself after whole periods than after halves: at most 2.
    """

    turn: float
    across: float
    period: float
    score: float


def find_regular(pixels: Pixels, guide: Guide, most: int = 5) -> Iterator[list[Found]]:
    """Yield what regular things run beside a line: first those of many periods, then those of few.

    Each is named once, in an order in which it should be tried: the finest of the best first, since the longer ticks
    among others are regular as well.
    """
    length = 2 * guide.half
    reach = REACH * length + 4.0
    rows = int(min(ROWS, 2 * reach + 1))
    ribbon = cut_ribbon(pixels, guide, (guide.half, reach), (rows, int(min(COLUMNS, length))))
    turns = np.radians(np.linspace(-TURN_DEG, TURN_DEG, TURNS))
    for seen in (_fine, _coarse):
        yield _in_order(_search(seen(ribbon, turns), ribbon, turns, most))


def _in_order(found: list[Found]) -> list[Found]:
    """Return the finest of the best first, then the others."""
    best = max((one.score for one in found), default=0.0)
    return sorted(found, key=lambda one: (one.score < 0.6 * best, one.period))


def _fine(ribbon: Ribbon, turns: Floats) -> tuple[Floats, Floats]:
    """Return agreement (turns, rows, lags) and the lags in px, for sixteen periods or more."""
    rows, columns = ribbon.brightness.shape
    width = columns // PIECES
    pieces = ribbon.brightness[:, : width * PIECES].reshape(rows, PIECES, width)
    lags, alike = agreement(pieces, ribbon.u[1] - ribbon.u[0], 0.55)
    middles = ribbon.u[width // 2 :: width][:PIECES]
    shifted = [
        np.mean([alike[_rows_at(ribbon, turn, at), k] for k, at in enumerate(middles)], axis=0)
        for turn in turns
    ]
    return np.array(shifted), lags


def _coarse(ribbon: Ribbon, turns: Floats) -> tuple[Floats, Floats]:
    """Return agreement (turns, rows, lags) and the lags in px, for few periods."""
    import cv2

    rows, columns = ribbon.brightness.shape
    width = min(COARSE_COLUMNS, columns)
    small = np.asarray(cv2.resize(ribbon.brightness, (width, rows), interpolation=cv2.INTER_AREA), np.float32)
    step = (ribbon.u[-1] - ribbon.u[0] + ribbon.u[1] - ribbon.u[0]) / width
    at = (np.arange(width) - (width - 1) / 2) * step
    sheared = np.stack([small[_rows_at(ribbon, turn, at), np.arange(width)[None]] for turn in turns])
    lags, alike = agreement(sheared, step, 0.75)
    return alike, lags


def _rows_at(ribbon: Ribbon, turn: float, at: Floats | float) -> NDArray[np.int_]:
    """Return the row in which each turned row lies at places along the line, shape (rows, ...)."""
    rows = len(ribbon.v)
    step = ribbon.v[1] - ribbon.v[0]
    shift = np.round(np.tan(turn) * np.asarray(at) / step).astype(int)
    turned = np.arange(rows).reshape(-1, *([1] * np.ndim(shift))) + shift
    return np.asarray(np.clip(turned, 0, rows - 1))


def agreement(signals: NDArray[np.float32], step: float, longest: float) -> tuple[Floats, Floats]:
    """Say how much better signals agree with themselves after whole periods than after halves.

    Parameters
    ----------
    signals
        Shape (..., N), ``step`` px from one sample to the next.
    longest
        The longest period, as a share of their length.

    Returns
    -------
    tuple
        Periods in px, (P,), and the agreement, (..., P), at most 2.
    """
    width = signals.shape[-1]
    ramp = np.linspace(-1, 1, width, dtype=np.float32)
    level = signals - signals.mean(axis=-1, keepdims=True)
    level = level - ramp * ((level @ ramp) / (ramp @ ramp))[..., None]
    power = np.abs(np.fft.rfft(level, 2 * width)) ** 2
    # more frequencies than there are give the correlation between whole lags
    finer = 4 if width <= 512 else 2
    correlation = np.fft.irfft(power, 2 * width * finer)
    lags = np.unique(
        np.round(np.geomspace(max(LEAST_PERIOD_PX / step, 3.0), longest * width, LAGS) * finer).astype(int)
    )
    noise = correlation[..., :1] * np.float32(1e-3) + np.float32(1e-9)

    def at(lag: NDArray[np.int_]) -> NDArray[np.float32]:
        """Return the correlation where so much overlaps."""
        overlap = (1 - lag / (width * finer)).astype(np.float32)
        return np.asarray(correlation[..., lag] / overlap)

    score = at(lags) - at(lags // 2)
    twice = lags[lags * 2 < 0.85 * width * finer]
    score[..., : len(twice)] = (score[..., : len(twice)] + at(2 * twice) - at(twice * 3 // 2)) / 2
    return lags / finer * step, score / (correlation[..., :1] + noise)


def _search(seen: tuple[Floats, Floats], ribbon: Ribbon, turns: Floats, most: int) -> list[Found]:
    """Return the highest scores that are not neighbours, each with its shortest period; ``seen`` is used up."""
    score, lags = seen
    found: list[Found] = []
    near = max(1, round(len(ribbon.v) / 40))
    while len(found) < most and score.size:
        turn, row, lag = np.unravel_index(int(score.argmax()), score.shape)
        here = score[turn, row]
        if here[lag] < LEAST_SCORE:
            break
        shortest = _shortest(here, int(lag))
        period = float(lags[shortest])
        found.append(Found(float(turns[turn]), float(ribbon.v[row]), period, float(here[shortest])))
        # whole multiples agree as well; shorter periods in the same place are another matter
        score[:, max(0, row - near) : row + near + 1, lags > 0.93 * period] = -1.0
    return found


def _shortest(score: Floats, lag: int) -> int:
    """Return the shortest lag whose score is a peak nearly as high as that of a lag."""
    peaks = np.flatnonzero((score[1:-1] >= score[:-2]) & (score[1:-1] >= score[2:])) + 1
    high = peaks[score[peaks] > 0.85 * score[lag]]
    return int(high[0]) if len(high) and high[0] < lag else lag
