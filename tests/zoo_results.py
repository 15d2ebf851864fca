"""An invented fragment and results for it, made by hand, so that what shows results is tested alone."""

from __future__ import annotations

from typing import Any

import numpy as np

from layout.notices import Assumption, Caveat, Missing
from layout.quantity import Floats, Quantity
from layout.results import (
    Axes,
    AxisEvidence,
    AxisResult,
    Capacity,
    ClearanceResult,
    ColumnClearance,
    ColumnResult,
    LinesResult,
    PitchResult,
    Preserved,
    RankingRow,
    Reconstructed,
    ReconstructedOutline,
    Results,
    RulingResult,
    ScaleResult,
    SignWidthResult,
    ViewResult,
)

MM_PER_PX = 0.04
CENTRE_PX = (1500.0, 1200.0)
HALF_PX = (1250.0, 950.0)
BREAK_X_PX = 1100.0


def superellipse_px(grow_px: float = 0.0, points: int = 180) -> Floats:
    """Return the whole tablet's outline, clockwise from the right as it is seen (y down)."""
    turn = np.linspace(0, 2 * np.pi, points, endpoint=False)
    cosine, sine = np.cos(turn), np.sin(turn)
    x = CENTRE_PX[0] + (HALF_PX[0] + grow_px) * np.sign(cosine) * np.abs(cosine) ** 0.5
    y = CENTRE_PX[1] + (HALF_PX[1] + grow_px) * np.sign(sine) * np.abs(sine) ** 0.5
    return np.column_stack([x, y])


def _rounded(points: Floats) -> list[list[float]]:
    return [[round(float(x), 2), round(float(y), 2)] for x, y in points]


def _outline() -> list[dict[str, Any]]:
    """Return the surviving right part: upper edge, right edge, lower edge, break."""
    whole = superellipse_px()
    kept = np.roll(whole, 90, axis=0)
    kept = kept[kept[:, 0] > BREAK_X_PX]
    start, end = kept[-1], kept[0]
    steps = np.linspace(0, 1, 30)[1:-1, None]
    jag = np.column_stack([60 * np.sin(9 * steps[:, 0]) + 25 * np.sin(31 * steps[:, 0]), 0 * steps[:, 0]])
    return [
        {"edge": "upper", "points": _rounded(kept[:40])},
        {"edge": "right", "points": _rounded(kept[40:-40])},
        {"edge": "lower", "points": _rounded(kept[-40:])},
        {"edge": "break", "points": _rounded(start + steps * (end - start) + jag)},
    ]


def _ruling(name: str, runs: str, at_px: float) -> dict[str, Any]:
    along = np.linspace(500, 1900, 8) if runs == "vertical" else np.linspace(1300, 2600, 8)
    points = [[at_px, y] if runs == "vertical" else [y, at_px] for y in along.tolist()]
    return {"id": name, "runs": runs, "points": points}


def record(**changes: Any) -> dict[str, Any]:  # noqa: ANN401
    """Return the fragment's record as its file holds it, with some of its parts changed."""
    return {
        "schema": 1,
        "name": "Tell Amat 12",
        "observer": "R. Vesely",
        "date": "2024-05-17",
        "findspot": "Tell Amat, room 4, on the floor",
        "photographs": [
            {"id": "obv", "file": "ta12.png", "size": [3000, 2400], "credit": "Tell Amat archive"},
        ],
        "views": [
            {
                "face": "obverse",
                "photograph": "obv",
                "scale": {
                    "marks": [{"at": [1000.0, 2300.0], "mm": 0}, {"at": [2000.0, 2300.5], "mm": 40}],
                },
                "outline": _outline(),
                "rulings": [
                    *(_ruling(f"v{i}", "vertical", x) for i, x in enumerate((1400.0, 1800.0, 2250.0), 1)),
                    *(_ruling(f"h{i}", "horizontal", 550.0 + 150 * i) for i in range(8)),
                ],
                "writing": [
                    {"text": "7,30", "from": [1450, 600], "to": [1650, 602], "column": "v1", "line": 1},
                    {"text": "12", "from": [1850, 600], "to": [1950, 602], "column": "v2", "line": 1},
                ],
            }
        ],
        "thickness": {"mm": 24.0, "sd": 1.0},
        "lost": {"sides": ["left"]},
        "candidates": [
            {"name": "reciprocals", "columns": [{"entries": ["7,30", "8"]}]},
            {"name": "squares", "columns": [{"entries": ["2,13,20", "1,46,40"]}]},
        ],
        **changes,
    }


def results(draws: int = 400, name: str = "Tell Amat 12") -> Results:
    """Return results in which every field is given."""
    generator = np.random.default_rng(7)

    def near(value: float, sd: float, unit: str) -> Quantity:
        return Quantity(unit, generator.normal(value, sd, draws))

    axis = AxisResult(
        near(0.3, 0.4, "mm"),
        near(0.1, 0.3, "deg"),
        (
            AxisEvidence("outline", near(100.0, 1.2, "mm"), 0.8),
            AxisEvidence("stated", near(101.0, 2.4, "mm"), 0.2),
        ),
    )
    outline_px = superellipse_px()
    lost_space = near(46.1, 1.3, "mm")
    return Results(
        schema=1,
        name=name,
        version="0.1.0",
        draws=draws,
        seed=0,
        views=(
            ViewResult(
                "obverse",
                ScaleResult(near(MM_PER_PX, 0.0004, "mm/px"), "similarity"),
                Preserved(near(66.0, 0.7, "mm"), near(76.0, 0.8, "mm"), near(4700.0, 90.0, "mm2")),
                tuple(
                    RulingResult(name, runs, near(0.0, 0.2, "deg"), 0.08)
                    for name, runs in (("v1", "vertical"), ("v2", "vertical"), ("h1", "horizontal"))
                ),
                (
                    ColumnResult("v1", "v2", near(16.0, 0.2, "mm"), near(0.1, 0.2, "mm")),
                    ColumnResult("v2", "v3", near(18.0, 0.2, "mm"), near(-0.1, 0.2, "mm")),
                ),
                PitchResult(near(6.0, 0.06, "mm"), near(0.01, 0.02, "mm"), 0.2, {"h1": 0, "h2": 1}),
            ),
        ),
        reconstructed=Reconstructed(
            face="obverse",
            axis=Axes(axis, None),
            outline=ReconstructedOutline(
                (outline_px - CENTRE_PX) * MM_PER_PX,
                outline_px,
                (superellipse_px(-40.0), superellipse_px(40.0)),
            ),
            width=near(100.2, 1.1, "mm"),
            height=near(76.0, 0.8, "mm"),
            area=near(7100.0, 120.0, "mm2"),
            lost_area=near(2400.0, 110.0, "mm2"),
            lost_space=lost_space,
            lost_space_by_side={"left": lost_space},
            margin=near(0.0, 0.0, "mm"),
        ),
        sign_width=SignWidthResult(
            near(5.2, 0.2, "mm"),
            near(0.47, 0.05, "1"),
            near(0.66, 0.1, "1"),
            near(0.7, 0.3, "1"),
            near(0.67, 0.05, "1"),
            14,
        ),
        clearance=ClearanceResult(
            (ColumnClearance("v1", near(1.2, 0.05, "1")), ColumnClearance("v2", near(1.3, 0.05, "1"))),
            near(1.24, 0.07, "1"),
            near(0.12, 0.05, "1"),
        ),
        capacity=Capacity(
            near(8.9, 0.4, "sign widths"), LinesResult(near(0.0, 0.1, "lines"), near(12.4, 0.3, "lines"))
        ),
        ranking=(
            RankingRow(
                "squares",
                7.5,
                near(7.2, 0.5, "sign widths"),
                near(8.9, 0.8, "sign widths"),
                (1, 2),
                0.46,
                0.71,
                "fits",
                (),
            ),
            RankingRow("none of these", None, None, None, (), None, 0.25, None, ()),
            RankingRow(
                "reciprocals",
                3.5,
                near(3.1, 0.4, "sign widths"),
                near(3.8, 0.6, "sign widths"),
                (1,),
                0.004,
                0.04,
                "too narrow",
                (2,),
            ),
        ),
        assumptions=(
            Assumption("scale.below_face", "scale.below_face", "The bar is taken to lie 10(6) mm below."),
        ),
        warnings=(Caveat("pitch.few", "Only a few lines are ruled."),),
        missing=(Missing("reconstructed.axis.horizontal", "No lower edge is traced."),),
    )
