"""The centre of a groove from the mean brightness across it.

Neither the dark flank nor the bright one is the centre, and a shadow's edge is not either. So section, light and
place of a groove are fitted to the whole profile, and what else would fit as well goes into the uncertainty.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from layout.image.groove.first_guess import Start
from layout.image.groove.section import (
    CENTRE,
    LOG_HALF,
    LOG_SLOPE,
    OF_ONE,
    PRIORS,
    Beside,
    contrast_of_sections,
)
from layout.quantity import Floats

Sides = NDArray[np.bool_]

MEAN, SD, LOW, HIGH = np.array(list(PRIORS.values())).T
STEP = np.array([0.02, 0.02, 0.02, 0.02, 0.02, 0.03, 0.03, 0.01, 0.01, 0.03, 0.02, 0.02, 0.02])
DAMPINGS = np.array([0.1, 1.0, 10.0, 100.0])
SCREENING = (("half", 3, 6, 4.0), ("half", 4, 4, 1.0), ("all", 5, 3, 0.5))
"""By which samples and rounds of descent solutions are screened: how many go on, and by which share (and 50) they
may be worse than the best."""
LAST_ROUNDS, AGAIN_ROUNDS = 6, 3
"""Rounds of descent of those that are left, and of a solution that is fitted again."""
SETTLED = 0.2
LENIENT, CAUTIOUS = 6.0, 3.0
"""Squared misfits are told apart so much less sharply, and variances so much enlarged: then errors are as large as
stated on pictures whose grooves are known."""
ALIKE, OWN = 1.0, 0.02
"""Over how many half widths (and two pixels) the noise of a profile is alike, and which share of it is not."""
UNEXPLAINED, FINELY = 0.006, 0.15
"""Share of the contrast that no section explains, and over how many half widths (and half a pixel) that is alike."""
FREE = 30.0
"""Variance of level and gradient, which are of no account."""


@dataclass(frozen=True, eq=False)
class Hollow:
    """A groove's place, section and light as fitted.

    Parameters
    ----------
    centre_px
        The centre, on the profile's axis.
    sd_px
        Its standard uncertainty; other solutions that fit nearly as well count.
    half_px
        Half the groove's width.
    parameters, mirrored, scale_px, beside
        What its contrast is computed from; with ``mirrored`` the lamp stands on the left.
    """

    centre_px: float
    sd_px: float
    half_px: float
    parameters: Floats
    mirrored: bool
    scale_px: float
    beside: Beside | None

    def contrast(self, across_px: Floats) -> Floats:
        """Return the contrast, shape (U,), on an even axis that is symmetric about 0."""
        return np.asarray(self._seen(self.parameters[None], across_px)[0], float)

    def modes(self, across_px: Floats) -> Floats:
        """Return how the contrast changes with place (per px), slope and width (per log), shape (3, U)."""
        which = [CENTRE, LOG_SLOPE, LOG_HALF]
        steps = np.zeros((6, len(self.parameters)))
        steps[[0, 1, 2], which], steps[[3, 4, 5], which] = STEP[which], -STEP[which]
        seen = self._seen(self.parameters + steps, across_px)
        units = 2 * STEP[which] * np.array([-self.scale_px if self.mirrored else self.scale_px, 1.0, 1.0])
        return np.asarray((seen[:3] - seen[3:]) / units[:, None], float)

    def again(self, centre_px: float) -> Start:
        """Return the solution as a start for another fit, on whose axis its centre lies there."""
        return Start(self.parameters[:OF_ONE], centre_px, self.half_px, self.mirrored, 0.0)

    def _seen(self, parameters: Floats, across_px: Floats) -> Floats:
        mirrored = np.full(len(parameters), self.mirrored)
        return np.asarray(
            contrast_of_sections(parameters, across_px, self.scale_px, mirrored, self.beside), float
        )


def fit_hollow(
    across_px: Floats, profile: Floats, sd: Floats, starts: list[Start], beside: Beside | None = None
) -> Hollow:
    """Fit section, light and place of a groove to the mean profile across it.

    Damped least squares (Levenberg 1944, Marquardt 1963) from several starts, with priors on what grooves and
    lamps are like; other solutions count in the uncertainty by how well they fit. The light is taken to be
    one lamp and an even sky, the groove to be symmetric: a groove drawn aslant is placed between its rims.

    Parameters
    ----------
    across_px
        Even axis, symmetric about 0, shape (U,).
    profile, sd
        Contrast against the level face, and its standard uncertainty, alike over part of the groove.
    starts
        Where to begin, with their lengths in px.
    beside
        A second groove.
    """
    scale = starts[0].half
    mirrored = np.array([start.mirrored for start in starts])
    values = np.tile(MEAN[: OF_ONE if beside is None else len(MEAN)], (len(starts), 1))
    for row, start in zip(values, starts, strict=True):
        row[:OF_ONE] = start.parameters
        row[CENTRE] = start.centre / scale * (-1 if start.mirrored else 1)
        row[LOG_HALF] = np.log(start.half / scale)
    fine = _problem(across_px, profile, sd, scale, beside)
    coarse = _problem(across_px[::2], profile[::2], sd[::2], scale, beside)
    for samples, rounds, most, worse in SCREENING if len(starts) > 1 else ():
        values, cost, _ = (fine if samples == "all" else coarse).descend(values, mirrored, rounds)
        kept = _unlike(values, mirrored, cost, most, worse)
        values, mirrored = values[kept], mirrored[kept]
    values, cost, normal = fine.descend(values, mirrored, LAST_ROUNDS if len(starts) > 1 else AGAIN_ROUNDS)
    return fine.summarise(values, mirrored, cost, normal)


def _unlike(values: Floats, mirrored: Sides, cost: Floats, most: int, worse: float) -> NDArray[np.intp]:
    """Return which solutions to go on with: the best, without those that have met."""
    kept: list[int] = []
    place = values[:, [CENTRE, LOG_HALF]]
    for at in np.argsort(cost):
        met = any(
            mirrored[at] == mirrored[one] and np.abs(place[at] - place[one]).max() < 0.04 for one in kept
        )
        if not met and cost[at] <= cost.min() * (1 + worse) + 50 and len(kept) < most:
            kept.append(int(at))
    return np.array(kept)


def _problem(
    across_px: Floats, profile: Floats, sd: Floats, scale_px: float, beside: Beside | None
) -> _Problem:
    """Return what is to be fitted."""
    whitening = _whitening(across_px, sd, scale_px, float(np.ptp(profile)))
    return _Problem(across_px, profile, whitening, scale_px, beside)


def _whitening(across_px: Floats, sd: Floats, scale_px: float, contrast: float) -> Floats:
    """Return the matrix (U, U) that turns what a profile leaves into independent numbers of variance 1.

    The clay's own marks are alike over part of a groove: they look like a groove's flank more than like its edges.
    """
    apart, share = np.abs(across_px[:, None] - across_px), across_px / across_px[-1]
    alike = (1 - OWN) * np.exp(-apart / (ALIKE * scale_px + 2)) + OWN * np.eye(len(sd))
    section = np.exp(-apart / (FINELY * scale_px + 0.5))
    level = FREE * (1 + np.outer(share, share))
    covariance = np.outer(sd, sd) * alike + (UNEXPLAINED * contrast) ** 2 * section + level
    return np.asarray(np.linalg.inv(np.linalg.cholesky(covariance)).T, float)


@dataclass(frozen=True, eq=False)
class _Problem:
    """What is fitted: the profile, what makes its errors independent, and the unit of length."""

    across_px: Floats
    profile: Floats
    whitening: Floats
    scale_px: float
    beside: Beside | None

    def residuals(self, values: Floats, mirrored: Sides) -> Floats:
        """Return what the light leaves unexplained, and what the priors do, shape (B, U + P)."""
        many = values.shape[1]
        seen = contrast_of_sections(values, self.across_px, self.scale_px, mirrored, self.beside)
        rest = (seen - self.profile) @ self.whitening
        return np.concatenate([rest, (values - MEAN[:many]) / SD[:many]], axis=1)

    def descend(self, values: Floats, mirrored: Sides, rounds: int) -> tuple[Floats, Floats, Floats]:
        """Return parameters after some rounds of damped least squares, their costs, and normal matrices."""
        batch, many = values.shape
        rows, damping = np.arange(batch), np.full(batch, 1e-2)
        rest = self.residuals(values, mirrored)
        cost, normal = (rest**2).sum(axis=1), np.empty((batch, many, many))
        for _ in range(rounds):
            slopes, normal = self._slopes(values, mirrored, rest)
            # several dampings are tried at once: the slopes are dear, a trial is not
            damp = damping[:, None] * DAMPINGS
            diagonal = np.einsum("bii->bi", normal)[:, None] * damp[..., None]
            damped = normal[:, None] + diagonal[..., None] * np.eye(many)
            change = np.linalg.solve(damped, (slopes @ rest[..., None])[:, None])[..., 0]
            tried = np.clip(values[:, None] - change, LOW[:many], HIGH[:many])
            new = self.residuals(tried.reshape(-1, many), np.repeat(mirrored, len(DAMPINGS)))
            new = new.reshape(batch, len(DAMPINGS), -1)
            best = (new**2).sum(axis=-1).argmin(axis=1)
            new_cost = (new[rows, best] ** 2).sum(axis=1)
            better = new_cost < cost
            values = np.where(better[:, None], tried[rows, best], values)
            rest = np.where(better[:, None], new[rows, best], rest)
            damping = np.where(better, damp[rows, best], 10 * damp[:, -1])
            gain = np.where(better, cost - new_cost, 0)
            cost = cost - gain
            if gain.max() < SETTLED:
                break
        return values, cost, normal

    def _slopes(self, values: Floats, mirrored: Sides, rest: Floats) -> tuple[Floats, Floats]:
        """Return how the residuals change with each parameter, shape (B, P, U + P), and the normal matrices."""
        batch, many = values.shape
        moved = (values[:, None] + STEP[:many] * np.eye(many)).reshape(-1, many)
        there = self.residuals(moved, np.repeat(mirrored, many)).reshape(batch, many, -1)
        slopes = (there - rest[:, None]) / STEP[:many, None]
        return slopes, slopes @ slopes.transpose(0, 2, 1)

    def summarise(self, values: Floats, mirrored: Sides, cost: Floats, normal: Floats) -> Hollow:
        """Return the best solution, and the spread of all."""
        # a family of sections is not every section, nor is the noise quite as assumed
        excess = max(1.0, float(cost.min()) / len(self.profile))
        weight = np.exp(-0.5 * (cost - cost.min()) / (excess * LENIENT))
        weight /= weight.sum()
        variance = excess * CAUTIOUS * np.linalg.inv(normal)[:, CENTRE, CENTRE] * self.scale_px**2
        centres = values[:, CENTRE] * self.scale_px * np.where(mirrored, -1, 1)
        best = int(weight.argmax())
        return Hollow(
            centre_px=float(centres[best]),
            sd_px=float(np.sqrt(weight @ (variance + (centres - centres[best]) ** 2))),
            half_px=float(np.exp(values[best, LOG_HALF]) * self.scale_px),
            parameters=values[best],
            mirrored=bool(mirrored[best]),
            scale_px=self.scale_px,
            beside=self.beside,
        )
