"""Rough solutions for a groove's section, light and place: a library of grooves laid over a profile."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray

from layout.image.groove.course import unlevelled
from layout.image.groove.section import (
    LOG_HALF,
    LOG_RAKING,
    LOG_SLOPE,
    OF_ONE,
    POWER,
    PRIORS,
    Beside,
    Single,
    contrast_of_sections,
    mirrored_beside,
)
from layout.quantity import Floats

WIDE = 60
"""The profile reaches so many samples to either side."""
AXIS = np.arange(-WIDE, WIDE + 1.0)
HALVES = 2.0 * 1.3 ** np.arange(10)
SLOPES, RAKINGS, POWERS = (0.4, 0.9), (0.25, 0.6, 1.4, 3.2), (1.05, 1.5, 2.1)
FURTHEST = 24
FEW = 12
MOST_STARTS = 10
PAIRED = 0.75
"""A second groove beside the first must explain the profile better by this factor; with none, one explains more."""


@dataclass(frozen=True, eq=False)
class Start:
    """A rough solution, lengths in samples: parameters (11,), centre, half width, side of the lamp, and misfit."""

    parameters: Floats
    centre: float
    half: float
    mirrored: bool
    cost: float


def guess(
    profile: Floats, sd: Floats, between: tuple[float, float], beside: Beside | None = None
) -> list[Start]:
    """Return the grooves that fit a wide profile best and differ from each other, best first.

    Parameters
    ----------
    profile, sd
        Contrast from 60 samples to the left to 60 to the right, shape (121,), and its standard uncertainty.
    between
        Where the centre may lie, in samples from the middle.
    beside
        A second groove like the first, ``apart_px`` in samples.
    """
    parameters, contrasts, entries = _library()
    windows = sliding_window_view(contrasts, len(AXIS), axis=1)
    found = []
    for mirrored in (False, True):
        turned = (profile[::-1], sd[::-1]) if mirrored else (profile, sd)
        rest, weight = np.asarray(turned[0] / turned[1], np.float32), (1 / turned[1]).astype(np.float32)
        level = _level_of(AXIS, turned[1]).astype(np.float32)
        for half, these in zip(HALVES, entries, strict=True):
            reach = int(min(1.3 * half + 2, FURTHEST))
            shifts = np.arange(-reach, reach + 1, max(1, round(0.12 * half)))
            centres = -shifts if mirrored else shifts
            shifts = shifts[(centres >= between[0]) & (centres <= between[1])]
            if not len(shifts):
                continue
            shown = _placed(windows, these, shifts, mirrored_beside(beside, mirrored)) * weight
            cost = _misfit(shown.reshape(-1, len(AXIS)), rest, level)
            for at in np.argsort(cost)[:FEW]:
                entry, shift = these[at // len(shifts)], float(shifts[at % len(shifts)])
                centre = -shift if mirrored else shift
                found.append(Start(parameters[entry], centre, float(half), mirrored, float(cost[at])))
    return _distinct(found)


def _level_of(across: Floats, sd: Floats) -> Floats:
    """Return an orthonormal basis (U, 2) of a level and a gradient, weighed by the profile's uncertainty."""
    return np.linalg.qr(np.column_stack([np.ones_like(across), across]) / sd[:, None])[0]


@cache
def _library() -> tuple[Floats, Single, tuple[NDArray[np.intp], ...]]:
    """Return grooves under lamps (K, 11), their contrasts (K, 241) at whole samples, and which have each width."""
    grid = np.meshgrid(np.log(HALVES), np.log(SLOPES), np.log(RAKINGS), POWERS)
    parameters = np.tile([prior[0] for prior in PRIORS.values()][:OF_ONE], (grid[0].size, 1))
    for column, values in zip((LOG_HALF, LOG_SLOPE, LOG_RAKING, POWER), grid, strict=True):
        parameters[:, column] = values.ravel()
    fine = np.arange(-2 * WIDE - 0.375, 2 * WIDE + 0.5, 0.25)
    from_right = np.zeros(len(parameters), bool)
    contrasts = contrast_of_sections(parameters, fine, 1.0, from_right)
    entries = tuple(np.flatnonzero(np.isclose(parameters[:, LOG_HALF], np.log(half))) for half in HALVES)
    return parameters, contrasts.reshape(len(parameters), -1, 4).mean(axis=2), entries


def _placed(
    windows: Single, these: NDArray[np.intp], shifts: NDArray[np.intp], beside: Beside | None
) -> Single:
    """Return some of the library (K, S, U) with their centres at shifts, and with what stands beside them."""
    rows = these[:, None]
    if beside is None:
        return np.asarray(windows[rows, WIDE - shifts], np.float32)
    first = np.round(shifts - beside.shared * beside.apart_px).astype(int)
    second = np.round(shifts + (1 - beside.shared) * beside.apart_px).astype(int)
    last = windows.shape[1] - 1
    both = windows[rows, np.clip(WIDE - first, 0, last)] + windows[rows, np.clip(WIDE - second, 0, last)]
    return np.asarray(both, np.float32)


def _misfit(shown: Single, rest: Single, level: Single) -> Floats:
    """Return the squared distances (K,) of profiles (K, U) from one, whatever its level and gradient."""
    size = np.einsum("ku,ku->k", shown, shown) - ((shown @ level) ** 2).sum(axis=1)
    free = rest - level @ (level.T @ rest)
    return np.asarray(size - 2 * shown @ free + free @ free, float)


def _distinct(found: list[Start]) -> list[Start]:
    """Return the cheapest starts that differ in side, place or width, cheapest first."""
    starts: list[Start] = []
    for one in sorted(found, key=lambda start: start.cost):
        if all(
            one.mirrored != other.mirrored
            or abs(one.centre - other.centre) > 0.3 * one.half
            or abs(np.log(one.half / other.half)) > 0.25
            for other in starts
        ):
            starts.append(one)
        if len(starts) == MOST_STARTS:
            break
    return starts


# ------------------------------------------------------------------------------------- one groove or two


def guess_one(
    mean: Floats, doubt: Floats, between: tuple[float, float], width: float
) -> tuple[list[Start], Beside | None]:
    """Guess a groove, and whether one like it runs beside it."""
    starts, beside = guess(mean, doubt, between), None
    for apart in alike_beside(mean, width):
        both = guess(mean, doubt, between, Beside(apart, 0.0))
        if both and starts and both[0].cost < PAIRED * starts[0].cost:
            starts, beside = both, Beside(apart, 0.0)
    return starts, beside


def guess_both(
    mean: Floats, doubt: Floats, between: tuple[float, float], gap: float
) -> tuple[list[Start], Beside | None]:
    """Guess the two grooves of a double ruling; none where one explains as much."""
    beside = Beside(repeated_at(mean, gap), 0.5)
    both, one = guess(mean, doubt, between, beside), guess(mean, doubt, (-WIDE, WIDE))
    return (both, beside) if both and both[0].cost < PAIRED * one[0].cost else ([], None)


def alike_beside(mean: Floats, width: float) -> list[float]:
    """Return where beside its middle a wide profile (121,) shows the like again: the best on either side, if any."""
    half = max(3, round(0.8 * width))
    windows = unlevelled(sliding_window_view(mean, 2 * half + 1))
    middle = WIDE - half
    size = np.linalg.norm(windows, axis=1) + 1e-9
    alike, large = windows @ windows[middle] / (size * size[middle]), size / size[middle]
    lags = np.arange(len(windows)) - middle
    good = (alike > 0.6) & (large > 0.35) & (large < 3)
    sides = (good & (lags < -width), good & (lags > width))
    return [float(lags[side][alike[side].argmax()]) for side in sides if side.any()]


def repeated_at(mean: Floats, about: float) -> float:
    """Return at which distance near ``about`` a wide profile repeats itself best."""
    level = unlevelled(mean[None])[0]
    lags = np.arange(max(2, int(0.75 * about)), int(1.3 * about) + 2)
    return float(lags[np.argmax([level[lag:] @ level[:-lag] for lag in lags])])
