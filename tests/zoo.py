"""Named things that tests share: records, outlines and traces of invented fragments."""

from __future__ import annotations

from typing import Any


def small_record() -> dict[str, Any]:
    """Return a small record in which every part of the record's format is used once or more.

    A photograph of 1000 x 800 px at 0.1 mm a pixel; the left side is lost. A fresh dict each time, so that a
    test may spoil it.
    """
    return {
        "schema": 1,
        "name": "Q 17",
        "remarks": "invented",
        "observer": "N. N.",
        "date": "2024-05-01",
        "findspot": "room 4",
        "photographs": [
            {
                "id": "obv",
                "file": "q17.png",
                "size": [1000, 800],
                "of": "object",
                "credit": "the tests",
                "licence": "CC0",
            }
        ],
        "views": [
            {
                "face": "obverse",
                "photograph": "obv",
                "region": [0, 0, 1000, 700],
                "pointing_px": 1.0,
                "scale": {
                    "marks": [
                        {"bar": "a", "at": [100.0, 750.5], "mm": 0},
                        {"bar": "a", "at": [200.0, 750.0], "mm": 10},
                        {"bar": "a", "at": [300.5, 750.0], "mm": 20},
                    ],
                    "known": [
                        {"from": [500, 100], "to": [700, 100], "mm": 20.1, "sd": 0.2, "source": "calipers"}
                    ],
                    "below_face": {"mm": 9.0, "sd": 1.0},
                    "distance": {"mm": 620.0, "sd": 15.0},
                    "tilt_sd_deg": 1.5,
                },
                "outline": [
                    {"edge": "upper", "points": [[400, 60], [500, 52], [600, 51], [700, 55], [800, 64]]},
                    {
                        "edge": "right",
                        "state": "doubtful",
                        "points": [[805, 70], [820, 200], [825, 350], [820, 500], [806, 630]],
                    },
                    {"edge": "lower", "points": [[800, 636], [700, 645], [600, 649], [500, 648], [420, 642]]},
                    {"edge": "break", "points": [[415, 638], [450, 500], [400, 350], [430, 200], [398, 66]]},
                ],
                "rulings": [
                    {"id": "v1", "runs": "vertical", "points": [[500, 80], [501, 300], [500, 600]]},
                    {"id": "v2", "runs": "vertical", "kind": "double", "points": [[650, 80], [651, 600]]},
                    {"id": "h1", "runs": "horizontal", "points": [[450, 150], [800, 151]]},
                    {"id": "h2", "runs": "horizontal", "points": [[450, 200], [800, 201]]},
                    {"id": "h3", "runs": "horizontal", "points": [[450, 250], [800, 251]]},
                ],
                "writing": [
                    {"text": "7,30", "from": [510, 175], "to": [560, 175], "column": "v1", "line": 2},
                    {"text": "2,13,20", "from": [511, 225], "to": [590, 226], "column": "v1", "line": 3},
                    {"text": "sum", "kind": "heading", "from": [660, 120], "to": [700, 120], "column": "v2"},
                ],
            }
        ],
        "thickness": {"mm": 24.0, "sd": 1.0},
        "convexity": {"mm": 2.0, "sd": 0.5},
        "asymmetry_percent": 1.0,
        "evidence": [{"about": "width", "mm": 62.0, "sd": 4.0, "source": "duplicate, same format"}],
        "lost": {"sides": ["left"]},
        "series": {"n": ["2", "3", "4"]},
        "candidates": [
            {
                "name": "products",
                "columns": [
                    {"heading": "n", "entries": ["2", "3"], "remains": ["", "[…]"]},
                    {"rule": "1/n"},
                ],
                "holds": "a == b",
            }
        ],
        "pool": {"columns": [{"entries": ["5", "6"]}], "together": [1, 2]},
        "gaps": [{"view": 0, "line": 4, "from": [510, 275], "to": [600, 275], "restorations": ["lugal-e"]}],
    }


def smallest_record() -> dict[str, Any]:
    """Return a record that has only what no record may lack."""
    return {
        "schema": 1,
        "name": "Q 1",
        "photographs": [{"id": "p", "file": "q1.png", "size": [640, 480]}],
        "views": [{"face": "obverse", "photograph": "p"}],
    }
