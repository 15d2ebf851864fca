"""A module reads only from those above it."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import layout

HOME = Path(layout.__file__).parent
ORDER = (
    "errors quantity notices files least_squares homography lens image record sexagesimal signs frame sources scene "
    "aslant scale straighten wobble rulings outline lengths sign_widths clearance candidates.width candidates.ranking "
    "results candidates.deciding views agreement rectify whole pipeline console sheet demo cli_pictures cli __main__"
).split()


def rank_of(name: str) -> int | None:
    """Return where a module stands in the order; None for the package itself."""
    found = [at for at, known in enumerate(ORDER) if name == known or name.startswith(f"{known}.")]
    return found[0] if found else None


def imports_of(path: Path) -> set[str]:
    """Return the package's modules that a file needs when it is loaded, without the package's name."""
    found = set()
    for node in ast.parse(path.read_text(encoding="utf-8")).body:
        if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("layout."):
            found.add((node.module or "").removeprefix("layout."))
    return found


def test_data_flows_one_way() -> None:
    seen = 0
    for path in HOME.rglob("*.py"):
        parts = path.relative_to(HOME).with_suffix("").parts
        name = ".".join(parts[:-1] if parts[-1] == "__init__" else parts)
        own = rank_of(name)
        if own is None:
            continue
        for other in imports_of(path):
            above = rank_of(other)
            assert above is not None, f"{other} has no place in the order"
            assert above <= own, f"{name} reads from {other}"
            seen += 1
    assert seen > 50


def test_every_module_has_a_place() -> None:
    for path in HOME.rglob("*.py"):
        parts = path.relative_to(HOME).with_suffix("").parts
        if parts[-1] != "__init__":
            assert rank_of(".".join(parts)) is not None, path


def test_importing_the_package_is_cheap() -> None:
    code = "import sys, layout; print([name for name in ('numpy', 'pydantic') if name in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_public_names_are_there() -> None:
    assert all(hasattr(layout, name) for name in layout.__all__)
