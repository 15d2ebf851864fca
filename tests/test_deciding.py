"""What decides the order of the candidates."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.candidates.deciding import decides
from layout.quantity import Quantity
from layout.results import RankingRow
from tests.zoo_results import results


def row(name: str, need: float, weight: float) -> RankingRow:
    """Return a ranked candidate that needs so many sign widths."""
    quantity = Quantity("sign widths", np.full(400, need))
    return RankingRow(name, need, quantity, quantity, (1,), 0.5, weight, "fits", ())


def test_the_order_tips_where_both_are_equally_near() -> None:
    whole = results()
    assert whole.capacity is not None
    assert whole.capacity.sign_widths is not None
    space = np.median(whole.capacity.sign_widths.draws)
    said = decides(replace(whole, ranking=(row("a", 8.0, 0.6), row("b", 2.0, 0.4))))
    assert f"above a clearance of {space / 4:.2f} b would overtake it" in said
    said = decides(replace(whole, ranking=(row("b", 2.0, 0.6), row("a", 8.0, 0.4))))
    assert f"below a clearance of {space / 4:.2f} a would overtake it" in said


def test_equal_needs_are_undecided() -> None:
    said = decides(replace(results(), ranking=(row("a", 3.0, 0.5), row("b", 3.0, 0.5))))
    assert "cannot decide between them" in said


def test_one_candidate_competes_with_none_of_these() -> None:
    said = decides(replace(results(), ranking=(row("a", 3.0, 0.5), row("none of these", 1.0, 0.5))))
    assert "only candidate" in said


def test_without_a_ranking_nothing_is_decided() -> None:
    assert "Nothing decides" in decides(replace(results(), ranking=()))
