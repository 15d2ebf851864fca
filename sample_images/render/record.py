"""The record as a careful person would have made it, and the truth that the person did not know."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray

from sample_images.render.camera import Camera
from sample_images.render.fragments import SITE, Proposal, Sitting
from sample_images.render.grid import Points
from sample_images.render.hand import Tracer
from sample_images.render.scribe import Entry, Line
from sample_images.render.tablet import Side, Tablet

Json = dict[str, Any]


@dataclass(frozen=True)
class Shot:
    """One face on the photograph: its camera, and the region (x, y, width, height) of the whole, or none."""

    side: Side
    camera: Camera
    region: tuple[int, int, int, int] | None


@dataclass(frozen=True)
class Photo:
    """The photograph's file as written."""

    file: str
    sha256: str
    size: tuple[int, int]


def make_record(sitting: Sitting, tablet: Tablet, shots: Sequence[Shot], photo: Photo) -> Json:
    """Return the record in the order of keys of a record file."""
    rng = np.random.default_rng([sitting.spec.seed, 21])
    bar_sd, distance_sd, thickness_sd, convexity_sd = sitting.errors
    body = tablet.obverse.body
    below = {"mm": round(float(-sitting.bar.z + rng.normal(0, bar_sd)), 1), "sd": bar_sd}
    distance = {
        "mm": round(float(sitting.camera.distance + rng.normal(0, distance_sd))),
        "sd": distance_sd,
    }
    views = [
        _view(sitting, shot, (below, distance), np.random.default_rng([sitting.spec.seed, 22, number]))
        for number, shot in enumerate(shots)
    ]
    return {
        "schema": 1,
        "name": sitting.spec.name,
        "remarks": "An invented fragment, rendered by sample_images/render; nothing about it is real.",
        "observer": "a simulated hand",
        "date": "",
        "findspot": SITE,
        "photographs": [
            {
                "id": "plate" if sitting.plate else "obv",
                "file": photo.file,
                "sha256": photo.sha256,
                "size": list(photo.size),
                "of": "object",
                "credit": "the makers of tablet-layout",
                "licence": "MIT",
            }
        ],
        "views": views,
        "thickness": {
            "mm": round(float(body.thickness + rng.normal(0, thickness_sd)), 1),
            "sd": thickness_sd,
        },
        "convexity": {
            "mm": round(max(0.2, float(body.convexities[0] + rng.normal(0, convexity_sd))), 1),
            "sd": convexity_sd,
        },
        "asymmetry_percent": None,
        "evidence": [],
        "lost": {"sides": [sitting.spec.lost_side]},
        "series": {},
        "candidates": [_candidate(proposal) for proposal in sitting.proposals],
        "pool": {"columns": [], "together": [1, 3]},
        "gaps": [],
    }


def _candidate(proposal: Proposal) -> Json:
    return {
        "name": proposal.name,
        "columns": [
            {
                "heading": column.heading,
                "entries": list(column.entries),
                "remains": [""] * len(column.entries),
            }
            for column in proposal.columns
        ],
    }


def _view(sitting: Sitting, shot: Shot, heights: tuple[Json, Json], rng: np.random.Generator) -> Json:
    """Return one view as traced."""
    offset = (0.0, 0.0) if shot.region is None else (float(shot.region[0]), float(shot.region[1]))
    tracer = Tracer(shot.camera, offset, sitting.pointing_px, rng)
    readings, places = sitting.bar.marks()
    name = "a" if shot.side.face == "obverse" else "b"
    marks = [
        {"bar": name, "at": at, "mm": int(mm)} for at, mm in zip(tracer.point(places), readings, strict=True)
    ]
    rulings = surviving_lines(shot.side)
    return {
        "face": shot.side.face,
        "photograph": "plate" if sitting.plate else "obv",
        "region": None if shot.region is None else list(shot.region),
        "pointing_px": sitting.pointing_px,
        "scale": {
            "marks": marks,
            "ppi": None,
            "known": [],
            "below_face": dict(heights[0]),
            "distance": dict(heights[1]),
            "tilt_sd_deg": sitting.tilt_sd_deg,
            "lens": None,
        },
        "outline": [
            {"edge": edge, "points": points} for edge, points in tracer.trace_outline(shot.side.outline)
        ],
        "rulings": [_ruling(tracer, shot.side, name, line) for name, line in rulings],
        "writing": _writing(tracer, shot.side, rulings, rng),
    }


def _ruling(tracer: Tracer, side: Side, name: str, line: Line) -> Json:
    """Return a traced line of five to twelve points."""
    length = float(np.hypot(*np.diff(line.points, axis=0).T).sum())
    count = int(np.clip(round(length / 9.0), 5, 12))
    kind = {"kind": line.kind} if line.kind != "single" else {}
    points = tracer.follow(side.on_face(line.points), count)
    return {"id": name, "runs": line.runs, **kind, "points": points}


def surviving_lines(side: Side) -> list[tuple[str, Line]]:
    """Return the lines of which a useful stretch survives, cut to it, with the record's names for them."""
    face = shapely.Polygon(side.contour.points).buffer(-2.5).intersection(side.remains().buffer(-0.8))
    named = []
    counts = {"vertical": 0, "horizontal": 0}
    for line in side.lines:
        points = _longest_run(line.points, shapely.contains_xy(face, line.points))
        if len(points) > 80:
            counts[line.runs] += 1
            named.append((f"{line.runs[0]}{counts[line.runs]}", Line(line.id, line.runs, line.kind, points)))
    return named


def _longest_run(points: Points, inside: NDArray[np.bool_]) -> Points:
    """Return the longest stretch of points that all lie inside."""
    edges = np.flatnonzero(np.diff(np.concatenate([[0], inside.astype(int), [0]])))
    if len(edges) == 0:
        return points[:0]
    starts, ends = edges[::2], edges[1::2]
    best = int(np.argmax(ends - starts))
    return points[starts[best] : ends[best]]


def _writing(
    tracer: Tracer, side: Side, rulings: list[tuple[str, Line]], rng: np.random.Generator
) -> list[Json]:
    """Return some whole entries, measured from the first wedge to the last."""
    names = {line.id: name for name, line in rulings}
    face = side.remains().buffer(-1.5)
    whole = [
        entry
        for entry in side.entries
        if f"v{entry.column + 1}" in names
        and shapely.contains_xy(face, np.array([entry.start, entry.end])).all()
    ]
    chosen = sorted(rng.choice(len(whole), min(18, len(whole)), replace=False))
    return [_entry(tracer, side, whole[index], names) for index in chosen]


def _entry(tracer: Tracer, side: Side, entry: Entry, names: dict[str, str]) -> Json:
    start, end = tracer.point(side.on_face(np.array([entry.start, entry.end])))
    column = names[f"v{entry.column + 1}"]
    return {"text": entry.text, "from": start, "to": end, "column": column, "line": entry.line + 1}


def make_truth(sitting: Sitting, tablet: Tablet, shots: Sequence[Shot]) -> Json:
    """Return what is true of the whole tablet; lengths in mm, rounded to a micrometre."""
    spec, body = sitting.spec, tablet.obverse.body
    return {
        "name": spec.name,
        "seed": spec.seed,
        "mm_per_px": _scale_at_face(shots[0]),
        "width": round(body.width, 3),
        "height": round(body.height, 3),
        "half_widths": [round(half, 3) for half in body.half_widths],
        "half_heights": [round(half, 3) for half in body.half_heights],
        "margin": spec.margin,
        "column_widths": list(tablet.widths),
        "columns": _columns(tablet.obverse, tablet.widths),
        "line_pitch": spec.hand.pitch,
        "lost_columns": spec.lost_columns,
        "lost_space": round(tablet.lost_space, 3),
        "sign_width": spec.hand.sign_width,
        "capacity": round(tablet.lost_space / spec.hand.sign_width, 4),
        "clearance": spec.hand.clearance,
        "true_candidate": sitting.true,
        "thickness": body.thickness,
        "convexity": body.convexities[0],
        "below_face": -sitting.bar.z,
        "distance": sitting.camera.distance,
        "views": [
            {
                "face": shot.side.face,
                "mm_per_px": _scale_at_face(shot),
                "tilt_deg": list(shot.camera.tilt_deg),
                "optical_axis_px": _axis(shot),
                "columns": _columns(shot.side, tablet.widths),
            }
            for shot in shots
        ],
    }


def _axis(shot: Shot) -> list[float]:
    corner = (0, 0) if shot.region is None else shot.region[:2]
    return [float(at) for at in shot.camera.centre_px + np.array(corner)]


def _scale_at_face(shot: Shot) -> float:
    """Return the scale in the plane of the face above the centroid of the fragment's outline."""
    centroid = shapely.get_coordinates(shot.side.remains().centroid)[0]
    return round(shot.camera.local_mm_per_px(np.array([*centroid, 0.0])), 7)


def _columns(side: Side, widths: tuple[float, ...]) -> list[Json]:
    """Return the columns both of whose boundaries survive, by the names of the record."""
    verticals = [(name, int(line.id[1:])) for name, line in surviving_lines(side) if line.runs == "vertical"]
    return [
        {"left": left, "right": right, "width": widths[first - 1]}
        for (left, first), (right, second) in pairwise(verticals)
        if second == first + 1
    ]


def write_json(path: Path, data: Json) -> None:
    """Write a record or a truth: UTF-8, two-space indent."""
    text = json.dumps(data, ensure_ascii=False, indent=2)
    path.write_text(text + "\n", encoding="utf-8")
