"""What gives a view its scale: bars and flat targets, lengths known on the object, the focal length."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from layout.notices import Assumption, assume
from layout.quantity import Floats

if TYPE_CHECKING:
    from layout.record.model import Known, Mark, View

ASSUMED_POINTING_PX = 1.0
ASSUMED_BAR_SD = 0.001
"""How well a bar's own divisions are printed, as a share of their distance: matters once they are found to 0.1 px."""
POINTING_DOF = 10.0
"""How many degrees of freedom a stated pointing error is worth against the scatter that is seen."""


@dataclass(frozen=True, eq=False)
class Flat:
    """The marks of one bar or flat target.

    Parameters
    ----------
    name
        As the record has it.
    at_px
        Where they are seen, shape (P, 2).
    mm
        Where they lie on the bar, whose second coordinate is zero, or on the target, shape (P, 2).
    sd_px
        Standard uncertainty of one coordinate in the picture.
    found
        Whether the marks were found by a program, which says how well.
    """

    name: str
    at_px: Floats
    mm: Floats
    sd_px: float
    found: bool

    @property
    def spans_a_plane(self) -> bool:
        """Whether there are four marks or more that do not lie on a line."""
        away = self.mm - self.mm.mean(axis=0)
        return len(away) >= 4 and float(np.linalg.svd(away, compute_uv=False)[1]) > 1e-6

    @property
    def direction(self) -> Floats:
        """Return the unit direction, in the picture, in which the marks are spread furthest."""
        away = self.at_px - self.at_px.mean(axis=0)
        return np.asarray(np.linalg.svd(away, full_matrices=False)[2][0])


@dataclass(frozen=True, eq=False)
class Similarity:
    """A similarity from a flat target to the picture.

    ``turned`` is the complex number that turns and stretches mm to px, ``shift`` where the marks' middle is seen,
    ``mirrored`` whether Y runs against y, ``chi2`` the sum of squared misfits over the marks' variance.
    """

    turned: complex
    shift: complex
    mirrored: bool
    chi2: float


@dataclass(frozen=True, eq=False)
class Length:
    """A known length in a picture: a source of the scale.

    ``ends_px`` has shape (2, 2); ``log_sd`` is the relative standard uncertainty of the millimetres per
    pixel that the length gives; it lies in the plane of the bar, or of the face (``on_face``).
    """

    name: str
    ends_px: Floats
    mm: float
    log_sd: float
    on_face: bool


@dataclass(frozen=True)
class Focal:
    """The focal length in pixels, which ties the distance of the lens to the scale."""

    name: str
    px: float
    log_sd: float


def flats_of(view: View, pointing_px: float) -> list[Flat]:
    """Collect a view's bars and flat targets of two marks or more."""
    bars: dict[str, list[Mark]] = {}
    for mark in view.scale.marks:
        bars.setdefault(mark.bar, []).append(mark)
    return [_flat(name, marks, pointing_px) for name, marks in bars.items() if len(marks) > 1]


def _flat(name: str, marks: list[Mark], pointing_px: float) -> Flat:
    """Return marks as arrays."""
    sd = np.array([pointing_px if mark.sd_px is None else mark.sd_px for mark in marks])
    return Flat(
        name=name,
        at_px=np.array([mark.at for mark in marks]),
        mm=np.array([mark.mm if isinstance(mark.mm, tuple) else (mark.mm, 0.0) for mark in marks]),
        sd_px=float(np.sqrt(np.mean(sd**2))),
        found=all(mark.sd_px is not None for mark in marks),
    )


def fit_similarity(flat: Flat) -> Similarity:
    """Fit marks by a similarity: least squares of z = A + B m with complex z (pixels) and m (millimetres)."""
    z = flat.at_px @ [1, 1j]
    fits = []
    for mirrored in (False, True):  # a target's Y may run up or down
        away = _complex(flat, mirrored)
        turned = complex((away.conj() * (z - z.mean())).sum() / (np.abs(away) ** 2).sum())
        rest = float((np.abs(z - z.mean() - turned * away) ** 2).sum())
        fits.append(Similarity(turned, complex(z.mean()), mirrored, rest / flat.sd_px**2))
    return min(fits, key=lambda fit: fit.chi2)


def _complex(flat: Flat, mirrored: bool) -> np.ndarray:
    """Return the marks' millimetres from their middle as complex numbers."""
    m = flat.mm @ [1, -1j if mirrored else 1j]
    return np.asarray(m - m.mean())


def fit_bar(flat: Flat) -> Length:
    """Take a bar or flat target, seen square, as one length: that between its outermost marks.

    The stated pointing error counts as ten degrees of freedom against the scatter of the marks.
    """
    fit = fit_similarity(flat)
    m = _complex(flat, fit.mirrored)
    spread = float((np.abs(m) ** 2).sum())
    dof = 2 * len(m) - 4
    variance = flat.sd_px**2 * (POINTING_DOF + fit.chi2) / (POINTING_DOF + dof)
    far = int(np.abs(m).argmax())
    near = int(np.abs(m - m[far]).argmax())
    ends = fit.shift + fit.turned * m[[near, far]]
    log_sd = float(np.sqrt(variance / spread) / abs(fit.turned))
    return Length(
        name=f"bar {flat.name!r}",
        ends_px=np.stack([ends.real, ends.imag], axis=-1),
        mm=float(np.abs(m[far] - m[near])),
        log_sd=float(np.hypot(log_sd, ASSUMED_BAR_SD)) if flat.found else log_sd,
        on_face=False,
    )


def fit_known(known: Known, pointing_px: float) -> Length:
    """Take a length that was measured on the object as a source of the scale, in the plane of the face."""
    ends = np.array([known.from_, known.to])
    span_px = float(np.hypot(*(ends[1] - ends[0])))
    log_sd = float(np.hypot(known.sd / known.mm, np.sqrt(2) * pointing_px / span_px))
    return Length(known.source or "known length", ends, known.mm, log_sd, on_face=True)


def pointing_of(view: View) -> tuple[float, list[Assumption]]:
    """Return the standard uncertainty of one traced point in pixels, assumed where nobody gave it."""
    if view.pointing_px is not None:
        return view.pointing_px, []
    return ASSUMED_POINTING_PX, [
        assume("scale.pointing", f"{view.face}: pointing_px", px=ASSUMED_POINTING_PX),
    ]
