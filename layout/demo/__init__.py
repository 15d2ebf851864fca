"""The bundled fragment: a record and its photograph, with which to see the whole job done."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

from layout.errors import CallError
from layout.files import replace_file


def unpack(folder: Path) -> tuple[Path, tuple[Path, ...]]:
    """Put the bundled files into a folder; a file that is there already is never overwritten.

    Returns
    -------
    record : Path
        The record in that folder.
    kept : tuple of Path
        The files that were there already and differ from the bundled ones.

    Raises
    ------
    CallError
        If the folder is a file.
    """
    if folder.exists() and not folder.is_dir():
        message = "is a file; name a folder, or one that is still to be made"
        raise CallError(message, file=folder)
    folder.mkdir(parents=True, exist_ok=True)
    bundled = sorted(
        (file for file in resources.files(__name__).iterdir() if not file.name.startswith("__")),
        key=lambda file: file.name,
    )
    kept = []
    for source in bundled:
        target, content = folder / source.name, source.read_bytes()
        if not target.exists():
            replace_file(target, content)
        elif target.read_bytes() != content:
            kept.append(target)
    record = next(source.name for source in bundled if source.name.endswith(".fragment.json"))
    return folder / record, tuple(kept)
