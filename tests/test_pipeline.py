"""measure(): from a record to its results."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import layout
from layout.record.model import Record
from layout.results import Results
from tests.simulation import simulate
from tests.zoo import small_record, smallest_record

SAMPLES = sorted((Path(__file__).parent.parent / "sample_images").glob("*.fragment.json"))
QUANTITY = {"value", "sd", "low", "high", "unit"}


def simulated() -> dict[str, Any]:
    """Return the record of a fragment with everything in it."""
    return simulate(
        np.random.default_rng([11, 3]), family="superellipse", lost=0.25, side="left", entries=20
    ).record


def measured(record: dict[str, Any], draws: int = 2000, seed: int = 0) -> Results:
    """Measure a record given as a dict."""
    return layout.measure(Record.model_validate(record), draws=draws, seed=seed)


def keys_of(value: Any) -> Any:  # noqa: ANN401
    """Return the keys of a tree of results, a quantity being a leaf, a list its first item."""
    if isinstance(value, dict):
        return "Q" if set(value) == QUANTITY else {key: keys_of(item) for key, item in value.items()}
    if isinstance(value, list) and value and isinstance(value[0], dict):
        return [keys_of(value[0])]
    return None


def test_the_results_have_the_keys_of_the_design() -> None:
    record = simulated()
    record["candidates"] = [{"name": "a", "columns": [{"entries": ["2,13,20"]}]}]
    results = measured(record).to_json()
    index = results["views"][0]["line_pitch"]["index"]
    ranking, warnings, missing = (results.pop(part) for part in ("ranking", "warnings", "missing"))
    assert keys_of(results) == {
        **dict.fromkeys(("schema", "name", "version", "draws", "seed")),
        "views": [
            {
                "face": None,
                "scale": {"mm_per_px": "Q", "model": None},
                "preserved": {"width": "Q", "height": "Q", "area": "Q"},
                "rulings": [{"id": None, "runs": None, "angle_deg": "Q", "scatter_mm": None}],
                "columns": [{"left": None, "right": None, "width": "Q", "taper": "Q"}],
                "line_pitch": {"pitch": "Q", "drift": "Q", "scatter_mm": None, "index": dict.fromkeys(index)},
            }
        ],
        "reconstructed": {
            "face": None,
            "axis": {
                "vertical": {
                    "position": "Q",
                    "angle_deg": "Q",
                    "evidence": [{"kind": None, "width": "Q", "share": None}],
                },
                "horizontal": None,
            },
            "outline": dict.fromkeys(("points_mm", "points_px", "band_px")),
            **dict.fromkeys(("width", "height", "area", "lost_area", "lost_space"), "Q"),
            "lost_space_by_side": {"left": "Q"},
            "margin": "Q",
        },
        "sign_width": {
            **dict.fromkeys(("full", "units_only", "tens_only", "blank", "mean_sign"), "Q"),
            "entries": None,
        },
        "clearance": {"columns": [{"left": None, "ratio": "Q"}], "typical": "Q", "spread": "Q"},
        "capacity": {"sign_widths": "Q", "lines": {"lost": "Q", "face": "Q"}},
        "assumptions": [dict.fromkeys(("code", "about", "text"))],
    }
    assert all(set(warning) == {"code", "text"} for warning in warnings)
    assert all(set(note) == {"result", "text"} for note in missing)
    row = next(row for row in ranking if row["name"] == "a")
    assert [key for key, leaf in keys_of(row).items() if leaf == "Q"] == ["required", "predicted"]
    assert list(row) == [
        "name",
        "plain_count",
        "required",
        "predicted",
        "widest_line",
        "probability_too_wide",
        "weight",
        "verdict",
        "contradicted_lines",
    ]


def test_the_same_record_and_seed_give_the_same_digits() -> None:
    one, other = (json.dumps(measured(simulated()).to_json()) for _ in range(2))
    assert one == other


def test_another_seed_differs_far_less_than_one_sd() -> None:
    one, other = (measured(simulated(), draws=10_000, seed=seed).reconstructed for seed in (0, 1))
    assert one is not None
    assert other is not None
    first, second = one.width.summary(), other.width.summary()
    assert first.value is not None
    assert second.value is not None
    assert first.sd is not None
    assert 0 < abs(first.value - second.value) < 0.1 * first.sd


def test_draws_and_seeds_out_of_range_are_refused() -> None:
    with pytest.raises(layout.CallError, match="needs 100 to 1000000 draws, has 99"):
        measured(simulated(), draws=99)
    with pytest.raises(layout.CallError, match="needs a seed of 0 or more, has -1"):
        measured(simulated(), seed=-1)


def test_without_a_scale_the_capacity_is_still_given() -> None:
    record = simulated()
    record["thickness"] = {"mm": 1.0, "sd": 0.01}  # flat, so that height does not tell the two apart
    with_scale = measured(record)
    record["views"][0]["scale"] = {}
    without = measured(record)
    assert without.views[0].scale is None
    assert without.reconstructed is None
    assert without.sign_width is not None
    assert without.sign_width.full is None
    assert without.capacity is not None
    assert with_scale.capacity is not None
    assert without.capacity.sign_widths is not None
    assert with_scale.capacity.sign_widths is not None
    one, other = (results.capacity.sign_widths.summary() for results in (without, with_scale))  # type: ignore[union-attr]
    assert one.value == pytest.approx(other.value, rel=0.1)
    assert [note.result for note in without.missing if note.result == "views[0].scale"]


def test_a_record_is_measured_as_far_as_it_goes() -> None:
    whole, record = simulated(), smallest_record()
    record["photographs"] = whole["photographs"]
    view = record["views"][0]
    view["photograph"] = whole["views"][0]["photograph"]
    record["candidates"] = [{"name": "a", "columns": [{"entries": ["2,13,20"]}]}]
    expected = [
        (None, {"views[0].scale", "reconstructed", "ranking"}),
        ("scale", {"views[0].columns", "views[0].line_pitch", "views[0].preserved", "reconstructed"}),
        ("rulings", {"views[0].preserved", "reconstructed", "ranking"}),
        ("outline", set()),
        ("writing", set()),
    ]
    for part, missing in expected:
        if part is not None:
            view[part] = whole["views"][0][part]
        assert missing <= {note.result for note in measured(record, 500).missing}
    results = measured(record, 500)
    assert results.missing == ()
    assert results.ranking[0].weight is not None


def test_no_height_is_lost_where_the_edges_stand() -> None:
    record = simulated()
    lines = measured(record).capacity.lines  # type: ignore[union-attr]
    assert lines.lost is not None
    assert (lines.lost.draws == 0).all()
    # the middle of the upper edge breaks away: only its end near the corner still stands
    view = record["views"][0]
    upper = next(piece for piece in view["outline"] if piece["edge"] == "upper")
    upper["points"] = sorted(upper["points"])[-8:]
    lost = measured(record).capacity.lines.lost  # type: ignore[union-attr]
    assert lost is not None
    assert 0 <= np.percentile(lost.draws, 2.5) < np.percentile(lost.draws, 97.5) < 3
    assert np.median(lost.draws) > 0.1


def test_every_part_of_a_record_goes_through() -> None:
    results = measured(small_record(), 500)
    assert results.views[0].scale is not None
    assert json.loads(json.dumps(results.to_json(), allow_nan=False))["name"] == "Q 17"


def test_a_fragment_that_lost_its_right_is_the_mirror_of_one_that_lost_its_left() -> None:
    kept: list[float] = []
    for side in ("left", "right"):
        record = simulate(
            np.random.default_rng([12, 1]),
            family="superellipse",
            lost=0.25,
            side=side,
            entries=12,
            tilt_sd_deg=0.0,
        ).record
        results = measured(record, 4000)
        assert results.reconstructed is not None
        assert list(results.reconstructed.lost_space_by_side) == [side]
        kept.append(results.reconstructed.width.summary().value or 0.0)
    assert kept[0] == pytest.approx(kept[1], rel=0.03)


def test_turning_and_shifting_the_photograph_keeps_the_millimetres() -> None:
    record = simulated()
    # a square camera and bar and face in one plane: nothing else depends on the place in the picture
    scale = record["views"][0]["scale"]
    scale |= {"below_face": {"mm": 0.0, "sd": 0.0}, "tilt_sd_deg": 0.0}
    record["thickness"] = {"mm": 1.0, "sd": 0.0}
    plain = measured(record)
    width, height = record["photographs"][0]["size"]

    def turned(points: list[list[float]]) -> list[list[float]]:
        return [[height - 1 - y, x] for x, y in points]

    view = record["views"][0]
    record["photographs"][0]["size"] = [height, width]
    for mark in scale["marks"]:
        mark["at"] = turned([mark["at"]])[0]
    names = {"upper": "right", "right": "lower", "lower": "left", "left": "upper", "break": "break"}
    for piece in view["outline"]:
        piece["points"], piece["edge"] = turned(piece["points"]), names[piece["edge"]]
    results = measured(record)
    before, after = plain.views[0].preserved, results.views[0].preserved
    assert before is not None
    assert after is not None
    assert before.area.summary().value == pytest.approx(after.area.summary().value, rel=0.002)


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.name.split(".")[0])
def test_the_samples_give_their_truths(path: Path) -> None:
    truth = json.loads(path.with_name(path.name.replace("fragment", "truth")).read_text())
    results = layout.measure(layout.read(path), draws=4000)
    view = results.views[0]
    assert view.scale is not None
    assert view.line_pitch is not None
    assert results.reconstructed is not None
    assert results.reconstructed.lost_space is not None
    pairs = [
        (view.line_pitch.pitch, truth["line_pitch"]),
        (results.reconstructed.width, truth["width"]),
        (results.reconstructed.lost_space, truth["lost_space"]),
        *(
            (column.width, known["width"])
            for column, known in zip(view.columns, truth["columns"], strict=True)
        ),
    ]
    for quantity, known in pairs:
        # several quantities of three fragments: each within its 99.9 % interval
        low, high = np.percentile(quantity.draws, [0.05, 99.95])
        assert low <= known <= high
    assert truth["true_candidate"] in [row.name for row in results.ranking if row.verdict == "fits"]


def test_measuring_loads_neither_pixels_nor_pages() -> None:
    code = (
        "import sys, layout; layout.measure(layout.read(sys.argv[1]), draws=100);"
        "print([name for name in ('cv2', 'scipy', 'shapely', 'rich', 'jinja2') if name in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(SAMPLES[0])], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"
