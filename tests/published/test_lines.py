"""Line fits against printed values."""

from __future__ import annotations

import numpy as np
import pytest

from layout.rulings import orthogonal_line

PEARSON_X = [0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4]
PEARSON_Y = [5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5]


def test_pearson_1901_unweighted_orthogonal_line() -> None:
    # Pearson 1901, data and line; read in test data of several open regression packages, not in the paper
    centroid, direction = orthogonal_line(np.column_stack([PEARSON_X, PEARSON_Y]))
    slope = direction[1] / direction[0]
    assert slope == pytest.approx(-0.54556, abs=0.5e-5)
    assert centroid[1] - slope * centroid[0] == pytest.approx(5.7840, abs=0.5e-4)
