"""Distortion and slant are removed from the points, and put back for the picture."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import layout
from layout.errors import CallError
from layout.lens import Lens, distort
from layout.record.model import Record
from layout.straighten import free_of_lens, moved
from tests.simulation import simulate


def barrel(size: tuple[int, int]) -> Lens:
    """Return a lens that bends the corners of a photograph inwards by 2 %."""
    width, height = size
    focal = 1.2 * max(size)
    return Lens.model_validate(
        {
            "schema": 1,
            "size": list(size),
            "focal_px": [focal, focal],
            "focal_sd_px": [2.0, 2.0],
            "centre_px": [(width - 1) / 2, (height - 1) / 2],
            "centre_sd_px": [1.0, 1.0],
            "distortion": [-0.08, 0.0, 1e-3, -5e-4, 0.0],
            "distortion_sd": [1e-3, 1e-3, 1e-4, 1e-4, 1e-3],
            "rms_px": 0.2,
        }
    )


def sitting() -> Record:
    """Return a fragment as a lens without distortion shows it."""
    made: dict[str, Any] = simulate(
        np.random.default_rng([12, 3]), family="superellipse", lost=0.25, side="left", entries=20
    ).record
    return Record.model_validate(made)


def bent(record: Record, lens: Lens) -> Record:
    """Return a record as traced on a photograph that a lens has bent."""
    views = tuple(moved(view, lambda points: distort(lens, points)) for view in record.views)
    named = tuple(
        view.model_copy(update={"scale": view.scale.model_copy(update={"lens": "l.lens.json"})})
        for view in views
    )
    return record.model_copy(update={"views": named})


def test_a_lens_whose_file_is_given_changes_no_length() -> None:
    record = sitting()
    lens = barrel(record.photographs[0].size)
    plain = layout.measure(record, draws=1000)
    freed = layout.measure(bent(record, lens), draws=1000, lenses={"l.lens.json": lens})
    as_traced = layout.measure(bent(record, lens), draws=1000)
    width = [one.views[0].columns[0].width.summary().value for one in (plain, freed, as_traced)]
    assert width[1] == pytest.approx(width[0], rel=1e-3)
    assert abs(width[2] / width[0] - 1) > 3e-3  # type: ignore[operator]
    assert {one.code for one in as_traced.warnings} >= {"lens.unread"}
    assert "lens.unread" not in {one.code for one in freed.warnings}


def test_the_drawn_outline_lies_on_the_bent_photograph() -> None:
    record = sitting()
    lens = barrel(record.photographs[0].size)
    traced = bent(record, lens)
    results = layout.measure(traced, draws=1000, lenses={"l.lens.json": lens})
    assert results.reconstructed is not None
    drawn = results.reconstructed.outline.points_px
    edges = [np.array(piece.points) for piece in traced.views[0].outline if piece.edge == "right"]
    # the drawn curve passes the traced edge within the edge's own wobble, some tenths of a mm
    away = np.hypot(*(np.vstack(edges)[:, None] - drawn[None]).transpose(2, 0, 1)).min(axis=1)
    scale = results.views[0].scale
    assert scale is not None
    assert np.median(away) * float(np.median(scale.mm_per_px.draws)) < 1.0


def test_freeing_is_the_inverse_of_bending() -> None:
    record = sitting()
    lens = barrel(record.photographs[0].size)
    back = free_of_lens(bent(record, lens).views[0], lens)
    for freed, plain in zip(back.rulings, record.views[0].rulings, strict=True):
        assert np.array(freed.points) == pytest.approx(np.array(plain.points), abs=1e-6)
    assert back.writing[0].from_ == pytest.approx(record.views[0].writing[0].from_, abs=1e-6)


def test_a_lens_of_other_photographs_is_refused() -> None:
    record = sitting()
    width, height = record.photographs[0].size
    other = barrel((height, width + 500))
    with pytest.raises(CallError):
        layout.measure(bent(record, barrel((width, height))), draws=100, lenses={"l.lens.json": other})
