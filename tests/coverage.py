"""How often the 95 % intervals hold: simulated fragments, measured, and judged by exact binomial limits."""

from __future__ import annotations

import json
import multiprocessing
import os
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.stats import beta

import layout
from tests.cramer_rao import cramer_rao_width
from tests.simulation import FAMILIES, Simulated, simulate

OWN = "superellipse"
LIMITS = 0.999

Json = dict[str, Any]
# threads of several processes would stand in one another's way
ONE_THREAD = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}


@dataclass(frozen=True)
class Trial:
    """One quantity of one fragment: what was measured, and what is true; null results have no interval."""

    quantity: str
    truth: float
    low: float | None
    high: float | None
    value: float | None
    sd: float | None

    @property
    def is_null(self) -> bool:
        """Whether no interval was given."""
        return self.low is None or self.high is None

    @property
    def holds(self) -> bool:
        """Whether the interval contains the truth; a null result does not."""
        return self.low is not None and self.high is not None and self.low <= self.truth <= self.high

    @property
    def half_width(self) -> float:
        """Half the width of the interval."""
        return float("nan") if self.low is None or self.high is None else (self.high - self.low) / 2

    @property
    def z(self) -> float:
        """Error in units of the stated standard deviation."""
        if self.value is None or self.sd is None:
            return float("nan")
        return (self.value - self.truth) / self.sd


@dataclass(frozen=True)
class Judged:
    """One fragment with its trials, and the Cramer-Rao bound of its width where there is one."""

    number: int
    family: str
    lost: float
    trials: tuple[Trial, ...]
    bound: float | None
    codes: tuple[str, ...]

    def trial(self, quantity: str) -> Trial | None:
        """Return the trial of one quantity, if the fragment has it."""
        return next((trial for trial in self.trials if trial.quantity == quantity), None)

    def bound_with_scale(self) -> float | None:
        """Return the bound on the width in a photograph, mm: the scale's own uncertainty comes on top."""
        scale, width = self.trial("scale"), self.trial("width")
        if self.bound is None or width is None or scale is None or scale.sd is None:
            return None
        return float(np.hypot(self.bound, width.truth * scale.sd / scale.truth))


@dataclass(frozen=True)
class Task:
    """One fragment to simulate and measure; ``family`` and ``lost`` fix what else is varied."""

    number: int
    seed: int
    draws: int
    family: str | None = None
    lost: float | None = None


def simulated_by(task: Task) -> Simulated:
    """Simulate the fragment of a task: its settings go through the whole spread that is to be held."""
    rng = np.random.default_rng([task.seed, task.number])
    families = [*FAMILIES, OWN]
    settings = {
        "family": task.family or families[task.number % len(families)],
        "lost": rng.uniform(0.15, 0.50) if task.lost is None else task.lost,
        "corner_lost": bool(rng.random() < 0.15),
        "pointing_px": float(np.round(rng.uniform(0.7, 2.0), 2)),
        "tilt_sd_deg": float(np.round(rng.uniform(0.1, 1.5), 2)),
        "below_face_sd": float(np.round(rng.uniform(0.5, 1.5), 2)),
        "tremor": float(rng.choice([0.0, 0.08])),
        "drift": float(rng.choice([0.0, rng.normal(0.0, 0.1)])),
    }
    return simulate(rng, **settings)


def judge(task: Task) -> Judged:
    """Simulate and measure one fragment, and compare with its truth."""
    simulated = simulated_by(task)
    record = layout.parse(json.dumps(simulated.record))
    results: Json = layout.measure(record, draws=task.draws, seed=task.number).to_json()
    family, truth = simulated.truth["family"], simulated.truth
    bound = cramer_rao_width(simulated) if family == OWN else None
    codes = tuple(sorted({entry["code"] for entry in results["warnings"]}))
    return Judged(task.number, family, truth["lost"], tuple(trials_of(truth, results, task)), bound, codes)


def trials_of(truth: Json, results: Json, task: Task) -> Iterator[Trial]:
    """Set what was measured against the truth, one trial a quantity, so that trials are independent."""
    view, whole = results["views"][0], results["reconstructed"] or {}
    left = list(truth["columns"])[task.number % len(truth["columns"])]
    columns = {column["left"]: column["width"] for column in view["columns"] or []}
    measured = {
        "scale": (truth["scale"], (view["scale"] or {}).get("mm_per_px")),
        "column width": (truth["columns"][left], columns.get(left)),
        "line pitch": (truth["line_pitch"], (view["line_pitch"] or {}).get("pitch")),
        "height": (truth["height"], whole.get("height")),
        "width": (truth["width"], whole.get("width")),
        "lost space": (truth["lost_space"], whole.get("lost_space")),
    }
    if truth["entries"]:
        measured["sign width"] = (truth["sign_width"], (results["sign_width"] or {}).get("full"))
        measured["capacity"] = (truth["capacity"], (results["capacity"] or {}).get("sign_widths"))
    for quantity, (true, found) in measured.items():
        found = found or dict.fromkeys(("low", "high", "value", "sd"))
        yield Trial(quantity, true, found["low"], found["high"], found["value"], found["sd"])


def judge_all(tasks: list[Task], workers: int) -> Iterator[Judged]:
    """Judge many fragments in fresh processes with one BLAS thread each, in order."""
    os.environ.update(ONE_THREAD)
    with multiprocessing.get_context("spawn").Pool(workers) as pool:
        yield from pool.imap(judge, tasks, chunksize=2)


def exact_limits(holding: int, trials: int, confidence: float = LIMITS) -> tuple[float, float]:
    """Return the two-sided limits of a proportion (Clopper and Pearson 1934).

    Examples
    --------
    All ten hold: the lower limit is (0.05 / 2) to the power of 1 / 10.

    >>> round(exact_limits(10, 10, 0.95)[0], 6)
    0.691503
    """
    tail = (1 - confidence) / 2
    low = 0.0 if holding == 0 else float(beta.ppf(tail, holding, trials - holding + 1))
    high = 1.0 if holding == trials else float(beta.ppf(1 - tail, holding + 1, trials - holding))
    return low, high
