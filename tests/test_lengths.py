"""Lengths between rulings and the outline."""

from __future__ import annotations

import numpy as np
import pytest

from layout.frame import Frame, Plane, Scale, find_homography
from layout.lengths import Extent, Mapped, measure_column, measure_to_edge, polygon_area, polygon_centroid
from layout.rulings import Line

DRAWS = 7
ONE = np.ones(DRAWS)
CENTRE = np.array([2000.0, 1500.0])


def mapped(tilt: float = 0.0, turn: float = 0.0) -> Mapped:
    """Return the way from a frame, shifted and turned, to mm at 0.05 mm per px, 600 mm away."""
    tilts = np.column_stack([tilt * ONE, 0 * ONE])
    plane = Plane(find_homography(0.05 * ONE, tilts, ONE / 600, 0 * ONE), 0.05)
    centred = plane.seen_from(np.array([[1.0, 0.0, -CENTRE[0]], [0.0, 1.0, -CENTRE[1]], [0.0, 0.0, 1.0]]))
    return Mapped.of(
        Scale(CENTRE, 0.05 * ONE, centred, centred, "similarity", np.eye(3)),
        Frame(CENTRE, np.array([8.0, -5.0]), turn),
    )


def line(name: str, x: float, slope: float = 0.0, reach: tuple[float, float] = (-30.0, 30.0)) -> Line:
    """Return a vertical line."""
    return Line(name, "vertical", reach, sum(reach) / 2, x * ONE, slope * ONE, 0.1)


@pytest.mark.parametrize("turn", [0.0, 0.3, -1.2])
def test_parallel_lines_are_as_far_apart_as_they_stand(turn: float) -> None:
    width, taper = measure_column(line("a", -6.0), line("b", 12.5), mapped(turn=turn))
    assert width == pytest.approx(18.5)
    assert taper == pytest.approx(0.0, abs=1e-9)


def test_taper_is_in_mm_per_100_mm_downwards() -> None:
    # each line leans by 0.5 mm in 100, away from the other going down
    width, taper = measure_column(line("a", -10.0, -0.005), line("b", 10.0, 0.005), mapped())
    assert width == pytest.approx(20.0)
    assert taper == pytest.approx(1.0, rel=1e-3)


def test_lines_that_lean_together_are_measured_across_them() -> None:
    lean = np.tan(np.deg2rad(10.0))
    width, _ = measure_column(line("a", -10.0, lean), line("b", 10.0, lean), mapped())
    assert width == pytest.approx(20.0 * np.cos(np.deg2rad(10.0)))


def test_traces_side_by_side_nowhere_still_have_a_width() -> None:
    width, _ = measure_column(
        line("a", 0.0, reach=(-30.0, -10.0)), line("b", 9.0, reach=(5.0, 30.0)), mapped()
    )
    assert width == pytest.approx(9.0)


def test_a_tilted_face_is_measured_in_its_own_plane() -> None:
    # the picture of a face turned about the vertical is narrower: its lengths are not those of the picture
    flat, _ = measure_column(line("a", -10.0), line("b", 10.0), mapped())
    aslant, _ = measure_column(line("a", -10.0), line("b", 10.0), mapped(tilt=np.sin(np.deg2rad(20.0))))
    assert aslant / flat == pytest.approx(1 / np.cos(np.deg2rad(20.0)), rel=0.03)


def test_the_way_to_an_edge_is_counted_towards_it() -> None:
    way = mapped()
    points = way.outline.map(np.array([[-50.0, 0.0], [40.0, 0.0]]))
    across = np.tile([1.0, 0.0], (DRAWS, 1))
    extent = Extent(points[:, 0], points[:, 1], across, 90 * ONE, 100 * ONE)
    assert measure_to_edge(line("a", 10.0), "left", extent, way) == pytest.approx(60.0)
    assert measure_to_edge(line("a", 10.0), "right", extent, way) == pytest.approx(30.0)
    assert measure_to_edge(line("a", 45.0), "right", extent, way) == pytest.approx(-5.0)


def test_the_area_and_centroid_of_a_polygon() -> None:
    corner = np.array([[0.0, 0.0], [30.0, 0.0], [30.0, 10.0], [10.0, 10.0], [10.0, 40.0], [0.0, 40.0]])
    assert polygon_area(corner) == pytest.approx(30 * 10 + 10 * 30)
    assert polygon_centroid(corner) == pytest.approx([(300 * 15 + 300 * 5) / 600, (300 * 5 + 300 * 25) / 600])
    assert polygon_centroid(corner[::-1] + 7) == pytest.approx(polygon_centroid(corner) + 7)
    assert polygon_centroid(np.array([[0.0, 0.0], [4.0, 0.0]])) == pytest.approx([2.0, 0.0])
