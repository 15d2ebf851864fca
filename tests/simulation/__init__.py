"""Simulated fragments with known truth, which share no model with the estimator.

The record is what a careful observer would have written down; the truth is what really was there.
"""

from tests.simulation.fragment import Simulated, simulate
from tests.simulation.shapes import FAMILIES
from tests.simulation.tablet import Settings
from tests.simulation.wobble import KINDS

__all__ = ["FAMILIES", "KINDS", "Settings", "Simulated", "simulate"]
