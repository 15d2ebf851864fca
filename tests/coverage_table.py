"""Print how often the 95 % intervals hold, as a Markdown table.

    python -m tests.coverage_table --fragments 400 --seed 1 --workers 2

Lines are printed to stdout, the progress bar to stderr.
"""

from __future__ import annotations

import argparse
from collections import Counter

import numpy as np
from rich.console import Console
from rich.progress import track

from tests.coverage import OWN, Judged, Task, Trial, exact_limits, judge_all
from tests.simulation import FAMILIES

QUANTITIES = (
    "scale",
    "column width",
    "line pitch",
    "height",
    "width",
    "lost space",
    "sign width",
    "capacity",
)
SHARES = ((0.15, 0.25), (0.25, 0.35), (0.35, 0.51))
HEADER = (
    "| {} | fragments | null | coverage | 99.9 % limits | median half-width | mean z | sd of z |\n"
    "| --- | --- | --- | --- | --- | --- | --- | --- |"
)


def row(name: str, trials: list[Trial]) -> str:
    """Write one row: a null result counts as an interval that does not hold."""
    if not trials:
        return f"| {name} | 0 | | | | | | |"
    holding = sum(trial.holds for trial in trials)
    low, high = exact_limits(holding, len(trials))
    given = [trial for trial in trials if not trial.is_null]
    z = np.array([trial.z for trial in given if trial.sd is not None])
    half_width = f"{np.median([trial.half_width for trial in given]):.3g}" if given else ""
    spread = f"{z.mean():+.2f} | {z.std(ddof=1):.2f}" if len(z) > 1 else " | "
    return (
        f"| {name} | {len(trials)} | {len(trials) - len(given)} | {holding / len(trials):.1%} "
        f"| {low:.1%} to {high:.1%} | {half_width} | {spread} |"
    )


def rows(quantity: str, groups: dict[str, list[Judged]]) -> list[str]:
    """Write one row for each group of fragments."""
    return [row(f"{quantity}, {name}", trials_in(group, quantity)) for name, group in groups.items()]


def trials_in(judged: list[Judged], quantity: str) -> list[Trial]:
    """Return the trials of one quantity, one a fragment that has it."""
    return [trial for one in judged if (trial := one.trial(quantity)) is not None]


def efficiency(judged: list[Judged]) -> str:
    """Compare the width's stated sd and its real error with the Cramer-Rao bound, own family only."""
    trials = [
        (width, one.bound, bound)
        for one in judged
        if one.bound is not None and (bound := one.bound_with_scale()) is not None
        if (width := one.trial("width")) is not None and width.sd is not None and width.value is not None
    ]
    if not trials:
        return "No superellipse among the fragments: no Cramer-Rao bound."
    stated = np.median([(width.sd or 0.0) / bound for width, _, bound in trials])
    outline = np.median([(width.sd or 0.0) / alone for width, alone, _ in trials])
    error = np.abs([((width.value or 0.0) - width.truth) / bound for width, _, bound in trials])
    return (
        f"Width of {len(trials)} superellipses against the Cramer-Rao bound: "
        f"median of sd / bound {stated:.3f} "
        f"(of the outline alone, without the scale's uncertainty: {outline:.3f}), "
        f"RMS of error / bound {np.sqrt(np.mean(error**2)):.3f}, "
        f"median of error / bound, as of a normal distribution's sd, {np.median(error) / 0.6745:.3f}."
    )


def counted(names: Counter[str]) -> str:
    """Write how often each name stands, the most frequent first."""
    return ", ".join(f"{name} {times}" for name, times in names.most_common()) or "none"


def table(judged: list[Judged]) -> str:
    """Write the whole report."""
    by_share = {
        f"{low:.0%} to {min(high, 0.5):.0%} lost": [one for one in judged if low <= one.lost < high]
        for low, high in SHARES
    }
    by_family = {name: [one for one in judged if one.family == name] for name in (*FAMILIES, OWN)}
    lines = [HEADER.format("quantity")]
    lines += [row(quantity, trials_in(judged, quantity)) for quantity in QUANTITIES]
    lines += ["", HEADER.format("by share lost")]
    for quantity in ("width", "lost space", "capacity"):
        lines += rows(quantity, by_share)
    lines += ["", HEADER.format("by family of outline"), *rows("width", by_family)]
    lines += ["", efficiency(judged)]
    nulls = Counter(trial.quantity for one in judged for trial in one.trials if trial.is_null)
    codes = Counter(code for one in judged for code in one.codes)
    lines += ["", f"Null results: {counted(nulls)}.", "", f"Warnings: {counted(codes)}."]
    return "\n".join(lines)


def main() -> None:
    """Run the simulation and print the table."""
    parser = argparse.ArgumentParser(prog="python -m tests.coverage_table", description=__doc__)
    parser.add_argument("--fragments", type=int, default=400)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=1)
    parser.add_argument("--draws", type=int, default=2000)
    parser.add_argument("--family", choices=[*FAMILIES, OWN])
    parser.add_argument("--lost", type=float, help="share of the width, 0.15 to 0.5")
    call = parser.parse_args()
    tasks = [Task(number, call.seed, call.draws, call.family, call.lost) for number in range(call.fragments)]
    progress = track(
        judge_all(tasks, call.workers), "measuring", total=len(tasks), console=Console(stderr=True)
    )
    print(table(list(progress)))


if __name__ == "__main__":
    main()
