"""Draw what the finders see on the demo photograph: ``python -m sample_images.found``.

Divisions of the bar from two rough points, the contour from one click, traced rulings on their grooves, and the
rulings that are proposed from one of each direction.
"""

from __future__ import annotations

from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

import layout
from layout.image.contour import find_contour
from layout.image.grooves import draw_to_groove
from layout.image.ruled import propose_rulings
from layout.image.ticks import find_divisions

HERE = Path(__file__).parent
NAME = "umbarrat-041"
WIDTH = 1000
BESIDE_PX = np.array([0.0, 25.0])
CONTOUR, BREAKS, GROOVE, PROPOSED, MARKS = (
    (60, 200, 255),
    (60, 120, 255),
    (90, 200, 60),
    (240, 120, 60),
    (80, 80, 255),
)


def main() -> None:
    """Find everything and write the picture."""
    record = layout.read(HERE / f"{NAME}.fragment.json")
    view = record.views[0]
    pixels = layout.read_photograph(HERE / f"{NAME}.jpg")
    scale = WIDTH / pixels.shape[1]
    picture = cv2.cvtColor(
        cv2.resize(pixels, None, fx=scale, fy=scale, interpolation=cv2.INTER_AREA), cv2.COLOR_RGB2BGR
    )

    def line(points: NDArray[np.float64], colour: tuple[int, int, int], *, closed: bool = False) -> None:
        at = np.round((points + 0.5) * scale * 16).astype(np.int32)
        cv2.polylines(picture, [at], closed, colour, 2, cv2.LINE_AA, 4)

    traced = {ruling.id: np.array(ruling.points, dtype=float) for ruling in view.rulings}
    middle = np.mean([points.mean(axis=0) for points in traced.values()], axis=0)
    contour = find_contour(pixels, (float(middle[0]) + 60, float(middle[1]) + 90))
    for number, piece in enumerate(contour.pieces):
        line(piece, (CONTOUR, BREAKS)[number % 2])
    first = [next(one for one in view.rulings if one.runs == runs) for runs in ("vertical", "horizontal")]
    drawn = [draw_to_groove(pixels, traced[one.id], within_px=30.0) for one in first]
    proposals = propose_rulings(
        pixels,
        [(one.runs, groove.points_px) for one, groove in zip(first, drawn, strict=True)],
        contour.points_px,
    )
    for proposal in proposals:
        line(proposal.points_px, PROPOSED)
    for groove in drawn:
        line(groove.points_px, GROOVE)
    marks = np.array([mark.at for mark in view.scale.marks])
    start, end = marks[0] + BESIDE_PX, marks[-1] + BESIDE_PX
    divisions = find_divisions(pixels, tuple(start), tuple(end))
    for mark in divisions.marks:
        centre = tuple(int(value) for value in np.round((np.array(mark.at) + 0.5) * scale * 16))
        cv2.circle(picture, centre, 3 * 16, MARKS, -1, cv2.LINE_AA, 4)
    cv2.imwrite(str(HERE / "demo-found.jpg"), picture, [cv2.IMWRITE_JPEG_QUALITY, 88])
    print(
        f"divisions {len(divisions.marks)}, contour in {len(contour.pieces)} pieces, {contour.sd_px:.2f} px"
    )
    print(f"rulings traced {len(first)}, proposed {len(proposals)} of {len(traced) - len(first)} others")


if __name__ == "__main__":
    main()
