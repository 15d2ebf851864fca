"""How long finding divisions and a groove takes on a large photograph, against decoding it: ratios, in one run.

python -m tests.benchmarks.pictures [--megapixels 100] [--runs N]
"""

from __future__ import annotations

import argparse
import statistics
from pathlib import Path

import cv2
import numpy as np

import layout
from layout.image.grooves import draw_to_groove
from layout.image.ticks import find_divisions
from tests.benchmarks.speed import seconds

SAMPLE = Path(__file__).parents[2] / "sample_images" / "umbarrat-041.fragment.json"
NOISE = 1.5
"""Standard deviation of a pixel, of 255."""
BESIDE_PX = 12.0
"""How far beside the divisions and the groove it is pointed, in pixels of the sample."""


def main() -> None:
    """Print how many times longer decoding takes than each finder."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--megapixels", type=float, default=100.0)
    parser.add_argument("--runs", type=int, default=7)
    wanted = parser.parse_args()
    record = layout.read(SAMPLE)
    view = record.views[0]
    small = layout.read_photograph(SAMPLE.parent / record.photographs[0].file)
    larger = float(np.sqrt(wanted.megapixels * 1e6 / small[..., 0].size))
    pixels = np.asarray(
        cv2.resize(small, None, fx=larger, fy=larger, interpolation=cv2.INTER_CUBIC), np.uint8
    )
    encoded = cv2.imencode(".jpg", pixels, [cv2.IMWRITE_JPEG_QUALITY, 92])[1]
    marks = np.array([mark.at for mark in view.scale.marks]) * larger
    start, end = marks[0] + BESIDE_PX * larger, marks[-1] + BESIDE_PX * larger
    ruling = np.array(next(one for one in view.rulings if one.runs == "vertical").points) * larger
    actions = {
        "decoding": lambda: cv2.imdecode(encoded, cv2.IMREAD_COLOR),
        "divisions": lambda: find_divisions(pixels, tuple(start), tuple(end)),
        "a groove": lambda: draw_to_groove(pixels, ruling + 2.0, within_px=BESIDE_PX * larger),
    }
    times: dict[str, list[float]] = {name: [] for name in actions}
    for _ in range(wanted.runs):
        # in turns, so that all meet the same machine
        for name, action in actions.items():
            times[name].append(seconds(action))
    decoding = statistics.median(times.pop("decoding"))
    print(
        f"{pixels[..., 0].size / 1e6:.0f} megapixels, {len(encoded) / 1e6:.0f} MB: decoding {decoding:.3f} s"
    )
    for name, taken in times.items():
        median = statistics.median(taken)
        print(f"{name}: {1000 * median:.0f} ms, 1/{decoding / median:.0f} of it")


if __name__ == "__main__":
    main()
