"""Even divisions seen in perspective: which division is which, and where each should lie.

On a straight line a picture of evenly spaced divisions is u(n) = (a + b n) / (1 + c n): the projective map of
one dimension. Edges of blocks may besides stand to the left or the right of the division by the same amount,
according to whether brightness rises or falls there: that is how ink and halation spread.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from layout.quantity import Floats

NEAR, LIKELY = 0.12, 0.22
"""How far from its place a division may lie, in pitches: for a seed, and for what is added to it."""
ROBUST_TIMES = 4.0
"""What lies further off than so many standard deviations has no weight (Tukey's biweight)."""
LEAST_FOR_PERSPECTIVE = 6
ENOUGH_PX = 1e-3
MOST_ROUNDS = 25


@dataclass(frozen=True, eq=False)
class Lattice:
    """Where divisions should lie: a, b, c of the projective map and the shift of rising edges."""

    a: float
    b: float
    c: float = 0.0
    spread: float = 0.0

    def at(self, n: Floats | np.ndarray, sign: Floats | float = 0.0) -> Floats:
        """Return the place of divisions ``n``; ``sign`` is 1 where brightness rises, -1 where it falls."""
        return np.asarray((self.a + self.b * n) / (1 + self.c * n) + self.spread * sign)

    def number(self, u: Floats) -> Floats:
        """Return which division lies at places, between whole numbers where none does."""
        return np.asarray((u - self.a) / (self.b - self.c * u))

    def pitch(self, n: Floats | np.ndarray) -> Floats:
        """Return the distance between neighbours at divisions ``n``."""
        return np.asarray((self.b - self.a * self.c) / (1 + self.c * n) ** 2)

    def renumbered(self, first: float) -> Lattice:
        """Return the same places counted from another division."""
        shared = 1 + self.c * first
        return Lattice((self.a + self.b * first) / shared, self.b / shared, self.c / shared, self.spread)


@dataclass(frozen=True, eq=False)
class Numbered:
    """A lattice and, for each feature, the division that it is, where it is ``taken``."""

    lattice: Lattice
    number: np.ndarray
    taken: np.ndarray


def number_features(
    places: Floats, signs: Floats, period: float, known: Lattice | None = None
) -> Numbered | None:
    """Find the divisions among features.

    A seed of neighbours grows to both sides; what was taken decides where the next is looked for.

    Parameters
    ----------
    places
        Of all features, in order, shape (M,).
    signs
        For edges: 1 where brightness rises, -1 where it falls; rises and falls alternate. For lines: zeros.
    period
        The pitch about the seed, roughly.
    known
        Where divisions were found on a line nearby, in place of a seed.
    """
    if len(places) < 3:
        return None
    reach, middle = np.inf, 0.0
    lattice = known
    if lattice is None:
        seed = find_seed(places, signs, period)
        if seed is None:
            return None
        number, taken = seed
        reach, middle = 4.3 * period, float(places[taken].mean())
        lattice = fit_lattice(number[taken], places[taken], signs[taken], perspective=False)
    furthest = float(np.abs(places - middle).max())
    for _ in range(MOST_ROUNDS):
        within = np.abs(places - middle) <= reach
        number, taken = _assign(lattice, places, signs, within)
        if taken.sum() < 3:
            return None
        before, lattice = lattice, fit_lattice(number[taken], places[taken], signs[taken])
        if reach > furthest and abs(before.b - lattice.b) < 1e-3 * lattice.b:
            return Numbered(lattice, number, taken)
        reach *= 1.8
    return None


def find_seed(places: Floats, signs: Floats, period: float) -> tuple[np.ndarray, np.ndarray] | None:
    """Return numbers and members of the most regular neighbourhood, a few periods to both sides, if there is one."""
    if len(places) < 3:
        return None
    away = (places[None, :] - places[:, None]) / period
    number = np.round(away).astype(int)
    off = np.abs(away - number)
    member = (np.abs(away) <= 4.3) & (off < NEAR * np.maximum(1, np.abs(number) / 2))
    member &= signs[None, :] * signs[:, None] * (1 - 2 * (number % 2)) >= 0
    # the measure of a seed: how many of its places are taken, and how well
    merit = np.where(member, 1 - off, 0).sum(axis=1)
    best = int(merit.argmax())
    taken = _nearest_of_each(number[best], np.where(member[best], off[best], np.inf))
    return (number[best], taken) if taken.sum() >= 3 else None


def _assign(
    lattice: Lattice, places: Floats, signs: Floats, within: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Return each feature's number, and which features are divisions: the nearest to each place."""
    exact = lattice.number(places - lattice.spread * signs)
    number = np.round(exact).astype(int)
    off = np.where(within, np.abs(exact - number), np.inf)
    if signs.any():
        rising = signs[within] * (1 - 2 * (number[within] % 2))
        # which of the two parities rises is what most features say
        parity = 1.0 if rising.sum() >= 0 else -1.0
        off = np.where(signs * (1 - 2 * (number % 2)) == parity, off, np.inf)
    off = np.where(off < LIKELY, off, np.inf)
    return number, _nearest_of_each(number, off)


def _nearest_of_each(number: np.ndarray, off: Floats) -> np.ndarray:
    """Return which features are, of all with the same number, the nearest to their place."""
    order = np.lexsort((off, number))
    first = np.ones(len(order), bool)
    first[1:] = number[order][1:] != number[order][:-1]
    taken = np.zeros(len(number), bool)
    taken[order[first]] = True
    return taken & np.isfinite(off)


def fit_lattice(number: np.ndarray, places: Floats, signs: Floats, *, perspective: bool = True) -> Lattice:
    """Fit a lattice to numbered places by robust least squares.

    Tukey's biweight about a scale from the median deviation; perspective needs six places, the shift of edges
    four.
    """
    count = len(places)
    middle = float(np.median(number))
    n = number - middle
    span = max(1.0, float(np.abs(n).max()))
    edges = bool(signs.any()) and count >= 4
    free = [True, True, perspective and count >= LEAST_FOR_PERSPECTIVE, edges]
    slope = float((n * (places - places.mean())).sum() / ((n - n.mean()) ** 2).sum() * span)
    values = np.array([float(np.median(places - slope * n / span)), slope, 0.0, 0.0])
    tiny = 1e-9 * np.eye(sum(free))
    for _ in range(10):
        a, b, c, spread = values
        below = 1 + c * n / span
        seen = (a + b * n / span) / below
        misfit = places - seen - spread * signs
        columns = np.array([1 / below, n / span / below, -seen * n / span / below, signs])[free]
        weighted = columns * (_biweight(misfit) if count >= sum(free) + 3 else 1.0)
        change = np.linalg.solve(weighted @ columns.T + tiny, weighted @ misfit)
        values[free] += change
        if np.abs(change).max() < ENOUGH_PX:
            break
    a, b, c, spread = values
    lattice = Lattice(a, b / span, c / span, spread)
    return lattice.renumbered(-middle)


def _biweight(misfit: Floats) -> Floats:
    """Return Tukey's weights; what scatters little is not torn apart."""
    size = np.abs(misfit)
    scale = 1.4826 * float(np.partition(size, len(size) // 2)[len(size) // 2]) + 1e-3
    return np.asarray(np.clip(1 - (misfit / (ROBUST_TIMES * scale)) ** 2, 0, None) ** 2)
