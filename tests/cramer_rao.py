"""The Cramer-Rao bound on the reconstructed width of a simulated superellipse.

No unbiased estimator that sees only the traced edge, in true millimetres, can have a smaller standard
deviation, even if it knows the covariance of the wobble (Cramer 1946, Rao 1945; with priors it is the
bound of Van Trees 1968; from memory).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tests.simulation.fragment import Simulated, TracedEdge
from tests.simulation.tablet import TREMOR_KIND, TREMOR_LENGTH
from tests.simulation.wobble import around

Floats = NDArray[np.float64]

# Parameters: centre x and y, log half-width to the right, log half-height, turn, log exponent above and
# below, left half over right half less one. The halves above and below are taken as known.
STEP = 1e-5
UNEQUAL_SD = 0.01
LOG_EXPONENT_SD = 0.5
LOG_ASPECT_SD = 0.5


def cramer_rao_width(simulated: Simulated, *, shape_priors: bool = True) -> float:
    """Return the bound on the standard deviation of the width between tangents, mm.

    Parameters
    ----------
    simulated
        Of the family ``superellipse``.
    shape_priors
        Count weak priors as information: the logarithm of each exponent has sd 0.5, that of width over
        height 0.5. That the halves of a hand-made tablet are equal to 1 % always counts.

    Raises
    ------
    ValueError
        If the outline is of another family.
    """
    edge = simulated.edge
    if edge.outline.exponents is None:
        message = f"needs a superellipse, has {simulated.truth['family']!r}"
        raise ValueError(message)
    truth, unequal_height = true_parameters(edge)
    jacobian = normal_displacements(edge, truth, unequal_height)
    information = jacobian.T @ np.linalg.solve(covariance(edge), jacobian)
    information[7, 7] += UNEQUAL_SD**-2
    if shape_priors:
        information[[5, 6], [5, 6]] += LOG_EXPONENT_SD**-2
        aspect = np.array([0, 0, 1.0, -1.0, 0, 0, 0, 1 / (2 + truth[7])])
        information += np.outer(aspect, aspect) / LOG_ASPECT_SD**2
    width = np.array([0, 0, width_of(truth), 0, 0, 0, 0, np.exp(truth[2])])
    return float(np.sqrt(width @ np.linalg.solve(information, width)))


def true_parameters(edge: TracedEdge) -> tuple[Floats, float]:
    """Return the true parameters, shape (8,), and the half above over the half below."""
    left, right, above, below = edge.outline.halves
    assert edge.outline.exponents is not None
    logarithms = np.log([right, (above + below) / 2])
    truth = np.array([0.0, 0.0, *logarithms, 0.0, *np.log(edge.outline.exponents), left / right - 1])
    return truth, above / below


def width_of(parameters: Floats) -> float:
    """Return the width between tangents, mm."""
    return float(np.exp(parameters[2]) * (2 + parameters[7]))


def covariance(edge: TracedEdge) -> Floats:
    """Return the covariance of the traced points' displacements along the normal, mm2."""
    apart = edge.arc[:, None] - edge.arc
    kind, sd, length = edge.wobble
    perimeter = edge.outline.perimeter
    return np.asarray(
        sd**2 * around(kind, apart, length, perimeter)
        + edge.tremor**2 * around(TREMOR_KIND, apart, TREMOR_LENGTH, perimeter)
        + edge.pointing**2 * np.eye(len(apart))
    )


def normal_displacements(edge: TracedEdge, parameters: Floats, unequal_height: float) -> Floats:
    """Return how far the outline moves along its normals for a unit of each parameter, shape (P, 8)."""
    moved = [
        level(edge.points, parameters + step, unequal_height)
        - level(edge.points, parameters - step, unequal_height)
        for step in STEP * np.eye(len(parameters))
    ]
    ahead = edge.points + STEP * edge.normals
    behind = edge.points - STEP * edge.normals
    slope = level(ahead, parameters, unequal_height) - level(behind, parameters, unequal_height)
    return np.asarray(-(np.array(moved) / slope).T)


def level(points: Floats, parameters: Floats, unequal_height: float) -> Floats:
    """Return (|x/a|^n + |y/b|^n)^(1/n), which is 1 on the outline."""
    centre, (log_right, log_height, turn, log_above, log_below, unequal) = parameters[:2], parameters[2:]
    rotation = np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    x, y = ((points - centre) @ rotation).T
    half_width = np.exp(log_right) * np.where(x < 0, 1 + unequal, 1.0)
    half_height = 2 * np.exp(log_height) / (1 + unequal_height) * np.where(y < 0, unequal_height, 1.0)
    n = np.exp(np.where(y < 0, log_above, log_below))
    return np.asarray((np.abs(x / half_width) ** n + np.abs(y / half_height) ** n) ** (1 / n))
