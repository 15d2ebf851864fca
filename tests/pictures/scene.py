"""Marks, lengths and a face as a pinhole camera sees them: by rays, without a homography of the program's."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from layout.record.model import Record

Floats = NDArray[np.float64]

SIZE = (6000, 4000)
CENTRE = np.array([2999.5, 1999.5])
ACROSS, DOWN = 50.0, 60.0
"""The length and height of a cross on the face, mm: what is to be measured."""
THICK, BELOW = 24.0, 10.0
CARD = np.array([[x, y] for x in (0.0, 14.0, 126.0, 140.0) for y in (0.0, 14.0, 46.0, 60.0)])


@dataclass(frozen=True)
class Sitting:
    """How a fragment was photographed: tilts as sines, angles in degrees, lengths in mm."""

    marks: str = "card"
    tilt: tuple[float, float] = (0.0, 0.0)
    distance: float = 700.0
    mm_per_px: float = 0.04
    rocking_deg: float = 1.5
    mark_sd_px: float = 0.1
    below_sd: float = 3.0
    seed: int = 0


def record_of(sitting: Sitting, **scale: Any) -> Record:  # noqa: ANN401 - parts of a record
    """Return a record of the marks and of a cross on the face, whose four ends are a ruling's points."""
    rng = np.random.default_rng(sitting.seed)
    a, b = sitting.tilt
    n = np.array([a, b, np.sqrt(1 - a * a - b * b)])
    e1 = np.array([n[2], 0.0, -a]) / np.hypot(n[2], a)
    plane = np.stack([e1, np.cross(n, e1)])
    origin = np.array([0.0, 0.0, sitting.distance])

    def see(points: Floats) -> Floats:
        focal_px = sitting.distance / sitting.mm_per_px
        return np.asarray(CENTRE + points[:, :2] / points[:, 2:] * focal_px)

    def mark(name: str, mm: Floats, reading: Floats) -> list[dict[str, Any]]:
        at = see(mm @ plane + origin) + rng.normal(0, sitting.mark_sd_px, mm.shape)
        return [
            {"bar": name, "at": [float(x), float(y)], "mm": value, "sd_px": sitting.mark_sd_px}
            for (x, y), value in zip(at, reading.tolist(), strict=True)
        ]

    if sitting.marks == "card":
        turn = rng.uniform(0, 2 * np.pi)
        turned = CARD @ np.array([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])
        marks = mark("card", turned + np.array([-40.0, 55.0]), CARD)
    else:
        along = np.arange(0.0, 101.0, 5.0)
        marks = mark("a", np.stack([along - 60, 0 * along + 60], axis=1), along)
        marks += mark("b", np.stack([0 * along + 70, along - 60], axis=1), along)
    face = n.copy()
    face[:2] += np.sin(np.radians(sitting.rocking_deg)) * rng.standard_normal(2)
    face[2] = np.sqrt(1 - face[0] ** 2 - face[1] ** 2)
    f1 = np.cross([0.0, 1.0, 0.0], face)
    f1 /= np.linalg.norm(f1)
    on_face = np.stack([f1, np.cross(face, f1)])
    middle = rng.uniform(-20, 20, 2) @ plane + origin - (BELOW + rng.normal(0, sitting.below_sd)) * n
    ends = np.array([[-ACROSS / 2, 0], [ACROSS / 2, 0], [0, -DOWN / 2], [0, DOWN / 2]])
    cross = see(ends @ on_face + middle)
    return Record.model_validate(
        {
            "schema": 1,
            "name": "a simulated sitting",
            "photographs": [{"id": "p", "file": "p.jpg", "size": list(SIZE)}],
            "views": [
                {
                    "face": "obverse",
                    "photograph": "p",
                    "pointing_px": 1.0,
                    "rulings": [{"id": "v", "runs": "vertical", "points": cross.tolist()}],
                    "scale": {"marks": marks, "below_face": {"mm": BELOW, "sd": sitting.below_sd}, **scale},
                }
            ],
            "thickness": {"mm": THICK, "sd": 1.0},
        }
    )
