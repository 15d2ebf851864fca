"""How long measuring takes, against what everybody has: two ratios, each measured in one run.

python -m tests.benchmarks.speed [RECORD] [--runs N]
"""

from __future__ import annotations

import argparse
import os
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import cv2

import layout

IMPORTS = "import numpy, scipy.optimize, shapely, pydantic"
SAMPLE = Path(__file__).parents[2] / "sample_images" / "umbarrat-041.fragment.json"


def seconds(action: Callable[[], object]) -> float:
    """Return how long an action takes."""
    start = time.perf_counter()
    action()
    return time.perf_counter() - start


def alternating(one: Callable[[], object], other: Callable[[], object], runs: int) -> tuple[float, float]:
    """Return the medians of two actions that take turns, so that both meet the same machine."""
    pairs = [(seconds(one), seconds(other)) for _ in range(runs)]
    return statistics.median(a for a, _ in pairs), statistics.median(b for _, b in pairs)


def main() -> None:
    """Print both ratios."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("record", nargs="?", type=Path, default=SAMPLE)
    parser.add_argument("--runs", type=int, default=7)
    wanted = parser.parse_args()

    def process(*arguments: str) -> Callable[[], object]:
        # as installed: with compiled modules, which the first run writes
        environment = {k: v for k, v in os.environ.items() if k != "PYTHONDONTWRITEBYTECODE"}
        call = [sys.executable, *arguments]
        return lambda: subprocess.run(call, check=True, stdout=subprocess.DEVNULL, env=environment)

    whole = process("-m", "layout", "measure", str(wanted.record), "--json")
    ours, imports = alternating(whole, process("-c", IMPORTS), wanted.runs)
    print(
        f"whole process: {ours:.2f} s against {imports:.2f} s for the imports alone: ratio {ours / imports:.2f}"
    )

    record = layout.read(wanted.record)
    photograph = wanted.record.parent / record.photographs[0].file
    layout.measure(record)
    again, decoding = alternating(
        lambda: layout.measure(record), lambda: cv2.imread(str(photograph)), wanted.runs
    )
    print(
        f"measuring again: {again:.3f} s against {decoding:.3f} s for decoding: ratio {again / decoding:.2f}"
    )


if __name__ == "__main__":
    main()
