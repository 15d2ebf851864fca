"""Scale bars of our own design: a printed card on a block, with millimetre ticks or centimetre blocks."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import cv2
import numpy as np

from sample_images.render.grid import Field, Points

OVERSAMPLING = 3
TALL = {"ticks": 9.0, "blocks": 8.0}
"""Height of the printed card, mm."""

WHITE, BLACK = 0.66, 0.022
END_MM = 5.0


@dataclass(frozen=True)
class Bar:
    """A bar whose zero lies at ``at`` (mm) on the edge that carries the divisions, turned by ``turn_deg``.

    ``z`` is the height of its printed face.
    """

    style: Literal["ticks", "blocks"]
    length: int
    at: tuple[float, float]
    z: float
    turn_deg: float = 0.0

    def place(self, along_mm: Points, down_mm: Points) -> Points:
        """Return points (N, 3) of the printed face."""
        angle = np.radians(self.turn_deg)
        x = self.at[0] + along_mm * np.cos(angle) - down_mm * np.sin(angle)
        y = self.at[1] + along_mm * np.sin(angle) + down_mm * np.cos(angle)
        return np.column_stack([x, y, np.full(len(x), self.z)])

    def marks(self) -> tuple[Points, Points]:
        """Return the readings of the marks that a person would use, mm, and their places (N, 3)."""
        readings = np.arange(0, self.length + 1, 10, dtype=float)
        down = 0.0 if self.style == "ticks" else 1.56
        return readings, self.place(readings, np.full(len(readings), down))

    def corners(self) -> Points:
        """Return the corners (4, 2) of the card."""
        low, high = -END_MM, self.length + END_MM
        upper = upper_edge(self)
        along = np.array([low, high, high, low])
        down = np.array([upper, upper, upper + TALL[self.style], upper + TALL[self.style]])
        return self.place(along, down)[:, :2]


def print_bar(bar: Bar, px_per_mm: float) -> tuple[Field, Points]:
    """Return the printed card's brightness, upright, and the place (mm along, down) of its first pixel."""
    scale = px_per_mm * OVERSAMPLING
    upper = upper_edge(bar)
    width, height = bar.length + 2 * END_MM, TALL[bar.style]
    card = np.full((round(height * scale), round(width * scale)), WHITE, np.float32)
    boxes = _ticks(bar) if bar.style == "ticks" else _blocks(bar)
    for left, top, right, bottom in boxes:
        columns = slice(round((left + END_MM) * scale), round((right + END_MM) * scale))
        card[max(0, round((top - upper) * scale)) : round((bottom - upper) * scale), columns] = BLACK
    down = 6.4 if bar.style == "ticks" else 4.7
    for centimetre in range(bar.length // 10 + 1):
        if bar.style == "ticks" or centimetre % 2 == 0 or centimetre == 1:
            _figure(card, str(centimetre), (10 * centimetre + END_MM, down - upper), scale)
    _figure(card, "cm", (bar.length - 5 + END_MM, down - upper), scale)
    size = (round(width * px_per_mm), round(height * px_per_mm))
    small = cv2.resize(card, size, interpolation=cv2.INTER_AREA)
    return np.asarray(small, np.float32), np.array([-END_MM, upper])


def upper_edge(bar: Bar) -> float:
    """Return how far down the card begins, mm from its zero."""
    return 0.0 if bar.style == "ticks" else -1.5


def _ticks(bar: Bar) -> list[tuple[float, float, float, float]]:
    """Return millimetre ticks from the edge, longer at five and ten: left, upper, right, lower."""
    longer = {0: 4.2, 5: 3.1}
    return [(mm - 0.09, 0.0, mm + 0.09, longer.get(mm % 10, 2.0)) for mm in range(bar.length + 1)]


def _blocks(bar: Bar) -> list[tuple[float, float, float, float]]:
    """Return two rows of blocks, black and white by turns, the first centimetre in halves, with a frame."""
    boxes = [(-0.12, 0.0, bar.length + 0.12, 0.24), (-0.12, 2.88, bar.length + 0.12, 3.12)]
    boxes += [(-0.12, 0.0, 0.12, 3.12), (bar.length - 0.12, 0.0, bar.length + 0.12, 3.12)]
    for centimetre in range(bar.length // 10):
        upper, lower = (0.0, 1.56) if centimetre % 2 == 0 else (1.56, 3.12)
        boxes.append((10.0 * centimetre, upper, 10.0 * centimetre + 10, lower))
    return boxes


def _figure(card: Field, text: str, middle: tuple[float, float], scale: float) -> None:
    """Print figures about a place (mm from the card's left and upper edge), 2.2 mm tall."""
    font, thick = cv2.FONT_HERSHEY_DUPLEX, max(1, round(0.26 * scale))
    size = 2.2 * scale / 21.0
    (width, height), _ = cv2.getTextSize(text, font, size, thick)
    canvas = np.zeros(card.shape, np.uint8)
    corner = (round(middle[0] * scale - width / 2), round(middle[1] * scale + height / 2))
    cv2.putText(canvas, text, corner, font, size, (255,), thick, cv2.LINE_AA)
    card += (BLACK - card) * (canvas.astype(np.float32) / 255)
