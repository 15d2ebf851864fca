"""The scale card: what stands where on it, in millimetres, and the card as SVG and as PDF.

One list of blocks, lines and texts is set twice, so that both forms show the same. The markers are of the
AprilTag family 36h11 (Olson 2011), which any two codes of, and any code and itself turned, differ in eleven of
36 bits: no ornament is taken for one.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from html import escape

import numpy as np
from numpy.typing import NDArray

from layout.quantity import Floats

WIDTH, HEIGHT = 144.0, 60.0
CHECK_MM = 100.0
"""What the check line measures when the printer kept the scale."""
MARKER = 14.0
CELLS = 8
"""A marker is eight cells each way: six of code, and a black border of one."""
RULE_FROM = 22.0
INSET = 3.5

# of the family, those whose border has the most black beside it, so that its edges stand free
_PLACES = {
    227: (INSET, INSET),
    289: (WIDTH - INSET - MARKER, INSET),
    334: (INSET, HEIGHT - INSET - MARKER),
    487: (WIDTH - INSET - MARKER, HEIGHT - INSET - MARKER),
}

CARD: dict[int, Floats] = {
    number: np.array([[x, y], [x + MARKER, y], [x + MARKER, y + MARKER], [x, y + MARKER]])
    for number, (x, y) in _PLACES.items()
}
"""Of each marker the corners of its black border, mm: upper left, upper right, lower right, lower left."""

PAGE = (210.0, 297.0)
CARD_AT = ((PAGE[0] - WIDTH) / 2, 34.0)
POINTS_PER_MM = 72 / 25.4
DIGIT_WIDTH = 0.556
"""Of a figure in Helvetica, in units of the letter's size."""

Boxes = tuple[tuple[float, float, float, float], ...]


@dataclass(frozen=True)
class Blocks:
    """Black rectangles (x, y, width, height), filled as one shape, so that no seam shows between them."""

    boxes: Boxes


@dataclass(frozen=True)
class Line:
    """A black line from (x1, y1) to (x2, y2)."""

    ends: tuple[float, float, float, float]
    width: float


@dataclass(frozen=True)
class Text:
    """A line of text whose baseline begins at (x, y), or is centred on x if it consists of figures."""

    x: float
    y: float
    size: float
    text: str
    bold: bool = False
    centred: bool = False


Part = Blocks | Line | Text


def draw_card() -> str:
    """Return the card as SVG, true to scale: 144 mm by 60 mm."""
    body = "\n".join(_svg(part) for part in _card())
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" width="{WIDTH:g}mm" height="{HEIGHT:g}mm" '
        f'viewBox="0 0 {WIDTH:g} {HEIGHT:g}" font-family="Helvetica, Arial, \'Liberation Sans\', sans-serif">\n'
        "<title>Scale card: print at 100 %</title>\n"
        f'<rect width="{WIDTH:g}" height="{HEIGHT:g}" fill="#fff"/>\n'
        f"{body}\n</svg>\n"
    )


def card_pdf() -> bytes:
    """Return the card as a PDF of one A4 page, with marks for cutting and how to print and use it.

    The file asks the viewer not to scale it; whether the printer obeyed, the check line tells.
    """
    content = "\n".join(_pdf(part) for part in _page())
    # Windows' western letters are what the two built-in fonts are set up for
    stream = content.encode("cp1252")
    width, height = (f"{side * POINTS_PER_MM:.3f}" for side in PAGE)
    font = "<< /Type /Font /Subtype /Type1 /BaseFont /{} /Encoding /WinAnsiEncoding >>"
    objects = [
        b"<< /Type /Catalog /Pages 2 0 R /ViewerPreferences << /PrintScaling /None >> >>",
        b"<< /Type /Pages /Kids [3 0 R] /Count 1 >>",
        f"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 {width} {height}] /Contents 4 0 R "
        "/Resources << /Font << /Plain 5 0 R /Bold 6 0 R >> >> >>".encode("ascii"),
        b"<< /Length %d >>\nstream\n%b\nendstream" % (len(stream), stream),
        font.format("Helvetica").encode("ascii"),
        font.format("Helvetica-Bold").encode("ascii"),
        b"<< /Title (Scale card: print at 100 %) >>",
    ]
    return _file(objects)


def _file(objects: list[bytes]) -> bytes:
    """Put numbered objects into a PDF: the first is the catalogue, the last says what the file is."""
    data = b"%PDF-1.6\n%\xe2\xe3\xcf\xd3\n"
    places = []
    for number, body in enumerate(objects, start=1):
        places.append(len(data))
        data += b"%d 0 obj\n%b\nendobj\n" % (number, body)
    start, count = len(data), len(objects) + 1
    table = b"".join(b"%010d 00000 n \n" % place for place in places)
    data += b"xref\n0 %d\n0000000000 65535 f \n%b" % (count, table)
    trailer = b"<< /Size %d /Root 1 0 R /Info %d 0 R >>" % (count, count - 1)
    return data + b"trailer\n%b\nstartxref\n%d\n%%%%EOF\n" % (trailer, start)


def _card() -> list[Part]:
    """Return all that stands on the card."""
    frame = [
        (0.0, 0.0, WIDTH, 0.0),
        (WIDTH, 0.0, WIDTH, HEIGHT),
        (WIDTH, HEIGHT, 0.0, HEIGHT),
        (0.0, HEIGHT, 0.0, 0.0),
    ]
    left = RULE_FROM
    return [
        *(Line(ends, 0.15) for ends in frame),
        *(Blocks(_marker_boxes(number)) for number in CARD),
        *_rule(),
        Text(left, 17.0, 4.4, "Scale card", bold=True),
        Text(left, 23.6, 3.2, "Never lay it on the clay. Never touch the object with it.", bold=True),
        Text(left, 28.2, 2.8, "It stands beside the object, level with the inscribed face."),
        Text(left, 32.2, 2.8, "The institution’s conservators and their rules decide."),
        Text(left, 38.4, 2.8, "Check the print with a ruler before use:", bold=True),
        Text(left, 42.4, 2.8, "this line 100.0 mm, the card 60.0 mm high, each within 0.3 mm."),
        Text(left, 46.4, 2.8, "If not, print again at 100 %, or enter what you measured."),
        *_check_line(),
        Text(left, 57.2, 1.9, f"AprilTag 36h11: {', '.join(str(number) for number in CARD)}; {MARKER:g} mm"),
    ]


def _page() -> list[Part]:
    """Return all that stands on the page: the card, marks for cutting it out, and how to go on."""
    x, y = CARD_AT
    notes = (
        "1  Print this page at 100 % (“actual size”), not fitted to the paper, and on matt paper.",
        "2  Measure the check line and the height of the card with a steel ruler, and write both down.",
        "3  Glue the sheet flat on stiff board, then cut along the frame.",
        "4  Stand the card beside the object on a support of its own, parallel to the inscribed face and",
        "level with it: a card that lies 10 mm lower, seen from 400 mm, makes lengths 2.5 % too long.",
        "5  Do not let it touch the object, and ask the institution’s conservators before you set it up.",
        "6  Keep all four markers in the picture, and in focus. One marker is the least that is needed.",
    )
    lines = [
        Text(x if text[0].isdigit() else x + 4, 116.0 + 6 * row, 3.4, text) for row, text in enumerate(notes)
    ]
    return [
        Text(x, 22.0, 6.0, "A scale card for photographs of tablets", bold=True),
        *_cutting_marks(),
        *(_moved(part, x, y) for part in _card()),
        Text(x, 108.0, 4.2, "How to print and to use it", bold=True),
        *lines,
        *(
            part
            for y_mm, what, instead in ((168.0, "Check line:", CHECK_MM), (176.0, "Height:", HEIGHT))
            for part in (
                Text(x, y_mm, 3.4, what),
                Line((x + 20, y_mm + 0.6, x + 37, y_mm + 0.6), 0.15),
                Text(x + 38, y_mm, 3.4, f"mm, instead of {instead:.1f}"),
            )
        ),
    ]


def _rule() -> Iterable[Part]:
    """Draw a millimetre rule along the upper edge of the card."""
    widths = {10: 0.3, 5: 0.2}
    lengths = {10: 5.0, 5: 3.8}
    ticks = []
    for mm in range(101):
        kind = next((step for step in (10, 5) if mm % step == 0), 1)
        width = widths.get(kind, 0.2)
        ticks.append((RULE_FROM + mm - width / 2, 0.0, width, lengths.get(kind, 2.6)))
    yield Blocks(tuple(ticks))
    for mm in range(0, 101, 10):
        yield Text(RULE_FROM + mm, 8.0, 2.8, str(mm), centred=True)
    yield Text(RULE_FROM + 1.6, 8.0, 2.8, "mm")


def _check_line() -> Iterable[Part]:
    """Draw the line by which the printer is checked: 100 mm between the middles of its two ends."""
    left, right, y = RULE_FROM, RULE_FROM + CHECK_MM, 51.4
    yield Line((left, y, right, y), 0.3)
    for x in (left, right):
        yield Line((x, y - 2.4, x, y + 2.4), 0.2)


def _cutting_marks() -> Iterable[Part]:
    """Draw short lines that go on from the edges of the card."""
    left, top = CARD_AT
    for x in (left, left + WIDTH):
        yield Line((x, top - 7, x, top - 2), 0.15)
        yield Line((x, top + HEIGHT + 2, x, top + HEIGHT + 7), 0.15)
    for y in (top, top + HEIGHT):
        yield Line((left - 7, y, left - 2, y), 0.15)
        yield Line((left + WIDTH + 2, y, left + WIDTH + 7, y), 0.15)


def marker_cells(number: int) -> NDArray[np.bool_]:
    """Return which cells of a marker are white, shape (8, 8), row by row from the upper left."""
    import cv2

    family = cv2.aruco.getPredefinedDictionary(cv2.aruco.DICT_APRILTAG_36h11)
    return np.asarray(cv2.aruco.generateImageMarker(family, number, CELLS)) > 0


def _marker_boxes(number: int) -> Boxes:
    """Return the black cells of a marker, joined along the rows."""
    side = MARKER / CELLS
    left, top = CARD[number][0].tolist()
    boxes = []
    for row, white in enumerate(marker_cells(number)):
        changes = np.flatnonzero(np.diff(np.concatenate([[True], white, [True]])))
        for start, end in changes.reshape(-1, 2).tolist():
            boxes.append((left + start * side, top + row * side, (end - start) * side, side))
    return tuple(boxes)


def _moved(part: Part, x: float, y: float) -> Part:
    """Return a part of the card where it stands on the page."""
    if isinstance(part, Blocks):
        return Blocks(tuple((x + left, y + top, width, height) for left, top, width, height in part.boxes))
    if isinstance(part, Line):
        x1, y1, x2, y2 = part.ends
        return Line((x + x1, y + y1, x + x2, y + y2), part.width)
    return Text(x + part.x, y + part.y, part.size, part.text, part.bold, part.centred)


def _svg(part: Part) -> str:
    """Set a part as SVG, in mm."""
    if isinstance(part, Blocks):
        boxes = "".join(f"M{_n(x)} {_n(y)}h{_n(w)}v{_n(h)}h{_n(-w)}z" for x, y, w, h in part.boxes)
        return f'<path d="{boxes}"/>'
    if isinstance(part, Line):
        x1, y1, x2, y2 = (_n(value) for value in part.ends)
        return f'<path d="M{x1} {y1}L{x2} {y2}" stroke="#000" stroke-width="{_n(part.width)}"/>'
    weight = ' font-weight="bold"' if part.bold else ""
    place = f'x="{_n(part.x - _half_width(part))}" y="{_n(part.y)}" font-size="{_n(part.size)}"'
    return f"<text {place}{weight}>{escape(part.text)}</text>"


def _pdf(part: Part) -> str:
    """Set a part as PDF, in points counted from the lower left of the page."""
    if isinstance(part, Blocks):
        boxes = (f"{_p(x)} {_up(y + h)} {_p(w)} {_p(h)} re" for x, y, w, h in part.boxes)
        return " ".join(boxes) + " f"
    if isinstance(part, Line):
        x1, y1, x2, y2 = part.ends
        return f"{_p(part.width)} w {_p(x1)} {_up(y1)} m {_p(x2)} {_up(y2)} l S"
    font = "Bold" if part.bold else "Plain"
    text = part.text.replace("\\", r"\\").replace("(", r"\(").replace(")", r"\)")
    return f"BT /{font} {_p(part.size)} Tf {_p(part.x - _half_width(part))} {_up(part.y)} Td ({text}) Tj ET"


def _half_width(part: Text) -> float:
    """Return how far figures that are centred begin before their middle."""
    return len(part.text) * DIGIT_WIDTH * part.size / 2 if part.centred else 0.0


def _up(y: float) -> str:
    """Write a height that PDF counts from the foot of the page."""
    return _p(PAGE[1] - y)


def _p(mm: float) -> str:
    """Write millimetres as points."""
    return _n(mm * POINTS_PER_MM)


def _n(value: float) -> str:
    """Write a number with four decimals at most."""
    return f"{round(value, 4):.4f}".rstrip("0").rstrip(".")
