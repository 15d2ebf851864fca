"""The 95 % intervals hold about 95 % of the time, on fragments that share no model with the estimator."""

from __future__ import annotations

import numpy as np
import pytest

from tests.coverage import Judged, Task, Trial, exact_limits, judge_all
from tests.coverage_table import QUANTITIES, table, trials_in

FRAGMENTS = 160
# two-sided 99.8 %: one chance in a thousand on either side
CONFIDENCE = 0.998


@pytest.fixture(scope="module")
def judged() -> list[Judged]:
    """Measure the fragments once for all tests."""
    return list(judge_all([Task(number, seed=2, draws=2000) for number in range(FRAGMENTS)], workers=2))


def test_intervals_cover_93_to_97_percent(judged: list[Judged]) -> None:
    # A true 95 % of 160 is found outside these limits with a chance below 1e-4 for one quantity.
    refuted = []
    for quantity in QUANTITIES:
        trials = trials_in(judged, quantity)
        low, high = exact_limits(sum(trial.holds for trial in trials), len(trials), CONFIDENCE)
        if high < 0.93 or low > 0.97:
            refuted.append(quantity)
    assert not refuted, f"coverage refuted for {refuted}\n{table(judged)}"


def test_every_quantity_of_a_whole_record_is_measured(judged: list[Judged]) -> None:
    nulls = [(one.number, trial.quantity) for one in judged for trial in one.trials if trial.is_null]
    assert len(nulls) <= 0.01 * FRAGMENTS * len(QUANTITIES), nulls


def test_width_is_near_its_cramer_rao_bound(judged: list[Judged]) -> None:
    ratios = [
        width.sd / bound
        for one in judged
        if (bound := one.bound_with_scale()) is not None
        if (width := one.trial("width")) is not None and width.sd is not None
    ]
    assert len(ratios) > FRAGMENTS / 10
    assert np.median(ratios) < 1.25


def test_exact_limits_are_those_of_clopper_and_pearson() -> None:
    # of n that all hold, the lower limit is (tail)^(1/n): an identity
    assert exact_limits(50, 50, 0.95)[0] == pytest.approx(0.025 ** (1 / 50), rel=1e-9)
    assert exact_limits(0, 50, 0.95)[0] == 0.0
    assert exact_limits(0, 50, 0.95)[1] == pytest.approx(1 - 0.025 ** (1 / 50), rel=1e-9)


def test_a_null_result_does_not_hold() -> None:
    assert not Trial("width", 100.0, None, None, None, None).holds
    assert Trial("width", 100.0, 99.0, 101.0, 100.2, 0.5).holds
