"""How what a hand made or traced wobbles: correlations along it (Rasmussen and Williams 2006, eq. 4.17)."""

from __future__ import annotations

import numpy as np

from layout.quantity import Floats


def matern32(ratio: Floats) -> Floats:
    """Return the Matern 3/2 correlation at a distance over the correlation length."""
    s = np.sqrt(3) * ratio
    return np.asarray((1 + s) * np.exp(-s))


def matern52(ratio: Floats) -> Floats:
    """Return the Matern 5/2 correlation at a distance over the correlation length."""
    s = np.sqrt(5) * ratio
    return np.asarray((1 + s + s**2 / 3) * np.exp(-s))
