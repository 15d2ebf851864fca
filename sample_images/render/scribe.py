"""The scribe: widths of signs and columns, rulings that are not quite straight, and where each wedge goes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from sample_images.render import noise
from sample_images.render.grid import Points
from sample_images.render.tables import Column, digits
from sample_images.render.wedges import Wedge

UNITS = (0.28, 0.42, 0.54, 0.50, 0.54, 0.54, 0.54, 0.56, 0.56)
TENS = (0.36, 0.48, 0.62, 0.55, 0.60)
"""Widths of one to nine units and of ten to fifty, of a full digit's: three stand in a row, then rows are
stacked. Rough proportions of our own choosing."""

AVERAGE_UNITS = sum(UNITS) / len(UNITS)
AVERAGE_TENS = sum(TENS) / len(TENS)
REGULAR = 0.5
"""How far the scribe evens out the widths of his digits towards the average of their kind."""

ROWS = {1: (1,), 2: (2,), 3: (3,), 4: (3, 1), 5: (3, 2), 6: (3, 3), 7: (3, 3, 1), 8: (3, 3, 2), 9: (3, 3, 3)}


@dataclass(frozen=True)
class Hand:
    """A scribe's habits: width of a full digit, line pitch, clearance, and how much each varies; mm."""

    sign_width: float
    pitch: float
    clearance: float = 1.2
    clearance_spread: float = 0.08
    stretch_spread: float = 0.06
    pitch_scatter: float = 0.15
    ruled_lines: bool = True


@dataclass(frozen=True, eq=False)
class Line:
    """A line of the layout: ``points`` (N, 2) dense along it, mm; ``kind`` as in the record."""

    id: str
    runs: Literal["vertical", "horizontal"]
    kind: Literal["single", "double", "writing"]
    points: Points


@dataclass(frozen=True, eq=False)
class Entry:
    """A written entry: its text, column and line (from 0), and where its ink starts and ends (2,), mm."""

    text: str
    column: int
    line: int
    start: Points
    end: Points
    wedges: tuple[Wedge, ...]


def digit_width(digit: int) -> float:
    """Return the width of a digit in full digits, as this kind of hand writes it."""
    tens, units = divmod(digit, 10)
    natural = (TENS[tens - 1] if tens else 0.0) + (UNITS[units - 1] if units else 0.0)
    average = (AVERAGE_TENS if tens else 0.0) + (AVERAGE_UNITS if units else 0.0)
    return (REGULAR * average + (1 - REGULAR) * natural) / (AVERAGE_TENS + AVERAGE_UNITS)


def entry_width(text: str) -> float:
    """Return the width of an entry in full digits."""
    return sum(digit_width(digit) for digit in digits(text))


def column_widths(columns: tuple[Column, ...], hand: Hand, rng: np.random.Generator) -> tuple[float, ...]:
    """Return the column widths, mm: the widest entry times a clearance of the column's own."""
    widest = [max(entry_width(text) for text in column.entries) for column in columns]
    spread = hand.clearance_spread * rng.standard_normal(len(columns))
    return tuple(
        round(float(hand.sign_width * need * hand.clearance * np.exp(own)), 3)
        for need, own in zip(widest, spread, strict=True)
    )


def draw_verticals(
    boundaries: list[float], span: tuple[float, float], rng: np.random.Generator
) -> list[Line]:
    """Return the vertical rulings through the boundaries (x at y = 0), none quite parallel to the next."""
    y = np.arange(span[0], span[1], 0.1)
    lines = []
    for number, x in enumerate(boundaries, start=1):
        own = span + rng.normal(0, 0.8, 2)
        inside = (y > own[0]) & (y < own[1])
        course = x + np.radians(rng.normal(0, 0.22)) * y
        course = course + 0.07 * noise.along(y, 14.0, rng) + 0.04 * noise.along(y, 4.0, rng)
        lines.append(Line(f"v{number}", "vertical", "single", np.column_stack([course, y])[inside]))
    return lines


def draw_horizontals(
    top: float, count: int, hand: Hand, span: tuple[float, float], rng: np.random.Generator
) -> list[Line]:
    """Return ``count`` lines from y = ``top`` down, a pitch apart: rulings, or what signs stand on."""
    x = np.arange(span[0], span[1], 0.1)
    lines = []
    for number in range(count):
        y = top + number * hand.pitch + rng.normal(0, hand.pitch_scatter)
        course = y + np.radians(rng.normal(0, 0.2)) * x
        course = course + 0.06 * noise.along(x, 14.0, rng) + 0.04 * noise.along(x, 4.0, rng)
        own = span + rng.normal(0, 0.6, 2)
        inside = (x > own[0]) & (x < own[1])
        kind: Literal["single", "writing"] = "single" if hand.ruled_lines else "writing"
        lines.append(Line(f"h{number + 1}", "horizontal", kind, np.column_stack([x, course])[inside]))
    return lines


def write_entry(
    text: str, place: tuple[int, int], start: Points, hand: Hand, rng: np.random.Generator
) -> Entry:
    """Return an entry whose ink starts at ``start`` (2,), the middle of its line, and runs to the right.

    ``place`` is column and line. The ink fills the sum of its digits' widths, times a stretch of the entry's
    own; gaps between digits are taken from the digits, so that an entry is as long as its digits are wide.
    """
    height = 0.60 * hand.pitch
    stretch = hand.sign_width * float(np.exp(rng.normal(0, hand.stretch_spread)))
    slant = np.radians(rng.normal(0, 0.5))
    numbers = digits(text)
    wedges: list[Wedge] = []
    x = 0.0
    for position, digit in enumerate(numbers):
        width = stretch * digit_width(digit)
        gap = 0.16 * hand.sign_width
        left = x + (gap / 2 if position else 0.0)
        right = x + width - (gap / 2 if position < len(numbers) - 1 else 0.0)
        wedges += _digit(digit, (left, right), height, rng)
        x += width
    turned = tuple(
        Wedge(
            wedge.kind,
            (float(start[0] + wedge.at[0]), float(start[1] + wedge.at[1] + slant * wedge.at[0])),
            wedge.width,
            wedge.length,
            wedge.depth,
            wedge.turn_deg,
        )
        for wedge in wedges
    )
    return Entry(text, *place, start, start + np.array([x, slant * x]), turned)


def _digit(digit: int, slot: tuple[float, float], height: float, rng: np.random.Generator) -> list[Wedge]:
    """Return the wedges of one digit in its slot (left, right), about the middle of the line."""
    tens, units = divmod(digit, 10)
    share = (TENS[tens - 1] if tens else 0.0), (UNITS[units - 1] if units else 0.0)
    left, right = slot
    middle = left + (right - left) * share[0] / sum(share)
    gap = 0.12 if tens and units else 0.0
    wedges = _tens(tens, (left, middle - gap), height, rng) if tens else []
    return wedges + (_units(units, (middle + gap, right), height, rng) if units else [])


def _tens(count: int, slot: tuple[float, float], height: float, rng: np.random.Generator) -> list[Wedge]:
    """Return corner wedges side by side; four and five in two rows."""
    rows = ROWS[count]
    size = (0.66 if len(rows) == 1 else 0.50) * height
    step = (slot[1] - slot[0]) / max(rows)
    wedges = []
    for row, number in enumerate(rows):
        y = 0.0 if len(rows) == 1 else (-0.26 + 0.50 * row) * height
        for k in range(number):
            width = min(step * 1.0, 0.92 * size)
            at = (slot[0] + step * (k + 0.5) + rng.normal(0, 0.04), y + rng.normal(0, 0.07))
            length = size * float(np.exp(rng.normal(0, 0.05)))
            depth = 0.40 * min(width, 1.8) * float(np.exp(rng.normal(0, 0.1)))
            wedges.append(Wedge("ten", at, width, length, depth, float(rng.normal(2, 5))))
    return wedges


def _units(count: int, slot: tuple[float, float], height: float, rng: np.random.Generator) -> list[Wedge]:
    """Return upright wedges, three to a row."""
    rows = ROWS[count]
    step = (slot[1] - slot[0]) / max(rows)
    length = {1: 1.0, 2: 0.60, 3: 0.44}[len(rows)] * height
    wedges = []
    for row, number in enumerate(rows):
        y = -0.5 * height + row * (height - length * 0.92) / max(1, len(rows) - 1)
        for k in range(number):
            width = min(0.98 * step, 1.7)
            at = (slot[0] + step * (k + 0.5) + rng.normal(0, 0.03), y + rng.normal(0, 0.06))
            own = length * float(np.exp(rng.normal(0, 0.06)))
            depth = 0.42 * min(width, 1.5) * float(np.exp(rng.normal(0, 0.1)))
            wedges.append(Wedge("unit", at, width, own, depth, float(rng.normal(-1, 3.5))))
    return wedges
