"""The Cramer-Rao bound: an efficient estimator that knows the covariance reaches it, and none is below."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import solve_triangular
from scipy.optimize import least_squares
from scipy.stats import chi2

from tests.cramer_rao import covariance, cramer_rao_width, level, true_parameters, width_of
from tests.simulation import Simulated, simulate


def fitted_width(simulated: Simulated, rng: np.random.Generator) -> float:
    """Fit the traced edge by generalised least squares, all covariances known."""
    edge = simulated.edge
    start, unequal_height = true_parameters(edge)
    pointing = edge.pointing * rng.standard_normal(len(edge.arc))
    traced = edge.points + (edge.displacement + pointing)[:, None] * edge.normals
    root = np.linalg.cholesky(covariance(edge))

    def whitened(parameters: np.ndarray) -> np.ndarray:
        gap = level(traced, parameters, unequal_height) - 1
        slope = level(traced + 0.5e-4 * edge.normals, parameters, unequal_height) - level(
            traced - 0.5e-4 * edge.normals, parameters, unequal_height
        )
        residual = solve_triangular(root, gap / (slope / 1e-4), lower=True)
        return np.append(residual, parameters[7] / 0.01)

    return float(width_of(least_squares(whitened, start).x))


def test_a_fit_that_knows_the_covariance_reaches_the_bound() -> None:
    rng = np.random.default_rng(1)
    squares = []
    for _ in range(60):
        # a wobble small enough for the fit to be linear
        simulated = simulate(rng, family="superellipse", lost=0.2, wobble_sd=0.1, wobble_kind="Matern 3/2")
        error = fitted_width(simulated, rng) - simulated.truth["width"]
        squares.append((error / cramer_rao_width(simulated, shape_priors=False)) ** 2)
    low, high = np.asarray(chi2.ppf([5e-4, 1 - 5e-4], len(squares)))
    assert low < np.sum(squares) < high


def test_bound_grows_with_what_is_lost() -> None:
    medians = []
    for lost in (0.15, 0.3, 0.45):
        rng = np.random.default_rng(2)
        bounds = [cramer_rao_width(simulate(rng, family="superellipse", lost=lost)) for _ in range(25)]
        medians.append(np.median(bounds))
    assert medians[0] < medians[1] < medians[2]


def test_priors_are_information() -> None:
    rng = np.random.default_rng(3)
    for _ in range(10):
        simulated = simulate(rng, family="superellipse", lost=0.4)
        assert cramer_rao_width(simulated) < cramer_rao_width(simulated, shape_priors=False)


def test_another_family_has_no_such_bound() -> None:
    simulated = simulate(np.random.default_rng(4), family="barrel")
    with pytest.raises(ValueError, match="needs a superellipse, has 'barrel'"):
        cramer_rao_width(simulated)
