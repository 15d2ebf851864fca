"""Rulings proposed on rendered faces, ruled and written on, whose rulings are known."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest

from layout.errors import CallError
from layout.image.photograph import Pixels
from layout.image.ruled import ProposedRuling, Runs, propose_rulings
from tests.pictures.clay import SECTIONS, Lamp, Points, Ruling, Wedge, hand_drawn, photograph

HEIGHT, WIDTH = 380, 520
FACE = np.array([[4.0, 6.0], [WIDTH - 7.0, 3.0], [WIDTH - 4.0, HEIGHT - 5.0], [6.0, HEIGHT - 4.0]])


@dataclass(frozen=True, eq=False)
class Written:
    """A face: its picture, rulings by direction, and their width."""

    pixels: Pixels
    rulings: dict[Runs, list[Ruling]]
    width: float

    def trace(self, runs: Runs, number: int) -> tuple[Runs, Points]:
        """Return a ruling as a hand traces it."""
        line = self.rulings[runs][number].line
        inside = line[((line > 12) & (line < [WIDTH - 12, HEIGHT - 12])).all(axis=1)]
        points = inside[:: max(1, len(inside) // 5)]
        return runs, points + np.random.default_rng(number).normal(0, 1, points.shape)

    def ruling_at(self, proposal: ProposedRuling) -> int | None:
        """Return the number of the ruling along which a proposal runs."""
        for number, ruling in enumerate(self.rulings[proposal.runs]):
            apart = proposal.points_px[::4, None] - ruling.line
            if np.median(np.hypot(*apart.T).min(axis=0)) < 0.5 * self.width:
                return number
        return None


@cache
def face(seed: int, slope: float = 0.6, columns: bool = True, lines: bool = True) -> Written:
    """Return a face with columns of uneven width and even lines, and signs in them."""
    rng = np.random.default_rng([41, seed])
    width, pitch = rng.uniform(5, 7), rng.uniform(44, 60)
    lamp = Lamp(90 * rng.integers(4) + rng.uniform(25, 65), rng.choice([25, 40]))
    section = SECTIONS[seed % 3]

    def ruled(start: tuple[float, float], end: tuple[float, float]) -> Ruling:
        depth = slope * width / 2 * np.exp(rng.normal(0, 0.2))
        return Ruling(hand_drawn(start, end, rng, stray=1, over=120), width, depth, section)

    across = np.cumsum(rng.uniform(70, 150, 6)) - 30
    down = np.arange(30, HEIGHT - 16, pitch) + rng.normal(0, 1, len(np.arange(30, HEIGHT - 16, pitch)))
    vertical = [ruled((x, -4), (x + rng.normal(0, 3), HEIGHT + 4)) for x in across[across < WIDTH - 30]]
    horizontal = [ruled((-4, y), (WIDTH + 4, y + rng.normal(0, 3))) for y in down]
    signs = [
        Wedge(
            (x, y + 0.25 * pitch + rng.normal(0, 1)),
            0.14 * pitch,
            0.5 * pitch,
            rng.choice([90.0, 90.0, 10.0]) + rng.normal(0, 5),
        )
        for y in down
        for x in np.cumsum(rng.uniform(9, 26, 30))
        if x < WIDTH and rng.random() < 0.8
    ]
    rulings: dict[Runs, list[Ruling]] = {
        "vertical": vertical if columns else [],
        "horizontal": horizontal if lines else [],
    }
    everything = rulings["vertical"] + rulings["horizontal"]
    pixels = photograph((HEIGHT, WIDTH), everything, lamp, rng, wedges=signs)
    return Written(pixels, rulings, width)


SEEDS = range(4)


@cache
def proposed(seed: int) -> tuple[ProposedRuling, ...]:
    """Return what is proposed when one ruling of each direction is traced."""
    given = [face(seed).trace("vertical", 1), face(seed).trace("horizontal", 2)]
    return tuple(propose_rulings(face(seed).pixels, given, FACE))


def test_the_other_rulings_are_proposed() -> None:
    there, found = 0, 0
    for seed in SEEDS:
        hit = {(each.runs, face(seed).ruling_at(each)) for each in proposed(seed)}
        others = {(runs, at) for runs, lines in face(seed).rulings.items() for at in range(len(lines))}
        others -= {("vertical", 1), ("horizontal", 2)}
        there, found = there + len(others), found + len(others & hit)
    assert there > 30
    assert found >= 0.95 * there


def test_a_traced_ruling_is_not_proposed_again() -> None:
    for seed in SEEDS:
        hit = [(each.runs, face(seed).ruling_at(each)) for each in proposed(seed)]
        assert ("vertical", 1) not in hit
        assert ("horizontal", 2) not in hit


def test_no_ruling_is_proposed_twice() -> None:
    for seed in SEEDS:
        hit = [(each.runs, face(seed).ruling_at(each)) for each in proposed(seed)]
        known = [one for one in hit if one[1] is not None]
        assert len(known) == len(set(known))


def test_confidence_is_about_the_share_of_rulings() -> None:
    # faint rulings on rough clay as well as deep ones: both sure and doubtful proposals
    confidence, right = [], []
    for seed, slope in [*((seed, 0.6) for seed in SEEDS), *((seed, 0.16) for seed in range(4, 7))]:
        one = face(seed, slope)
        given = [one.trace("vertical", 1), one.trace("horizontal", 2)]
        for each in proposed(seed) if slope == 0.6 else propose_rulings(one.pixels, given, FACE):
            assert 0 < each.confidence < 1
            confidence.append(each.confidence)
            right.append(one.ruling_at(each) is not None)
    sure = np.array(confidence) > 0.95
    assert np.mean(np.array(right)[sure]) > 0.97
    assert abs(np.mean(confidence) - np.mean(right)) < 0.05


def test_proposals_lie_on_the_groove() -> None:
    for seed in SEEDS:
        for each in proposed(seed):
            number = face(seed).ruling_at(each)
            if number is not None:
                line = face(seed).rulings[each.runs][number].line
                apart = np.hypot(*(each.points_px[2:-2, None] - line).T).min(axis=0)
                # the dense line has a point at every pixel: half of one is as near as points come
                assert np.sqrt(np.mean(apart**2)) < np.hypot(0.5, 0.5)


def test_proposals_stay_on_the_face_and_come_in_order() -> None:
    upper = np.array([[4.0, 4.0], [WIDTH - 4.0, 4.0], [WIDTH - 60.0, 250.0], [40.0, 240.0]])
    one = face(0)
    given = [one.trace("vertical", 1), one.trace("horizontal", 2)]
    found = propose_rulings(one.pixels, given, upper)
    assert found
    for runs, axis in (("vertical", 0), ("horizontal", 1)):
        middles = [each.points_px[len(each.points_px) // 2, axis] for each in found if each.runs == runs]
        assert middles == sorted(middles)
    ends = np.concatenate([each.points_px for each in found])
    assert ends[:, 1].max() < 250
    assert ends.min() > 0


def test_a_direction_of_which_nothing_is_traced_is_left_alone() -> None:
    found = propose_rulings(face(1).pixels, [face(1).trace("vertical", 1)], FACE)
    assert {each.runs for each in found} == {"vertical"}


def test_nothing_is_proposed_on_a_face_without_grooves() -> None:
    for seed in range(20, 26):
        bare = face(seed, columns=False, lines=False)
        traces: list[tuple[Runs, Points]] = [
            ("vertical", np.array([[200.0, 20.0], [202.0, 360.0]])),
            ("horizontal", np.array([[20.0, 150.0], [500.0, 152.0]])),
        ]
        assert propose_rulings(bare.pixels, traces, FACE) == []


def test_rows_of_signs_are_not_proposed() -> None:
    wrong = 0
    for seed in range(30, 33):
        columns = face(seed, lines=False)
        row = np.array([[20.0, 150.0], [500.0, 152.0]])
        given: list[tuple[Runs, Points]] = [columns.trace("vertical", 1), ("horizontal", row)]
        found = propose_rulings(columns.pixels, given, FACE)
        wrong += sum(each.runs == "horizontal" for each in found)
    assert wrong == 0


def test_without_traces_nothing_is_proposed() -> None:
    assert propose_rulings(face(0).pixels, [], FACE) == []


@pytest.mark.parametrize("outline", [np.empty((0, 2)), FACE[:2], np.full((4, 2), np.nan), np.zeros(6)])
def test_the_face_needs_an_outline(outline: Points) -> None:
    with pytest.raises(CallError, match="three finite points or more"):
        propose_rulings(face(0).pixels, [face(0).trace("vertical", 1)], outline)


def test_a_trace_needs_two_points() -> None:
    with pytest.raises(CallError, match="two points or more that are apart"):
        propose_rulings(face(0).pixels, [("vertical", np.array([[5.0, 5.0]]))], FACE)


@pytest.mark.parametrize("size", [0.5, 5.0, 30.0, 900.0])
def test_faces_may_be_tiny_or_reach_beyond_the_picture(size: float) -> None:
    square = np.array([[200.0, 150.0], [200 + size, 150.0], [200 + size, 150 + size], [200.0, 150 + size]])
    for each in propose_rulings(face(2).pixels, [face(2).trace("vertical", 1)], square):
        assert each.runs == "vertical"
        assert size > 30
