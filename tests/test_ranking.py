"""Candidates against the lost space."""

from __future__ import annotations

import numpy as np
import pytest

from layout.candidates.ranking import NONE_OF_THESE, Ranking, rank
from layout.candidates.width import Proposal, Space, log_mean
from layout.notices import Missing
from layout.sign_widths import SignWidths
from tests.coverage import exact_limits

ROWS = 1500
FULL = 5.0


def widths() -> SignWidths:
    """Return widths of signs that are known exactly."""
    return SignWidths(np.full(ROWS, FULL), np.tile([1.0, 0.5, 0.5, 0.5, 0.67], (ROWS, 1)), 9, ())


def ranked(
    needs: list[float], lost_mm: float, lost_sd: float = 1.0, *, seed: int = 0, tau: float = 0.1
) -> Ranking:
    """Rank candidates of so many full digits for a lost space."""
    rng = np.random.default_rng(seed)
    space = Space(
        rng.normal(lost_mm, lost_sd, ROWS),
        np.full(ROWS, FULL),
        np.full(ROWS, np.log(1.2)),
        np.full(ROWS, tau),
    )
    proposals = [
        Proposal(f"c{at}", ((",".join(["11"] * int(need) + ["1"] * round(2 * (need % 1))),),))
        for at, need in enumerate(needs)
    ]
    return rank(proposals, space, np.full(ROWS, 100.0), widths(), rng)


def by_name(ranking: Ranking) -> dict[str, float | None]:
    """Return the weights."""
    return {row.name: row.weight for row in ranking.rows}


def test_what_fits_stands_first_and_the_weights_add_up() -> None:
    ranking = ranked([1.0, 3.0, 6.0], 3.0 * FULL * 1.2)
    assert ranking.rows[0].name == "c1"
    assert sum(row.weight or 0.0 for row in ranking.rows) == pytest.approx(1.0)
    assert {row.name: row.verdict for row in ranking.rows} == {
        "c0": "too narrow",
        "c1": "fits",
        "c2": "too wide",
        NONE_OF_THESE: None,
    }


def test_equal_candidates_share_equally_and_keep_their_order() -> None:
    ranking = ranked([3.0, 3.0], 18.0)
    assert [row.name for row in ranking.rows[:2]] == ["c0", "c1"]
    assert ranking.rows[0].weight == ranking.rows[1].weight


def test_another_candidate_does_not_shuffle_the_rest() -> None:
    few, more = by_name(ranked([2.0, 3.0], 16.0)), by_name(ranked([2.0, 3.0, 9.0], 16.0))
    assert few["c0"] is not None
    assert few["c1"] is not None
    assert more["c0"] is not None
    assert more["c1"] is not None
    assert few["c0"] / few["c1"] == pytest.approx(more["c0"] / more["c1"])


def test_none_of_these_wins_where_nothing_fits() -> None:
    assert ranked([1.0, 9.0], 18.0).rows[0].name == NONE_OF_THESE


def test_a_candidate_without_entries_has_no_width_and_is_named() -> None:
    space = Space(np.full(ROWS, 18.0), np.full(ROWS, FULL), np.full(ROWS, 0.2), np.full(ROWS, 0.1))
    proposals = [Proposal("a", (("11,11,11",),)), Proposal("rule", ((),))]
    ranking = rank(proposals, space, np.full(ROWS, 100.0), widths(), np.random.default_rng(0))
    assert ranking.rows[-1].name == "rule"
    assert ranking.rows[-1].weight is None
    missing = [note for note in ranking.notices if isinstance(note, Missing)]
    assert missing[0].result == f"ranking[{len(ranking.rows) - 1}]"


def test_no_space_at_all_leaves_everything_unweighed() -> None:
    ranking = ranked([2.0], -50.0)
    assert all(row.weight is None for row in ranking.rows)
    assert any(isinstance(note, Missing) and note.result == "ranking" for note in ranking.notices)


def test_weights_far_below_what_a_float_holds_are_still_compared() -> None:
    assert log_mean(np.array([-1000.0, -1000.0])) == pytest.approx(-1000.0)


def test_of_what_is_given_a_probability_that_share_is_true() -> None:
    # the truth is one of the list, or a content of any width: weights are its posterior probabilities
    needs = [2.0, 3.0, 4.0, 5.0]
    claimed, true = [], []
    for seed in range(400):
        rng = np.random.default_rng([3, seed])
        at = int(rng.integers(0, 5))
        space = np.exp(rng.uniform(np.log(FULL), np.log(100.0)))
        if at < 4:
            space = needs[at] * FULL * 1.2 * np.exp(rng.normal(0, 0.1))
        seen = space + rng.normal(0, 1.0)
        weights = by_name(ranked(needs, seen, 1.0, seed=seed))
        truth = NONE_OF_THESE if at == 4 else f"c{at}"
        claimed += [weight or 0.0 for weight in weights.values()]
        true += [name == truth for name in weights]
    claims, hits = np.array(claimed), np.array(true)
    for low, high in ((0.2, 0.4), (0.4, 0.6), (0.6, 0.8)):
        inside = (claims >= low) & (claims < high)
        limits = exact_limits(int(hits[inside].sum()), int(inside.sum()), 0.9997)
        assert limits[0] < claims[inside].mean() < limits[1]
