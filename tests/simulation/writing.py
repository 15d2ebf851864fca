"""Sexagesimal numbers of 1 to 6 places, and how wide a scribe wrote them."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from tests.simulation.camera import turned
from tests.simulation.face import Face

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Hand:
    """One scribe's hand: a full digit in mm, the other kinds in units of it, and the stretch of entries."""

    full: float
    units_only: float
    tens_only: float
    blank: float
    stretch: float

    def width_of(self, digits: list[int]) -> float:
        """Return the regular width of a number, mm."""
        return self.full * sum(self.ratio(digit) for digit in digits)

    def ratio(self, digit: int) -> float:
        """Return the width of one digit in units of a full one."""
        if digit == 0:
            return self.blank
        if digit < 10:
            return self.units_only
        return self.tens_only if digit % 10 == 0 else 1.0


@dataclass(frozen=True, eq=False)
class Entry:
    """A number in a column (its left boundary, from the left) on a line (from 1), with its ends in mm."""

    text: str
    start: Floats
    end: Floats
    column: int
    line: int


def draw_hand(rng: np.random.Generator, stretch: float) -> Hand:
    """Draw a hand as the priors of the convention and of measured tablets have it."""
    return Hand(
        full=float(rng.uniform(3.0, 6.0)),
        units_only=at_least(rng, 0.45, 0.12),
        tens_only=at_least(rng, 0.70, 0.22),
        blank=at_least(rng, 0.70, 0.40),
        stretch=stretch,
    )


def at_least(rng: np.random.Generator, mean: float, sd: float) -> float:
    """Draw a ratio from a normal distribution, cut off where nothing could be written."""
    while (ratio := rng.normal(mean, sd)) < 0.1:
        continue
    return float(ratio)


def draw_number(rng: np.random.Generator, places: int) -> list[int]:
    """Draw the digits of a number: any place full, units or tens alone, blank inside only."""
    digits = []
    for place in range(places):
        kind = rng.choice(4, p=[0.5, 0.3, 0.15, 0.05])
        if kind == 3 and 0 < place < places - 1:
            digits.append(0)
        elif kind == 2:
            digits.append(int(10 * rng.integers(1, 6)))
        elif kind == 1:
            digits.append(int(rng.integers(1, 10)))
        else:
            digits.append(int(10 * rng.integers(1, 6) + rng.integers(1, 10)))
    return digits


def write(rng: np.random.Generator, face: Face, hand: Hand, entries: int) -> list[Entry]:
    """Write numbers into the surviving columns, one a place, as far as there is room."""
    direction = turned(face.turn_deg) @ np.array([1.0, 0.0])
    slots = []
    for column, (left, right) in enumerate(pairwise(face.vertical)):
        for line in range(face.lines.count - 1):
            height = float(face.lines.at(line + 0.5))
            if all(one.stretch[0] < height < one.stretch[1] for one in (left, right)):
                slots.append(
                    (column, line + 1, left.at(height), float((right.at(height) - left.at(height))[0]))
                )
    chosen = rng.permutation(len(slots))[:entries]
    written = []
    for column, line, corner, room in (slots[i] for i in sorted(chosen)):
        # how many places there are follows from the column alone, never from how wide they turn out
        places = int(rng.integers(1, int(np.clip(room / (1.1 * hand.full), 1, 6)) + 1))
        digits = draw_number(rng, places)
        start = corner + rng.uniform(0.5, 1.2) * direction
        width = hand.width_of(digits) * np.exp(rng.normal(0.0, hand.stretch))
        text = ",".join(str(digit) for digit in digits)
        written.append(Entry(text, start, start + width * direction, column, line))
    return written
