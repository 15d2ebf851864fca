"""Widths of signs from measured entries."""

from __future__ import annotations

import numpy as np
import pytest

from layout.notices import Assumption
from layout.sign_widths import (
    FLAT_SD_LOG,
    FullPrior,
    MeasuredEntries,
    SignWidths,
    expect_full_digit,
    fit_sign_widths,
)
from tests.coverage import exact_limits

NONE = MeasuredEntries(np.empty((0, 5)), np.empty(0), np.empty(0))


def fit(entries: MeasuredEntries, seed: int = 0, rows: int = 1000) -> SignWidths:
    """Fit at a pitch of 6 mm and a scale that is known."""
    return fit_sign_widths(entries, expect_full_digit(6.0), np.ones(rows), np.random.default_rng(seed))


def simulated(rng: np.random.Generator, count: int, full: float) -> MeasuredEntries:
    """Return entries of this many full digits and others, each with a stretch of its own."""
    ratios = np.array([1.0, *np.clip(rng.normal([0.45, 0.70, 0.70], [0.12, 0.22, 0.40]), 0.05, None), 0.67])
    counts = np.column_stack([rng.integers(0, 3, (count, 3)), np.zeros((count, 2))])
    counts[:, 0] += counts.sum(axis=1) == 0
    lengths = full * (counts @ ratios) * np.exp(rng.normal(0, 0.10, count)) + rng.normal(0, 0.07, count)
    return MeasuredEntries(counts, lengths, np.full(count, 0.05))


@pytest.mark.parametrize("count", [1, 4, 20])
def test_the_width_of_a_full_digit_is_covered(count: int) -> None:
    hits = 0
    for seed in range(300):
        rng = np.random.default_rng([count, seed])
        full = 5.4 * np.exp(rng.normal(0, 0.2))
        drawn = fit(simulated(rng, count, full), seed).full
        assert drawn is not None
        low, high = np.percentile(drawn, [2.5, 97.5])
        hits += low <= full <= high
    assert exact_limits(hits, 300, 0.998)[1] > 0.93


def test_without_entries_the_priors_stand_and_are_named() -> None:
    widths = fit(NONE)
    codes = {note.code for note in widths.notices if isinstance(note, Assumption)}
    assert codes == {"signs.full_of_pitch", "signs.ratios"}
    assert np.median(widths.ratios[:, 1]) == pytest.approx(0.45, abs=0.02)
    assert widths.ratios[:, 1].std() == pytest.approx(0.12, abs=0.02)


def test_nothing_is_known_of_a_full_digit_without_scale_and_entries() -> None:
    widths = fit_sign_widths(NONE, FullPrior(1.0, FLAT_SD_LOG), np.ones(100), np.random.default_rng(0))
    assert widths.full is None


def test_the_scale_carries_over_row_by_row() -> None:
    entries = simulated(np.random.default_rng(1), 8, 5.0)
    ratio = np.linspace(0.9, 1.1, 1000)
    plain, scaled = (
        fit_sign_widths(entries, expect_full_digit(6.0), rows, np.random.default_rng(3)).full
        for rows in (np.ones(1000), ratio)
    )
    assert plain is not None
    assert scaled is not None
    assert np.allclose(scaled, plain * ratio)


def test_an_entry_of_its_own_stretch_does_not_average_out_over_its_signs() -> None:
    # ten signs in one entry are one observation of the stretch: its sd stays near ten per cent
    one = MeasuredEntries(np.array([[10.0, 0, 0, 0, 0]]), np.array([50.0]), np.array([0.05]))
    full = fit(one).full
    assert full is not None
    assert np.log(full).std() > 0.08
