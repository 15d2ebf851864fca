"""A camera that stood aslant: which model is taken, and whether lengths on the face are true."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from layout.frame import Scale
from layout.notices import Caveat, Notice
from layout.scale import fit_scale
from tests.coverage import exact_limits
from tests.pictures.scene import ACROSS, DOWN, Floats, Sitting, record_of

STEEP = (0.25, -0.2)


def fit(sitting: Sitting, draws: int = 2000, **scale: Any) -> tuple[Scale, list[Notice], Floats]:  # noqa: ANN401
    """Fit a sitting's scale; also return the draws of both lengths of the cross, (2, N)."""
    record = record_of(sitting, **scale)
    found, notices = fit_scale(
        record.views[0], record.photographs[0], record.thickness, draws, np.random.default_rng(sitting.seed)
    )
    ends = found.face.map(found.level(np.array(record.views[0].rulings[0].points)))
    lengths = [np.hypot(*(ends[:, k + 1] - ends[:, k]).T) for k in (0, 2)]
    return found, notices, np.array(lengths)


@pytest.mark.parametrize("marks", ["card", "bars"])
def test_a_slanting_camera_is_told_by_its_marks(marks: str) -> None:
    scale, notices, lengths = fit(Sitting(marks, STEEP, rocking_deg=0.0), tilt_sd_deg=0.0)
    assert scale.model == "perspective"
    assert "scale.rocking" in {getattr(note, "code", "") for note in notices}
    # 10(3) mm at 700 mm: 0.4 % of every length, from the height of the bar alone
    assert lengths.mean(axis=1) == pytest.approx([ACROSS, DOWN], rel=0.015)
    assert (lengths.std(axis=1) / [ACROSS, DOWN] < 0.006).all()


def test_the_simpler_model_wins_unless_the_marks_ask_for_more() -> None:
    models = []
    for seed in range(30):
        scale, _, _ = fit(Sitting("card", mark_sd_px=1.0, seed=seed, distance=3000.0), draws=100)
        models.append(scale.model)
    # at the significance of Akaike's criterion for three more parameters, one in nine or so
    assert models.count("similarity") >= 24


@pytest.mark.parametrize("marks", ["card", "bars"])
@pytest.mark.parametrize("spread", [0.02, 0.2])
def test_lengths_on_a_face_that_rocks_are_covered(marks: str, spread: float) -> None:
    hits, count = 0, 60
    for seed in range(count):
        rng = np.random.default_rng([seed, 305])
        tilt = tuple(rng.normal(0, spread, 2).clip(-0.45, 0.45))
        distance = float(np.exp(rng.normal(np.log(700), 0.3)))
        _, _, lengths = fit(Sitting(marks, tilt, distance=distance, seed=seed), draws=1000)
        low, high = np.percentile(lengths, [2.5, 97.5], axis=1)
        hits += int(((low <= [ACROSS, DOWN]) & ([ACROSS, DOWN] <= high)).sum())
    limits = exact_limits(hits, 2 * count, 0.999)
    assert limits[1] > 0.93


def test_without_its_tilt_the_same_picture_is_measured_worse() -> None:
    sitting = Sitting("card", STEEP, rocking_deg=0.0, below_sd=0.1)
    one_bar = record_of(sitting)
    marks = [
        mark for mark in one_bar.views[0].scale.marks if isinstance(mark.mm, tuple) and mark.mm[1] == 0.0
    ]
    flat = [{"bar": "a", "at": mark.at, "mm": mark.mm[0]} for mark in marks]  # type: ignore[index]
    errors = []
    for _, _, lengths in (fit(sitting, marks=flat), fit(sitting)):
        errors.append(np.abs(np.median(lengths, axis=1) / [ACROSS, DOWN] - 1).max())
    assert errors[0] > 2 * errors[1]


def test_bars_that_contradict_one_another_are_no_tilt() -> None:
    record = record_of(Sitting("bars"))
    marks = [
        {"bar": mark.bar, "at": mark.at, "mm": mark.mm * (1.1 if mark.bar == "b" else 1.0)}  # type: ignore[operator]
        for mark in record.views[0].scale.marks
    ]
    scale, notices, _ = fit(Sitting("bars"), marks=marks)
    assert scale.model == "similarity"
    assert "scale.disagree" in {note.code for note in notices if isinstance(note, Caveat)}


def test_levelled_points_go_back_to_the_photograph() -> None:
    scale, _, _ = fit(Sitting("card", STEEP), draws=100)
    points = np.array([[100.0, 200.0], [5000.0, 3000.0], [3000.0, 2000.0]])
    assert scale.to_photograph(scale.level(points)) == pytest.approx(points)


def test_a_focal_length_sharpens_what_the_height_of_the_bar_costs() -> None:
    # the correction for the height is height / distance: to know the distance is to know it
    sitting = Sitting("card", below_sd=0.0, rocking_deg=0.0)
    spreads = []
    for focal in (None, {"px": 700 / 0.04, "sd": 0.03 * 700 / 0.04}):
        record = record_of(sitting, tilt_sd_deg=0.0)
        photograph = record.photographs[0].model_validate(
            {**record.photographs[0].model_dump(), "focal_length": focal}
        )
        bar = [mark for mark in record.views[0].scale.marks if mark.mm[1] == 0.0]  # type: ignore[index]
        marks = tuple(mark.model_copy(update={"mm": mark.mm[0]}) for mark in bar)  # type: ignore[index]
        view = record.views[0].model_copy(
            update={"scale": record.views[0].scale.model_copy(update={"marks": marks})}
        )
        scale, _ = fit_scale(view, photograph, record.thickness, 4000, np.random.default_rng(0))
        spreads.append(float(scale.face.local(scale.centre_px).std()))
    assert spreads[1] < 0.5 * spreads[0]
