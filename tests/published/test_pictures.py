"""Real pictures that scikit-image ships, and what is known of them (read in the project's list of checks)."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from skimage import data

from layout.errors import CallError
from layout.image.bar.regular import agreement
from layout.image.sampling import luminance
from layout.image.ticks import find_divisions


def coloured(grey: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return a grey picture with three channels."""
    return np.repeat(grey[..., None], 3, axis=2)


def test_the_lines_of_a_scanned_page_repeat_as_they_are_known_to() -> None:
    # page.png, scanned text: line pitch 17.9 +- 0.2 px by autocorrelation (own measurement of the list)
    down = luminance(coloured(data.page())).mean(axis=1, dtype=np.float32)
    periods, alike = agreement(down[None], 1.0, 0.5)
    assert periods[alike[0].argmax()] == pytest.approx(17.9, abs=0.2)


def test_the_squares_of_a_drawn_chessboard_are_twenty_five_pixels() -> None:
    # chessboard_GRAY.png: pitch exactly 25 px
    found = find_divisions(coloured(data.checkerboard()), (3.0, 12.0), (196.0, 12.0))
    assert found.kind == "blocks"
    assert found.pitch_px == pytest.approx(25.0, abs=0.01)
    assert [mark.mm for mark in found.marks] == [float(n) for n in range(7)]


def test_a_page_of_text_is_not_taken_for_a_bar() -> None:
    with pytest.raises(CallError, match="no regular divisions"):
        find_divisions(coloured(data.page()), (130.0, 3.0), (130.0, 187.0))
