"""Run the real command as a user does: a process of its own, judged by what it prints and returns."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).parents[1]
MINUTE_S = 60.0

# root may read and write everything; these two capabilities taken away, permissions hold for it too
UNPRIVILEGED = ("setpriv", "--bounding-set", "-dac_override,-dac_read_search") if os.geteuid() == 0 else ()


@dataclass(frozen=True)
class Ran:
    """What a command left: exit code, stdout, stderr."""

    code: int
    out: str
    err: str


def command(*arguments: object) -> list[str]:
    """Return the command line that runs this program with the arguments."""
    return [sys.executable, "-m", "layout", *map(str, arguments)]


def environment(**changes: str) -> dict[str, str]:
    """Return the environment in which the commands run."""
    path = os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))
    return {**os.environ, "PYTHONPATH": path, **changes}


def run(
    *arguments: object,
    cwd: Path,
    prefix: tuple[str, ...] = (),
    before: Callable[[], None] | None = None,
    **variables: str,
) -> Ran:
    """Run the command in a folder; ``before`` runs in the new process, ``prefix`` before its command line."""
    done = subprocess.run(
        [*prefix, *command(*arguments)],
        cwd=cwd,
        env=environment(**variables),
        capture_output=True,
        timeout=MINUTE_S,
        preexec_fn=before,
        check=False,
    )
    return Ran(done.returncode, done.stdout.decode("utf-8"), done.stderr.decode("utf-8"))


def assert_refused(ran: Ran, *lines: str) -> None:
    """Assert that the command refused: exit 2, one line for each fault that holds its text, nothing else."""
    assert ran.code == 2, ran
    assert ran.out == ""
    printed = ran.err.splitlines()
    assert len(printed) == len(lines), ran.err
    for line, text in zip(printed, lines, strict=True):
        assert line.startswith("layout: ")
        assert text in line
