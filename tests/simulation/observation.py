"""The photograph of a tablet, what an observer traces on it, and the truth about the same quantities."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from tests.simulation.camera import Camera, tilted, turned
from tests.simulation.face import Line, column_width, trace
from tests.simulation.tablet import Settings, Tablet

Floats = NDArray[np.float64]
Json = dict[str, Any]

GRADUATION = 10.0


@dataclass(frozen=True, eq=False)
class Scene:
    """A tablet on a table under a camera.

    Parameters
    ----------
    turn, offset
        From the tablet's frame to the table's: a rotation, shape (2, 2), and then a shift, mm.
    bar
        Shape (M, 2): the marks of the scale bar, mm on the table.
    face, girth
        Heights of the face's plane and of the outline's above the table, mm.
    """

    camera: Camera
    turn: Floats
    offset: Floats
    bar: Floats
    face: float
    girth: float

    def on_table(self, points: Floats) -> Floats:
        """Move points (P, 2) from the tablet's frame to the table's."""
        return np.asarray(points @ self.turn.T + self.offset)

    def seen(self, points: Floats, height: float) -> Floats:
        """Return where points of the tablet, mm, are seen, px."""
        return self.camera.project(self.on_table(points), height)


def stand(rng: np.random.Generator, tablet: Tablet, wanted: Settings, px_per_mm: float) -> Scene:
    """Lay the tablet and a bar on a table, and the camera above them."""
    thickness = rng.uniform(16.0, 30.0)
    face = rng.uniform(3.0, thickness) if wanted.below_face is None else wanted.below_face
    turn, offset = turned(rng.normal(0.0, 1.5)), rng.normal(0.0, 15.0, 2)
    ring = tablet.ring @ turn.T + offset
    bar = lay_bar(rng, ring)
    # room for what height and tilt do to the picture, and for pointing errors
    reach = 1.15 * np.abs(np.concatenate([ring, bar])).max(axis=0) + 6.0
    width, height = (2 * int(np.ceil(one * px_per_mm)) for one in reach)
    distance = rng.uniform(450.0, 900.0) if wanted.distance is None else wanted.distance
    about_x, about_y = rng.normal(0.0, wanted.tilt_sd_deg, 2)
    camera = Camera(float(distance), float(distance * px_per_mm), tilted(about_x, about_y), (width, height))
    return Scene(camera, turn, offset, bar, float(face), float(face - thickness / 2))


def lay_bar(rng: np.random.Generator, ring: Floats) -> Floats:
    """Lay a bar with 3 to 11 marks below the tablet or beside it."""
    marks = GRADUATION * np.arange(rng.integers(3, 12))
    low, high = ring.min(axis=0), ring.max(axis=0)
    gap, start = rng.uniform(6.0, 18.0), rng.uniform(-10.0, 20.0)
    along = turned(rng.normal(0.0, 1.0))
    if rng.random() < 0.6:
        return np.asarray(np.array([low[0] + start, high[1] + gap]) + np.outer(marks, along[:, 0]))
    beside = low[0] - gap if rng.random() < 0.5 else high[0] + gap
    return np.asarray(np.array([beside, low[1] + start]) + np.outer(marks, along[:, 1]))


def observe(rng: np.random.Generator, tablet: Tablet, scene: Scene, wanted: Settings) -> tuple[Json, Json]:
    """Return the record of one observer, and the truth."""
    traced = [trace(rng, line, wanted.ruling_wobble) for line in tablet.face.vertical]
    across = {
        number: trace(rng, line, wanted.ruling_wobble) for number, line in tablet.face.horizontal.items()
    }
    rulings = [(f"v{i + 1}", "vertical", points) for i, (points, _) in enumerate(traced)]
    rulings += [(f"h{number + 1}", "horizontal", points) for number, (points, _) in across.items()]

    def pointed(points: Floats, height: float) -> list[list[float]]:
        """See points of the tablet and point at them, with errors."""
        return pointed_px(rng, scene.seen(points, height), wanted)

    view = {
        "face": "obverse",
        "photograph": "obv",
        "pointing_px": wanted.pointing_px,
        "scale": observed_scale(rng, scene, wanted),
        "outline": observed_outline(tablet, pointed(tablet.ring, scene.girth)),
        "rulings": [
            {"id": name, "runs": runs, "points": pointed(points, scene.face)}
            for name, runs, points in rulings
        ],
        "writing": [
            {
                "text": entry.text,
                "from": start,
                "to": end,
                "column": f"v{entry.column + 1}",
                "line": entry.line,
            }
            for entry in tablet.entries
            for start, end in [pointed(np.array([entry.start, entry.end]), scene.face)]
        ],
    }
    record = {
        "schema": 1,
        "name": "Simulated 1",
        "photographs": [
            {"id": "obv", "file": "simulated.jpg", "sha256": "0" * 64, "size": list(scene.camera.size)}
        ],
        "views": [view],
        "thickness": stated(rng, 2 * (scene.face - scene.girth), wanted.thickness_sd),
        "lost": {"sides": ["left" if tablet.side > 0 else "right"]},
    }
    return record, truth_of(tablet, scene, [line for _, line in traced])


def pointed_px(rng: np.random.Generator, points_px: Floats, wanted: Settings) -> list[list[float]]:
    """Return pixels with pointing errors, to a thousandth."""
    pointed = np.round(points_px + rng.normal(0.0, wanted.pointing_px, points_px.shape), 3)
    return [[float(x), float(y)] for x, y in pointed]


def stated(rng: np.random.Generator, true: float, sd: float) -> Json:
    """Return what somebody with a standard uncertainty says of a true value."""
    return {"mm": round(float(true + rng.normal(0.0, sd)), 4), "sd": round(sd, 4)}


def observed_scale(rng: np.random.Generator, scene: Scene, wanted: Settings) -> Json:
    """Return the marks of the bar and what is known about the camera."""
    pixels = pointed_px(rng, scene.camera.project(scene.bar, 0.0), wanted)
    distance_sd = rng.uniform(10.0, 20.0) if wanted.distance_sd is None else wanted.distance_sd
    return {
        "marks": [{"bar": "a", "at": at, "mm": GRADUATION * number} for number, at in enumerate(pixels)],
        "below_face": stated(rng, scene.face, wanted.below_face_sd),
        "distance": stated(rng, scene.camera.distance, float(distance_sd)),
        "tilt_sd_deg": wanted.tilt_sd_deg,
    }


def observed_outline(tablet: Tablet, ring_px: list[list[float]]) -> list[Json]:
    """Return the traced ring as pieces that share their ends."""
    closed = [*ring_px, ring_px[0]]
    pieces, start = [], 0
    for piece in tablet.pieces:
        end = start + len(piece.points) - 1
        pieces.append({"edge": piece.edge, "points": closed[start : end + 1]})
        start = end
    return pieces


def truth_of(tablet: Tablet, scene: Scene, verticals: list[Line]) -> Json:
    """Return what really was there, in the words of the results."""
    left, right, above, below = tablet.outline.halves
    centroid = shapely.Polygon(scene.seen(tablet.ring, scene.girth)).centroid
    widths = {
        f"v{i + 1}": width
        for i, (one, other) in enumerate(pairwise(verticals))
        if (width := column_width(one, other)) is not None
    }
    area = float(shapely.Polygon(tablet.outline.points).area)
    return {
        "scale": scene.camera.mm_per_px(np.array([centroid.x, centroid.y]), scene.face),
        "columns": widths,
        "line_pitch": tablet.face.pitch(),
        "width": left + right,
        "height": above + below,
        "margin": tablet.margin,
        "lost_space": tablet.lost_space,
        "entries": len(tablet.entries),
        "sign_width": tablet.hand.full,
        "capacity": tablet.lost_space / tablet.hand.full,
        "area": area,
        "lost_area": area - float(shapely.Polygon(tablet.ring).area),
    }
