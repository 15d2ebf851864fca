"""What is to be simulated, and the broken tablet that comes of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tests.simulation.breakage import Piece, ring_of
from tests.simulation.face import Face
from tests.simulation.shapes import Outline
from tests.simulation.writing import Entry, Hand

Floats = NDArray[np.float64]

TREMOR_KIND, TREMOR_LENGTH = "squared exponential", 4.0


@dataclass(frozen=True)
class Settings:
    """What a simulation is to be like; ``None`` is drawn at random, lengths in mm.

    ``lost`` is a share of the width, ``drift`` mm from line to line, ``tremor`` the sd of a correlated
    tremor of the tracing hand, ``ruling_wobble`` a factor of the usual one.
    """

    family: str | None = None
    side: str | None = None
    lost: float | None = None
    corner_lost: bool = False
    wobble_kind: str | None = None
    wobble_sd: float | None = None
    wobble_length: float | None = None
    tremor: float = 0.0
    ruling_wobble: float = 1.0
    drift: float = 0.0
    entries: int | None = None
    stretch: float = 0.10
    pointing_px: float = 1.0
    px_per_mm: float | None = None
    distance: float | None = None
    distance_sd: float | None = None
    below_face: float | None = None
    below_face_sd: float = 1.0
    thickness_sd: float = 1.0
    tilt_sd_deg: float = 0.7


@dataclass(frozen=True, eq=False)
class Tablet:
    """One broken tablet, in its own frame: x to the right, y down, mm."""

    outline: Outline
    pieces: list[Piece]
    face: Face
    hand: Hand
    entries: list[Entry]
    side: int

    @property
    def ring(self) -> Floats:
        """The outline of the fragment as it would be traced by a hand without error."""
        return ring_of(self.pieces)

    @property
    def margin(self) -> float:
        """From the outermost boundary to the tangent of the surviving side."""
        return self.outline.halves[1] - self.side * float(self.face.outermost.middle[0])

    @property
    def lost_space(self) -> float:
        """From the boundary nearest to the break to the tangent of the lost side, less the margin."""
        inner = self.side * float(self.face.nearest_to_break.middle[0])
        return inner + self.outline.halves[0] - self.margin
