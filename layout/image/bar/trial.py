"""Something regular beside a line, measured; and whether it is regular enough to be divisions of a bar."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from layout.image.bar.guide import Guide
from layout.image.bar.lattice import Lattice, fit_lattice
from layout.image.bar.rows import LEAST_FOR_ROWS, OFF_PITCH, PRESENT, Seen
from layout.quantity import Floats

Kind = Literal["ticks", "blocks"]

LEAST: dict[Kind, int] = {"ticks": 6, "blocks": 4}
LEAST_SHARE: dict[Kind, float] = {"ticks": 0.7, "blocks": 0.75}
LEAST_ALIKE = 0.45
ALIKE = 0.6
"""How strong the edge of a block is at least, as a share of the usual one."""
MOST_SCATTER: dict[Kind, float] = {"ticks": 0.03, "blocks": 0.012}
"""How much divisions may scatter about their places, in pitches, besides so many pixels: ``SCATTER_PX``."""
SCATTER_PX = 0.06
LEAST_TALL: dict[Kind, float] = {"ticks": 0.2, "blocks": 0.04}
"""How far across divisions must reach, in pitches."""
MOST_CLUTTER: dict[Kind, float] = {"ticks": 0.35, "blocks": 1.0}
"""How many more lines or edges, as strong, may stand between the divisions, for each of them."""


@dataclass(frozen=True, eq=False)
class Trial:
    """Something regular, measured.

    Parameters
    ----------
    kind
        Ticks, or the edges of blocks.
    guide
        The line along the middle of the divisions.
    lattice
        Where the divisions should lie along it.
    number, places, there
        The divisions' numbers, their places along the guide in px, and whether each is there.
    band
        How far most divisions reach across, px.
    scatter, sd
        Robust standard deviation about the lattice, and each place's standard uncertainty, px.
    unlike
        By how much contrasts differ, as a share of the usual one.
    lengths
        How far each tick reaches across, px; zeros for blocks.
    """

    kind: Kind
    guide: Guide
    lattice: Lattice
    number: np.ndarray
    places: Floats
    there: np.ndarray
    band: float
    scatter: float
    sd: Floats
    unlike: float
    lengths: Floats

    @property
    def pitch(self) -> float:
        """Return the distance of neighbours in the middle."""
        return float(self.lattice.pitch(np.median(self.number)))

    @property
    def merit(self) -> float:
        """Return how good a find it is: how much is there, how well in place, how much alike."""
        in_place = np.exp(-((self.scatter / self.pitch / 0.03) ** 2))
        return float(self.there.sum() * self.there.mean() * in_place * np.exp(-((self.unlike / 0.4) ** 2)))

    def every(self, stride: int, first: int) -> Trial:
        """Return every so manieth of the divisions, counted from one of them."""
        kept = (self.number - first) % stride == 0
        lattice = self.lattice.renumbered(first)
        coarse = Lattice(lattice.a, lattice.b * stride, lattice.c * stride, lattice.spread)
        return replace(
            self,
            lattice=coarse,
            number=(self.number[kept] - first) // stride,
            places=self.places[kept],
            there=self.there[kept],
            sd=self.sd[kept],
            lengths=self.lengths[kept],
        )


def judge(kind: Kind, guide: Guide, seen: Seen, band: tuple[float, float], lengths: Floats) -> Trial | None:
    """Let pass what is regular enough that no texture is taken for it."""
    number, signs = seen.rows.number, seen.rows.signs
    there = np.isfinite(seen.places)
    if there.sum() < LEAST[kind]:
        return None
    usual = float(np.median(seen.contrast[there]))
    least = PRESENT if kind == "ticks" else ALIKE
    there &= (seen.contrast > least * usual) & (seen.contrast < usual / least)
    if there.sum() < LEAST[kind]:
        return None
    lattice = fit_lattice(number[there], seen.places[there], signs[there])
    misfit = np.where(there, seen.places - lattice.at(number, signs), np.inf)
    scatter = 1.4826 * float(np.median(np.abs(misfit[there])))
    scatter *= float(np.sqrt(there.sum() / max(there.sum() - (4 if signs.any() else 3), 1)))
    if there.sum() >= LEAST_FOR_ROWS:
        # where dirt has moved one, it counts as missing; among a few nobody can say which was moved
        there &= np.abs(misfit) < np.minimum(OFF_PITCH * seen.rows.pitch, 6 * scatter + 0.2)
    if there.sum() < LEAST[kind]:
        return None
    contrast = seen.contrast[there]
    first, last = np.flatnonzero(there)[[0, -1]]
    inner = slice(first, last + 1)
    tall, pitch = band[1] - band[0], float(seen.rows.pitch.mean())
    stands = (
        there[inner].mean() >= LEAST_SHARE[kind]
        and scatter < MOST_SCATTER[kind] * pitch + SCATTER_PX
        and (there[inner].all() or there.sum() > LEAST[kind] + 1)
        and tall >= max(LEAST_TALL[kind] * pitch, 3.0)
        and _alike(number[there], contrast, kind)
        and _clutter(seen, lattice, usual) <= MOST_CLUTTER[kind] * there.sum()
    )
    if not stands:
        return None
    return Trial(
        kind=kind,
        guide=guide.moved((band[0] + band[1]) / 2, 0.0),
        lattice=lattice,
        number=number[inner],
        places=(seen.places - lattice.spread * signs)[inner],
        there=there[inner],
        band=tall,
        scatter=scatter,
        sd=np.maximum(seen.sd[inner], max(scatter, 0.01)),
        unlike=1.4826 * float(np.median(np.abs(contrast - np.median(contrast))) / np.median(contrast)),
        lengths=lengths[inner],
    )


def _clutter(seen: Seen, lattice: Lattice, usual: float) -> int:
    """Return how many lines or edges as strong as the divisions stand between them."""
    places, strength = seen.rows.others
    exact = lattice.number(places)
    first, last = np.flatnonzero(np.isfinite(seen.places))[[0, -1]]
    within = (places > seen.places[first]) & (places < seen.places[last])
    return int((within & (strength > 0.6 * usual) & (np.abs(exact - np.round(exact)) > 0.25)).sum())


def _alike(number: np.ndarray, contrast: Floats, kind: Kind) -> bool:
    """Say whether no regular part of the divisions is much fainter than the rest: else every second is invented."""
    if kind == "blocks":
        return float(np.quantile(contrast, 0.2) / np.median(contrast)) > LEAST_ALIKE
    for period in (2, 3, 4):
        parts = [contrast[number % period == k] for k in range(period)]
        usual = [float(np.median(part)) for part in parts if len(part)]
        if min(usual) < LEAST_ALIKE * max(usual):
            return False
    return True
