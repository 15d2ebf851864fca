"""How well divisions are found on random bars: styles, sizes, slants, dirt, noise, all drawn by lot.

python -m tests.benchmarks.bars [--bars 150] [--seed 21]
"""

from __future__ import annotations

import argparse
from typing import get_args

import numpy as np

from layout.errors import CallError
from tests.pictures.bars import STEPS, Bar, Style, photograph
from tests.test_ticks import find, misses, on_bar, point_roughly, rms


def draw_bar(rng: np.random.Generator) -> Bar:
    """Draw a bar by lot."""
    style: Style = rng.choice(get_args(Style))
    ticks = "ticks" in style
    px_per_mm = float(np.exp(rng.uniform(np.log(8.5 if style == "fine ticks" else 4.0), np.log(24.0))))
    lengths = (20, 30, 50, 80, 100) if ticks else (30, 50) if style == "halves" else (50, 100)
    length = min(int(rng.choice(lengths)), max(50, int(1500 / px_per_mm / 10) * 10))
    paper, ink = float(rng.uniform(0.4, 0.85)), float(rng.uniform(0.01, 0.12))
    if ticks and rng.random() < 0.25:
        paper, ink = ink, paper
    return Bar(
        style=style,
        length=length,
        px_per_mm=px_per_mm,
        tick=0.13 if style == "fine ticks" else float(rng.uniform(0.12, 0.3)),
        paper=paper,
        ink=ink,
        ground=ink if style == "white blocks" else float(rng.uniform(0.01, 0.8)),
        growth=0.0 if ticks else float(rng.uniform(-0.1, 0.4)),
        turn_deg=float(rng.uniform(0, 360)),
        slant=(float(rng.uniform(-15, 15)), float(rng.uniform(-15, 15))),
        blur_px=float(rng.uniform(0.4, 1.3)),
        noise=float(rng.uniform(0.003, 0.03)),
        across=bool(rng.random() < 0.2),
        dirt=int(rng.choice([0, 0, 3, 10])),
        glare=float(rng.choice([0.0, 0.0, 0.4])),
        seed=int(rng.integers(1_000_000)),
    )


def main() -> None:
    """Print how many bars were read, how well, and what went wrong."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--bars", type=int, default=150)
    parser.add_argument("--seed", type=int, default=21)
    wanted = parser.parse_args()
    clean: list[float] = []
    scales: list[float] = []
    refused = lost = invented = spoilt = 0
    for number in range(wanted.bars):
        rng = np.random.default_rng([wanted.seed, number])
        bar = draw_bar(rng)
        picture = photograph(bar)
        points = point_roughly(picture, rng)
        plain = bar.dirt == 0 and not bar.across
        try:
            found = find(picture, points)
        except CallError:
            refused += 1
            spoilt += not plain
            continue
        off, true = misses(picture, found)
        ends = on_bar(picture, np.array([found.marks[0].at, found.marks[-1].at]))[:, 0]
        read = found.marks[-1].mm - found.marks[0].mm
        scales.append(abs(read / abs(float(ends[1] - ends[0])) - 1))
        if plain:
            first, last = sorted(
                on_bar(picture, np.clip(points, 0, np.array(picture.pixels.shape[1::-1]) - 1))[:, 0]
            )
            between = {mm for mm in picture.readings() if first <= mm <= last}
            lost += len(between - set(true))
            invented += int((np.abs(off) > 0.25 * found.pitch_px).sum())
            clean.append(rms(off))
    print(
        f"{wanted.bars} bars of {len(STEPS)} styles; refused {refused}, of which {spoilt} dirty or written over"
    )
    print(
        f"clean bars: {len(clean)}, RMS {rms(np.array(clean)):.3f} px, worst {max(clean):.3f} px, "
        f"divisions lost {lost}, invented {invented}"
    )
    print(
        f"error of the scale, all bars: median {100 * np.median(scales):.3f} %, 95th percentile "
        f"{100 * np.quantile(scales, 0.95):.3f} %, worst {100 * max(scales):.2f} %"
    )


if __name__ == "__main__":
    main()
