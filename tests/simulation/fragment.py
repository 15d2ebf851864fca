"""A whole simulated fragment: tablet, break, face, camera; its record and its truth."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, TypeVar, cast

import numpy as np
import shapely
from numpy.typing import NDArray

from tests.simulation.breakage import Piece, break_off, ring_of
from tests.simulation.face import draw_face
from tests.simulation.observation import observe, stand
from tests.simulation.shapes import FAMILIES, OWN_FAMILY, Outline, make_outline
from tests.simulation.tablet import TREMOR_KIND, TREMOR_LENGTH, Settings, Tablet
from tests.simulation.wobble import KINDS, sample_around
from tests.simulation.writing import draw_hand, write

Floats = NDArray[np.float64]
T = TypeVar("T")


@dataclass(frozen=True, eq=False)
class TracedEdge:
    """What the Cramer-Rao bound needs: the traced original edge, in the tablet's frame, right side surviving.

    Parameters
    ----------
    arc, points, normals
        Arc length from the middle of the left side, mm; the places on the smooth outline, shape (P, 2).
    displacement
        How far the edge and the hand lie outside the smooth outline, mm; pointing comes on top.
    wobble
        Kind, sd and correlation length of the edge's wobble, mm.
    tremor, pointing
        Standard deviations of the tracing hand, mm.
    """

    outline: Outline
    arc: Floats
    points: Floats
    normals: Floats
    displacement: Floats
    wobble: tuple[str, float, float]
    tremor: float
    pointing: float


@dataclass(frozen=True, eq=False)
class Simulated:
    """A record as DESIGN section 4 has it, what really was there, and the edge as it was traced."""

    record: dict[str, Any]
    truth: dict[str, Any]
    edge: TracedEdge


def simulate(rng: np.random.Generator, **settings: object) -> Simulated:
    """Simulate one fragment.

    Parameters
    ----------
    settings
        Fields of `Settings`.

    Returns
    -------
    Simulated
        The record is a plain dict with keys of DESIGN section 4 only; all randomness is from ``rng``.
    """
    wanted = Settings(**cast("dict[str, Any]", settings))
    px_per_mm = given(wanted.px_per_mm, rng.uniform(15.0, 45.0))
    family = given(wanted.family, str(rng.choice([*FAMILIES, OWN_FAMILY])))
    lost = given(wanted.lost, rng.uniform(0.15, 0.50))
    side = 1 if given(wanted.side, str(rng.choice(["left", "right"]))) == "left" else -1
    outline = make_outline(rng, family, draw_size(rng))
    kind = given(wanted.wobble_kind, str(rng.choice(KINDS)))
    sd = given(wanted.wobble_sd, 0.35 * np.exp(rng.normal(0.0, np.log(1.6))))
    length = given(wanted.wobble_length, 8.0 * np.exp(rng.normal(0.0, np.log(1.5))))
    count = len(outline.points)
    wobble = sd * sample_around(rng, kind, length, outline.perimeter, count)
    tremor = wanted.tremor * sample_around(rng, TREMOR_KIND, TREMOR_LENGTH, outline.perimeter, count)
    displacement = wobble + tremor
    rough = outline.points + displacement[:, None] * outline.normals
    broken = break_off(rng, outline, rough, lost, corner_lost=wanted.corner_lost)
    index = np.unique(np.concatenate([piece.index for piece in broken if piece.index is not None]))
    edge = TracedEdge(
        outline,
        outline.arc[index],
        outline.points[index],
        outline.normals[index],
        displacement[index],
        (kind, sd, length),
        wanted.tremor,
        wanted.pointing_px / px_per_mm,
    )
    pieces = [on_side(piece, side) for piece in broken]
    tablet = furnish(rng, outline, pieces, side, wanted)
    record, truth = observe(rng, tablet, stand(rng, tablet, wanted, px_per_mm), wanted)
    truth |= {"family": family, "lost": lost, "wobble": {"kind": kind, "sd": sd, "length": length}}
    return Simulated(record, truth, edge)


def given(wanted: T | None, otherwise: T) -> T:
    """Return what was wanted, or else what was drawn."""
    return otherwise if wanted is None else wanted


def draw_size(rng: np.random.Generator) -> tuple[float, float]:
    """Draw width and height: the logarithm of their ratio scatters by 0.3, mm."""
    while True:
        width = float(np.exp(rng.uniform(np.log(70.0), np.log(140.0))))
        height = width / np.exp(rng.normal(0.0, 0.3))
        if 60.0 <= height <= 160.0:
            return width, float(height)


def on_side(piece: Piece, side: int) -> Piece:
    """Mirror a piece where the left side survives."""
    edge = "left" if side < 0 and piece.edge == "right" else piece.edge
    return Piece(edge, piece.points * [side, 1], piece.index)


def furnish(
    rng: np.random.Generator, outline: Outline, pieces: list[Piece], side: int, wanted: Settings
) -> Tablet:
    """Rule and write the face of a broken tablet."""
    polygon = shapely.Polygon(ring_of(pieces))
    halves = outline.halves if side > 0 else (outline.halves[1], outline.halves[0], *outline.halves[2:])
    face = draw_face(rng, polygon, halves, drift=wanted.drift, side=side)
    hand = draw_hand(rng, wanted.stretch)
    entries = write(rng, face, hand, int(given(wanted.entries, int(rng.integers(0, 31)))))
    return Tablet(outline, pieces, face, hand, entries, side)
