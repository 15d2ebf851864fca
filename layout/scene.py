"""The scene before the camera: what is known of it beforehand, what the sources of the scale add, and its draws.

The parameters are the logarithm of the millimetres per pixel, two tilts, the height of the face above the bar and
the logarithm of the lens's distance. Beforehand they are Gaussian, and each source observes one number, nearly
linear in them: afterwards they are Gaussian again.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from layout.frame import Plane, find_homography, shifted
from layout.notices import Caveat, warn
from layout.quantity import Floats
from layout.sources import Focal, Length

SMALL = np.array([1e-3, 1e-3, 1e-3, 0.1, 1e-3])
UNKNOWN = 10.0
"""Standard deviation of a logarithm of which nothing is known."""


@dataclass(frozen=True, eq=False)
class Scene:
    """What is known of the scene: mean (5,) and covariance (5, 5) of its parameters; a scanner has no perspective."""

    mean: Floats
    covariance: Floats
    scanner: bool

    def plane(self, parameters: Floats, height: Floats, centre_px: Floats, nominal: float) -> Plane:
        """Return the plane at a height, (N,), for rows of parameters, (N, 5)."""
        nearness = np.zeros(len(parameters)) if self.scanner else np.exp(-parameters[:, 4])
        homography = find_homography(np.exp(parameters[:, 0]), parameters[:, 1:3], nearness, height)
        return Plane(homography, nominal).seen_from(shifted(-centre_px))

    def expect(self, parameters: Floats, source: Length | Focal, centre_px: Floats) -> Floats:
        """Return the logarithm that rows of parameters (N, 5) expect of a source, (N,)."""
        if isinstance(source, Focal):
            return np.asarray(parameters[:, 4] - parameters[:, 0])
        height = parameters[:, 3] if source.on_face else np.zeros(len(parameters))
        ends = self.plane(parameters, height, centre_px, 1.0).map(source.ends_px)
        return np.asarray(np.log(np.hypot(*(ends[:, 1] - ends[:, 0]).T)))


def observed(source: Length | Focal) -> float:
    """Return the logarithm that a source observes: of a length in mm, or of a focal length in px."""
    return float(np.log(source.px if isinstance(source, Focal) else source.mm))


def draw_scene(
    scene: Scene,
    sources: Sequence[Length | Focal],
    centre_px: Floats,
    draws: int,
    rng: np.random.Generator,
) -> tuple[Floats, list[Caveat]]:
    """Condition the scene on all sources; return draws of its parameters, shape (N, 5).

    Sources that contradict one another (chi-squared above its 99th percentile) have their errors enlarged by the
    Birge ratio, and a warning says so. The draws are made to agree with the sources exactly, not only linearly.
    """
    z = rng.standard_normal((draws, 5))
    sd = np.sqrt(np.diag(scene.covariance))
    parameters = scene.mean + z @ _root(scene.covariance).T
    if not sources:
        return parameters, []
    step = np.where(sd > 0, np.minimum(sd, SMALL), 1e-3)
    around = scene.mean + np.vstack([np.zeros(5), np.diag(step), -np.diag(step)])
    seen = np.stack([scene.expect(around, source, centre_px) for source in sources])
    slopes = (seen[:, 1:6] - seen[:, 6:]) / (2 * step)
    surprise = np.array([observed(source) for source in sources]) - seen[:, 0]
    noise = np.array([source.log_sd for source in sources]) ** 2
    birge, notes = _agreement(sources, slopes, surprise, noise, scene)
    noise = noise * birge**2
    # Gaussian conditioning: K = P G' (G P G' + R)^-1
    gain = scene.covariance @ slopes.T @ np.linalg.inv(slopes @ scene.covariance @ slopes.T + np.diag(noise))
    # each row: a draw from beforehand, moved by its own misfit to the noisy sources (exact for Gaussians)
    errors = rng.standard_normal((draws, len(sources))) * np.sqrt(noise)
    parameters += (surprise + errors - (parameters - scene.mean) @ slopes.T) @ gain.T
    # what is not linear in the tilt: the rows' lengths must still be what the linear form says
    lengths = [k for k, source in enumerate(sources) if isinstance(source, Length)]
    if lengths:
        linear = (seen[:, 0] + (parameters - scene.mean) @ slopes.T)[:, lengths]
        exact = np.stack([scene.expect(parameters, sources[k], centre_px) for k in lengths], axis=1)
        weights = 1 / noise[lengths]
        parameters[:, 0] += ((linear - exact) * weights).sum(axis=1) / weights.sum()
    return parameters, notes


def _root(covariance: Floats) -> Floats:
    """Return a square root of a covariance, of which some variances may be zero."""
    if np.array_equal(covariance, np.diag(np.diag(covariance))):
        return np.diag(np.sqrt(np.diag(covariance)))
    values, vectors = np.linalg.eigh(covariance)
    return np.asarray(vectors * np.sqrt(np.clip(values, 0, None)))


def _agreement(
    sources: Sequence[Length | Focal],
    slopes: Floats,
    surprise: Floats,
    noise: Floats,
    scene: Scene,
) -> tuple[float, list[Caveat]]:
    """Return the Birge ratio of the sources (1 where they agree) and a warning where they do not."""
    dof = len(sources) - (scene.covariance[0, 0] > 1)
    if dof < 1:
        return 1.0, []
    total = slopes @ scene.covariance @ slopes.T + np.diag(noise)
    chi2 = float(surprise @ np.linalg.solve(total, surprise))
    # Wilson and Hilferty 1931: the cube root of chi-squared over its degrees of freedom is nearly normal
    z = ((chi2 / dof) ** (1 / 3) - (1 - 2 / (9 * dof))) / np.sqrt(2 / (9 * dof))
    if z < 2.33:
        return 1.0, []
    ratio = float(np.sqrt(chi2 / dof))
    names = ", ".join(source.name for source in sources)
    return ratio, [warn("scale.disagree", sources=names, ratio=f"{ratio:.1f}")]
