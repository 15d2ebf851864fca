"""How much wider than its widest entry a column is."""

from __future__ import annotations

import numpy as np
import pytest

from layout.clearance import find_widest, learn_clearance
from layout.sign_widths import SignWidths
from layout.signs import count_signs
from tests.coverage import exact_limits

ROWS = 1000
FLAT = SignWidths(np.full(2, 5.0), np.tile([1.0, 0.5, 0.7, 0.7, 0.67], (2, 1)), 0, ())


def test_the_widest_entry_is_found_row_by_row() -> None:
    widths = SignWidths(
        np.full(2, 5.0), np.array([[1.0, 0.3, 0.9, 0.7, 0.67], [1.0, 0.6, 0.4, 0.7, 0.67]]), 0, ()
    )
    entries = [count_signs("1,2"), count_signs("10")]
    assert find_widest(entries, widths).tolist() == [0.9, 1.2]


def test_nothing_written_needs_nothing() -> None:
    assert find_widest([count_signs("")], FLAT).tolist() == [0.0, 0.0]


@pytest.mark.parametrize("columns", [1, 3, 6])
def test_a_further_column_is_covered(columns: int) -> None:
    hits = 0
    for seed in range(400):
        rng = np.random.default_rng([columns, seed])
        mu, tau = rng.normal(np.log(1.25), 0.2), abs(rng.normal(0, 0.15))
        ratios = np.exp(rng.normal(mu, tau, columns + 1))
        learned = learn_clearance(np.tile(10 * ratios[1:], (ROWS, 1)), np.full((ROWS, columns), 10.0), rng)
        low, high = np.percentile(learned.of_new_column(rng.standard_normal(ROWS)), [2.5, 97.5])
        hits += low <= ratios[0] <= high
    low, high = exact_limits(hits, 400, 0.998)
    assert high > 0.93
    assert low < 0.97


def test_without_columns_the_prior_stands_and_is_named() -> None:
    none = learn_clearance(np.empty((100_000, 0)), np.empty((100_000, 0)), np.random.default_rng(0))
    assert [note.code for note in none.notices] == ["clearance.none"]
    assert np.median(none.typical) == pytest.approx(1.25, abs=0.005)


def test_the_clearance_has_a_mean() -> None:
    # a Student's t exponentiated has none: a few draws would carry it away
    few = learn_clearance(
        np.full((100_000, 2), [10.0, 16.0]), np.full((100_000, 2), 10.0), np.random.default_rng(0)
    )
    assert few.typical.max() < 10.0
