"""The contour of a fragment on a plain ground, from one click: a proposal that a person then judges.

1. On a reduced picture the ground is what is smooth and joined with the rim: shadows fade into it and belong to it,
   while clay ends at a step of brightness or colour all around. So that a weak step here and there is no leak, the
   ground is entered by a disc, not by single pixels (trapped-ball segmentation; Zhang et al. 2009), and nothing that
   is brighter than the lit ground, or not of its colour, is entered at all.
2. Coarse to fine, the ring is drawn to the best step across it, all its points together (dynamic programming).
3. On the full picture a blurred step is fitted to each profile in linear light, where blur is symmetric.

Assumed: the ground is plain, shows along most of the rim and fades smoothly (vignetting, shadows); a shadow is darker
than the ground, nearly of its colour, and fades somewhere along its rim. Where clay and ground agree in brightness and
in colour nothing is seen, and the neighbours decide; too much of that is refused, and so is clay without a hue of its
own beside its shadow. What no rule here sees: a shadow with a sharp rim all around, of clay that has no hue either.
"""

from __future__ import annotations

import contextlib
from dataclasses import dataclass

import numpy as np

from layout.errors import CallError
from layout.image.photograph import Pixels
from layout.image.silhouette.edge import STEP_PX, approach, sharpen
from layout.image.silhouette.ground import Plate, part_ground, refusal
from layout.image.silhouette.ring import cut_at_corners, evenly, smoothed
from layout.quantity import Floats

SMALLEST_CELLS = 24
"""What is shorter is a crumb, or print."""
LEAST_PLAIN = 0.85
"""A contour of which less is clear is refused."""


@dataclass(frozen=True, eq=False)
class Contour:
    """The contour of one fragment on a photograph, pixels.

    Attributes
    ----------
    points_px
        Shape (P, 2): a closed ring, clockwise as seen, about ``STEP_PX`` apart, the first not repeated; it begins
        at a corner if there is one.
    sd_px
        Standard uncertainty of one point across the contour, as an average around it. Points nearer than some 5 px
        to each other err together.
    pieces
        The ring cut at its corners, each of shape (K, 2), in order; one after the other they are the ring.
    plain
        Share of the contour, from 0 to 1, where ground and clay are clearly told apart.
    """

    points_px: Floats
    sd_px: float
    pieces: tuple[Floats, ...]
    plain: float


def find_contour(pixels: Pixels, at_px: tuple[float, float]) -> Contour:
    """Find the contour of the fragment that was clicked on.

    It is the silhouette against the ground: where a break slopes outwards below the face, the foot of the slope.

    Parameters
    ----------
    pixels
        Shape (height, width, 3), sRGB of 8 or 16 bits.
    at_px
        A point on the clay, (x, y).

    Raises
    ------
    CallError
        If the click is outside the photograph or on the ground, if the ground is not plain, if the fragment runs
        over the rim, or if less than ``LEAST_PLAIN`` of its contour can be told from the ground.
    """
    height, width = pixels.shape[:2]
    if not (-0.5 <= at_px[0] <= width - 0.5 and -0.5 <= at_px[1] <= height - 0.5):
        came = f"came {at_px!r} on a photograph of {width} x {height} px"
        raise refusal(came, needed="a click on the clay", mend="click within it")
    plate = part_ground(pixels)
    thing = plate.thing_at(at_px)
    if not thing:
        came = f"at {at_px!r} there is ground or nothing that stands out from it"
        raise refusal(came, needed="a click on the clay", mend="click on the fragment, or trace by hand")
    picture = plate.picture_at(thing)
    if picture:
        corner = np.array([picture[1].start, picture[0].start])
        with contextlib.suppress(CallError):
            return moved(find_contour(pixels[picture], (at_px[0] - corner[0], at_px[1] - corner[1])), corner)
    return trace(pixels, plate, thing)


def moved(contour: Contour, by_px: Floats) -> Contour:
    """Return a contour moved on the photograph."""
    pieces = tuple(piece + by_px for piece in contour.pieces)
    return Contour(contour.points_px + by_px, contour.sd_px, pieces, contour.plain)


def trace(pixels: Pixels, plate: Plate, thing: int) -> Contour:
    """Return the contour of one thing of a plate.

    Raises
    ------
    CallError
        If the thing is tiny, runs over the rim, or cannot be told from the ground along its contour.
    """
    height, width = pixels.shape[:2]
    ring = plate.ring_of(thing)
    low, high = ring.min(axis=0), ring.max(axis=0)
    near = 2 * plate.px_per_cell
    if (low < near).any() or (high > [width - 1, height - 1] - near).any():
        came = "this one runs over the rim of the photograph"
        raise refusal(came, needed="ground all around the fragment", mend="trace it by hand")
    if (high - low).max() < SMALLEST_CELLS * plate.px_per_cell.max():
        came = f"here is a speck of {(high - low).max():.0f} px"
        raise refusal(
            came, needed="a fragment that stands out", mend="click on the fragment, or trace by hand"
        )
    doubt = plate.doubt_along(ring)
    ring = approach(pixels, ring, float(plate.px_per_cell.mean()))
    for _ in range(3):
        ring, sd_px, plain = sharpen(pixels, ring)
    plain = min(plain, 1 - doubt)
    if plain < LEAST_PLAIN:
        came = f"here it does so along {plain:.0%} of the contour"
        raise refusal(
            came, needed="clay that stands out from a plain ground all around", mend="trace it by hand"
        )
    ring, pieces = cut_at_corners(evenly(smoothed(ring, 0.6), STEP_PX))
    return Contour(ring, sd_px, pieces, plain)
