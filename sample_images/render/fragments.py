"""The three fragments of an invented archive from an invented site, and the cameras before them."""

from __future__ import annotations

from dataclasses import dataclass

from sample_images.render.bar import Bar
from sample_images.render.camera import Camera
from sample_images.render.clay import Clay
from sample_images.render.scene import Ground
from sample_images.render.scribe import Hand
from sample_images.render.tables import Column, column, reciprocals
from sample_images.render.tablet import Fault, Spec

SITE = "Tell Umbarrat (an invented site)"


@dataclass(frozen=True)
class Proposal:
    """A candidate for the lost columns."""

    name: str
    columns: tuple[Column, ...]


@dataclass(frozen=True)
class Sitting:
    """How a fragment was photographed and measured.

    ``camera`` and ``bar`` are the same for each face that has them; ``errors`` are the standard
    uncertainties of bar height, lens distance, thickness and convexity, mm.
    """

    spec: Spec
    camera: Camera
    bar: Bar
    ground: Ground
    true: str
    proposals: tuple[Proposal, ...]
    plate: bool = False
    tilt_sd_deg: float = 1.0
    errors: tuple[float, float, float, float] = (0.8, 12.0, 0.4, 0.3)
    pointing_px: float = 1.2
    quality: int = 92


SIDES = [16, 18, 20, 24, 25, 27, 30, 32, 36, 40, 45, 48]
SQUARES = column("n squared", [n**2 for n in SIDES])
CUBES = column("n cubed", [n**3 for n in SIDES])
SUMS = column("n cubed and n squared", [n**3 + n**2 for n in SIDES])
NUMBERS, INVERSES = column("n", SIDES), reciprocals("1/n", SIDES)

LEFT_LOST = Sitting(
    Spec(
        stem="umbarrat-041",
        name="Umb 41",
        seed=41,
        columns=(NUMBERS, INVERSES, SQUARES, CUBES, SUMS),
        obverse_lines=len(SIDES),
        lost_side="left",
        lost_columns=2,
        hand=Hand(sign_width=6.1, pitch=7.7),
        thickness=25.0,
        margin=5.2,
        clay=Clay((0.50, 0.365, 0.235), (0.36, 0.255, 0.165), (0.30, 0.225, 0.16), salts=0.35),
        faults=(Fault(through=(1, (0.62, 0.42, 0.55)), run=7.5),),
    ),
    Camera((3648, 4864), 0.0322, 640.0, -9.5, (12.0, 10.0)),
    Bar("ticks", 50, (-14.0, 69.5), -9.5, 0.6),
    "black",
    "number and reciprocal",
    (
        Proposal("number alone", (NUMBERS,)),
        Proposal("reciprocal alone", (INVERSES,)),
        Proposal("number and reciprocal", (NUMBERS, INVERSES)),
        Proposal("number, its double, reciprocal", (NUMBERS, column("2n", [2 * n for n in SIDES]), INVERSES)),
        Proposal("reciprocal and its square", (INVERSES, reciprocals("1/n squared", SIDES, 2))),
    ),
)

PAIRS = [(12, 15), (15, 18), (16, 20), (18, 24), (20, 27), (24, 30), (25, 32), (27, 36), (30, 40), (32, 45)]
SUM_OF_SQUARES = column("a squared and b squared", [a**2 + b**2 for a, b in PAIRS])
PRODUCT = column("a times b", [a * b for a, b in PAIRS])
DIFFERENCE = column("b squared less a squared", [b**2 - a**2 for a, b in PAIRS])
SQUARE_OF_SUM = column("square of a and b together", [(a + b) ** 2 for a, b in PAIRS])

RIGHT_LOST = Sitting(
    Spec(
        stem="umbarrat-107",
        name="Umb 107",
        seed=107,
        columns=(
            column("a", [a for a, _ in PAIRS]),
            column("b", [b for _, b in PAIRS]),
            column("a squared", [a**2 for a, _ in PAIRS]),
            column("b squared", [b**2 for _, b in PAIRS]),
            SUM_OF_SQUARES,
            PRODUCT,
        ),
        obverse_lines=len(PAIRS),
        lost_side="right",
        lost_columns=2,
        hand=Hand(sign_width=6.3, pitch=8.4, ruled_lines=False),
        thickness=22.0,
        margin=4.6,
        clay=Clay((0.36, 0.295, 0.225), (0.25, 0.205, 0.16), (0.27, 0.225, 0.18), salts=0.7, cracks=7),
        faults=(Fault(through=(4, (0.62, 0.45, 0.30)), run=6.5),),
        exponents=(5.0, 4.4),
        head_and_foot=(8.5, 10.5),
    ),
    Camera((3648, 4560), 0.0335, 720.0, -20.8, (-12.0, 12.0)),
    Bar("blocks", 60, (-60.0, 73.0), -20.8, -0.9),
    "grey",
    "sum of the squares and product",
    (
        Proposal("product alone", (PRODUCT,)),
        Proposal("sum of the squares and product", (SUM_OF_SQUARES, PRODUCT)),
        Proposal("difference, sum of the squares, product", (DIFFERENCE, SUM_OF_SQUARES, PRODUCT)),
        Proposal("square of the sum alone", (SQUARE_OF_SUM,)),
        Proposal(
            "square of the sum and reciprocals",
            (
                SQUARE_OF_SUM,
                reciprocals("1/a", [a for a, _ in PAIRS]),
                reciprocals("1/b", [b for _, b in PAIRS]),
            ),
        ),
    ),
)

REGULAR = [15, 16, 18, 20, 24, 25, 27, 30, 32, 36, 40, 45, 48, 50, 54]
UPPER = REGULAR[:11]
INVERSE_SQUARES = reciprocals("1/n squared", UPPER, 2)

CORNER_LOST = Sitting(
    Spec(
        stem="umbarrat-212",
        name="Umb 212",
        seed=212,
        columns=(
            reciprocals("1/n squared", REGULAR, 2),
            reciprocals("1/n", REGULAR),
            column("n", REGULAR),
            column("n squared", [n**2 for n in REGULAR]),
            column("n cubed", [n**3 for n in REGULAR]),
        ),
        obverse_lines=11,
        lost_side="left",
        lost_columns=1,
        hand=Hand(sign_width=5.6, pitch=7.3),
        thickness=23.0,
        margin=4.8,
        clay=Clay((0.40, 0.275, 0.18), (0.27, 0.19, 0.135), (0.25, 0.185, 0.14), salts=0.5),
        faults=(
            Fault(through=(0, (0.70, 0.60, 0.45)), run=6.0),
            Fault(corner=(30.0, 34.0), run=5.0),
        ),
    ),
    Camera((2200, 2420), 0.0535, 680.0, -11.0, (14.0, 8.5)),
    Bar("ticks", 50, (-16.0, 61.0), -11.0, -0.4),
    "none",
    "square of the reciprocal",
    (
        Proposal("line number", (column("line", list(range(1, 12))),)),
        Proposal("square of the reciprocal", (INVERSE_SQUARES,)),
        Proposal(
            "line number and square of the reciprocal", (column("line", list(range(1, 12))), INVERSE_SQUARES)
        ),
        Proposal("reciprocal of the double", (reciprocals("1/2n", [2 * n for n in UPPER]),)),
        Proposal("cube of the reciprocal", (reciprocals("1/n cubed", UPPER, 3),)),
        Proposal("number and square of the reciprocal", (column("n", UPPER), INVERSE_SQUARES)),
    ),
    plate=True,
    tilt_sd_deg=1.0,
    pointing_px=0.9,
)

SITTINGS = (LEFT_LOST, RIGHT_LOST, CORNER_LOST)
