"""Quantities: joint draws, their summaries, and numbers as the GUM writes them."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from layout.quantity import Quantity, concise, quantiles, significant

FINITE = st.floats(-1e6, 1e6)


@given(st.lists(FINITE, min_size=1, max_size=40), st.floats(0, 1))
def test_quantiles_are_those_of_numpy(values: list[float], share: float) -> None:
    expected = np.percentile(values, 100 * share)
    assert quantiles(np.array(values), (share,))[0] == pytest.approx(expected, rel=1e-9, abs=1e-6)


def test_draws_that_are_no_numbers_are_refused() -> None:
    with pytest.raises(ValueError, match="has 1 that are not"):
        Quantity("mm", np.array([1.0, np.nan]))
    with pytest.raises(ValueError, match=r"shape \(N,\)"):
        Quantity("mm", np.empty(0))


def test_what_shares_its_draws_stays_correlated() -> None:
    rng = np.random.default_rng(0)
    scale = rng.normal(1.0, 0.02, 20_000)
    one, other = Quantity("mm", 40 * scale), Quantity("mm", 50 * scale)
    ratio = Quantity("1", other.draws / one.draws).summary()
    assert ratio.sd == pytest.approx(0.0, abs=1e-12)
    assert ratio.value == pytest.approx(1.25)


@pytest.mark.parametrize(
    ("value", "sd", "text"),
    [
        (100.02147, 0.00035, "100.02147(35)"),  # JCGM 100:2008 7.2.2, example 2: the mass m_S (from memory)
        (12.34, 1.4, "12.3(1.4)"),
        (0.5, 0.0996, "0.50(10)"),
        (99.6, 9.96, "100(10)"),
        (-0.004, 0.12, "0.00(12)"),
        (-31.0, 260.0, "-30(260)"),
    ],
)
def test_two_digits_of_the_uncertainty_in_brackets(value: float, sd: float, text: str) -> None:
    assert concise(value, sd) == text


@given(FINITE)
def test_six_significant_digits_lose_less_than_a_millionth(value: float) -> None:
    assert significant(value) == pytest.approx(value, rel=5.1e-6)
    assert significant(significant(value)) == significant(value)
