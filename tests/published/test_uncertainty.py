"""Propagation by joint draws against printed values."""

from __future__ import annotations

import numpy as np
import pytest

from layout.quantity import Quantity

DRAWS = 400_000


def test_four_normals() -> None:
    # JCGM 101:2008 9.2.2: the sum of four standard normals, 95 % interval +-3.92 (read in a secondary source)
    summary = Quantity("1", np.random.default_rng(1).standard_normal((4, DRAWS)).sum(axis=0)).summary()
    assert (summary.low, summary.high) == pytest.approx((-3.92, 3.92), abs=0.02)
    assert summary.sd == pytest.approx(2.0, abs=0.01)


def test_four_rectangles() -> None:
    # JCGM 101:2008 9.2.3: of four rectangular distributions of sd 1, +-3.88, exactly 3.8794
    half = np.sqrt(3)
    summary = Quantity("1", np.random.default_rng(2).uniform(-half, half, (4, DRAWS)).sum(axis=0)).summary()
    assert (summary.low, summary.high) == pytest.approx((-3.8794, 3.8794), abs=0.02)
