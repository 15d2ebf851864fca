"""A sitting from tablet to files: single photographs, the plate, record and truth."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np

from sample_images.render.camera import Camera
from sample_images.render.fragments import Sitting
from sample_images.render.grid import Field, Grid, Mask, grid_over
from sample_images.render.light import Lamp
from sample_images.render.picture import Picture, develop, expose, illuminate, sha256_of, write_jpeg
from sample_images.render.plate import EdgeFace, edge_scene, paste
from sample_images.render.record import Photo, Shot, make_record, make_truth, write_json
from sample_images.render.scene import Ground, lay_out
from sample_images.render.tablet import Side, Tablet, make_tablet

EXPOSURE = 1.25
PLATE_SIZE = (4000, 5960)
PLATE_CENTRE = PLATE_SIZE[0] // 2
EDGES: tuple[EdgeFace, ...] = ("upper edge", "left edge", "right edge", "lower edge")
EDGE_PX = 500
"""Room on the plate for the thickness of the tablet."""


def tilted(sitting: Sitting, number: int) -> Camera:
    """Return the camera as it really stood: a little aslant, differently for each picture."""
    rng = np.random.default_rng([sitting.spec.seed, 41, number])
    tilt = rng.normal(0, sitting.tilt_sd_deg, 2).round(4)
    return replace(sitting.camera, tilt_deg=(float(tilt[0]), float(tilt[1])))


def shots_of(sitting: Sitting, tablet: Tablet) -> list[Shot]:
    """Return the inscribed faces on the photograph."""
    if not sitting.plate:
        return [Shot(tablet.obverse, tilted(sitting, 0), None)]
    width, height = sitting.camera.size
    left = PLATE_CENTRE - width // 2
    upper = EDGE_PX + 30
    return [
        Shot(tablet.obverse, tilted(sitting, 0), (left, upper, width, height)),
        Shot(tablet.reverse, tilted(sitting, 1), (left, upper + height + EDGE_PX, width, height)),
    ]


def grid_seen(camera: Camera, window: tuple[int, int, int, int], z: tuple[float, float]) -> Grid:
    """Return a lattice over all that a window of the picture shows between two heights."""
    slope_x, slope_y = camera.slopes(window)
    x0, y0, z0 = camera.pinhole
    places = [(x0 + slope_x * (level - z0), y0 + slope_y * (level - z0)) for level in z]
    x = np.concatenate([p[0].ravel()[[0, -1]] for p in places] + [p[0][:, [0, -1]].ravel() for p in places])
    y = np.concatenate([p[1].ravel()[[0, -1]] for p in places] + [p[1][[0, -1]].ravel() for p in places])
    margin = 1.0
    return grid_over(
        float(x.min()) - margin,
        float(y.min()) - margin,
        float(x.max()) + margin,
        float(y.max()) + margin,
        1 / camera.mm_per_px,
    )


def photograph_face(
    sitting: Sitting,
    tablet: Tablet,
    side: Side,
    camera: Camera,
    *,
    ground: Ground,
    window: tuple[int, int, int, int] | None = None,
) -> tuple[Field, Mask]:
    """Return the linear picture of one face, or of a window of it, and where a thing is seen."""
    seen = window or (0, 0, *camera.size)
    grid = grid_seen(camera, seen, (2.0, -side.body.thickness - 1.0))
    scene = lay_out(tablet, side, grid, ground, (sitting.bar,))
    return expose(scene, illuminate(scene, Lamp()), camera, seen)


def photograph(sitting: Sitting, tablet: Tablet) -> Picture:
    """Return the whole photograph of a sitting."""
    shots = shots_of(sitting, tablet)
    rng = np.random.default_rng([sitting.spec.seed, 51])
    if not sitting.plate:
        linear, _ = photograph_face(sitting, tablet, shots[0].side, shots[0].camera, ground=sitting.ground)
        return develop(linear, EXPOSURE, rng)
    plate = np.full((PLATE_SIZE[1], PLATE_SIZE[0], 3), 0.0012, np.float32)
    for shot in shots:
        linear, seen = photograph_face(sitting, tablet, shot.side, shot.camera, ground="none")
        left, upper, _, _ = shot.region or (0, 0, 0, 0)
        paste(plate, linear, seen, (left, upper))
    for face in EDGES:
        _add_edge(plate, sitting, tablet, face, shots[0])
    return develop(plate, EXPOSURE, rng, noise=0.7)


def _add_edge(plate: Field, sitting: Sitting, tablet: Tablet, face: EdgeFace, obverse: Shot) -> None:
    """Photograph an edge and put it beside the obverse."""
    scene = edge_scene(tablet, face, 1 / sitting.camera.mm_per_px)
    grid = scene.grid
    aim = (grid.left + grid.width / grid.px_per_mm / 2, grid.upper + grid.height / grid.px_per_mm / 2)
    size = (round(grid.width * 1.02), round(grid.height * 1.02))
    camera = Camera(size, sitting.camera.mm_per_px, sitting.camera.distance, 0.0, aim)
    linear, seen = expose(scene, illuminate(scene, Lamp()), camera, (0, 0, *size))
    rows, columns = np.flatnonzero(seen.any(axis=1)), np.flatnonzero(seen.any(axis=0))
    cut = slice(max(0, rows[0] - 4), rows[-1] + 4), slice(max(0, columns[0] - 4), columns[-1] + 4)
    # the ends of the upper and lower edge stand above and below their places on the obverse
    middle = obverse.camera.project(np.array([[aim[0], 0.0, 0.0]]))[0, 0]
    start = float(middle - size[0] / 2 + cut[1].start)
    paste(plate, linear[cut], seen[cut], _corner(face, seen[cut].shape, start, obverse))


def _corner(face: EdgeFace, shape: tuple[int, ...], start: float, obverse: Shot) -> tuple[int, int]:
    """Return an edge's left and upper corner on the plate; ``start`` is its left on the obverse's picture."""
    tall, wide = shape
    left, upper, _, height = obverse.region or (0, 0, 0, 0)
    around = obverse.camera.project(np.vstack([points for _, points in obverse.side.outline]))
    west, north, east, south = np.concatenate([around.min(axis=0), around.max(axis=0)]) + np.tile(
        [left, upper], 2
    )
    gap, broken = 90, 120
    place = {
        "upper edge": (left + start, north - gap - tall),
        "lower edge": (left + start, upper + height + 20),
        # the broken face reaches out below the outline
        "left edge": (west - gap - broken - wide, (north + south - tall) / 2),
        "right edge": (east + gap, (north + south - tall) / 2),
    }[face]
    return round(place[0]), round(place[1])


def make(sitting: Sitting, folder: Path, *, picture: bool = True) -> None:
    """Write photograph, record and truth of a sitting; without ``picture`` the photograph on disk is kept."""
    tablet = make_tablet(sitting.spec)
    shots = shots_of(sitting, tablet)
    path = folder / f"{sitting.spec.stem}.jpg"
    if picture:
        sha256 = write_jpeg(path, photograph(sitting, tablet), sitting.quality)
    else:
        sha256 = sha256_of(path)
    size = PLATE_SIZE if sitting.plate else sitting.camera.size
    record = make_record(sitting, tablet, shots, Photo(path.name, sha256, size))
    write_json(folder / f"{sitting.spec.stem}.fragment.json", record)
    write_json(folder / f"{sitting.spec.stem}.truth.json", make_truth(sitting, tablet, shots))
