"""The README is true."""

from __future__ import annotations

import re
import shutil
import subprocess
import sys
from pathlib import Path

from tests.command import environment, run

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_every_command_is_in_the_readme_and_none_other(tmp_path: Path) -> None:
    named = set(re.findall(r"^    layout (\w+)", README, re.MULTILINE))
    helped = set(re.findall(r"^[│\s]+(\w+)  ", run("--help", cwd=tmp_path).out, re.MULTILINE))
    assert named == {"demo", "new", "check", "measure", "rank", "sheet", "ticks", "target", "lens", "rectify"}
    assert named <= helped


def test_the_example_runs(tmp_path: Path) -> None:
    assert run("demo", cwd=tmp_path).code == 0
    code = "".join(re.findall(r"```python\n(.*?)```", README, re.DOTALL))
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=tmp_path,
        env=environment(),
        capture_output=True,
        text=True,
        check=True,
    )
    assert "sign widths" in done.stdout
    assert "51 divisions; 4 pieces of contour" in done.stdout


def test_ci_runs_the_readme_s_test_command() -> None:
    bash = shutil.which("bash")
    assert bash is not None
    line = next(line for line in (ROOT / ".ci" / "run").read_text().splitlines() if line.startswith("eval "))
    shown = line.removeprefix("eval ").strip('"').removeprefix("$(").removesuffix(")")
    done = subprocess.run([bash, "-c", shown], cwd=ROOT, capture_output=True, text=True, check=True)
    assert done.stdout.strip().endswith("-m pytest -n 2")
    assert done.stdout.strip() in README
