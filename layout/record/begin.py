"""Beginning a record from photographs."""

from __future__ import annotations

import json
import os
from collections.abc import Sequence
from pathlib import Path

from layout.errors import PhotographError
from layout.image.photograph import probe, sha256_of
from layout.record.files import parse
from layout.record.model import SCHEMA, Record


def begin(name: str, photographs: Sequence[Path], folder: Path) -> Record:
    """Return a record of these photographs and nothing traced yet.

    The first photograph is taken for one of the obverse.

    Parameters
    ----------
    name
        Museum or excavation number.
    photographs
        One or more, in the record's folder or below it.
    folder
        Where the record will lie.

    Raises
    ------
    PhotographError
        If a photograph cannot be used, or does not lie in the record's folder or below it.
    RecordError
        If the name or a file's name cannot stand in a record.
    """
    described = [
        {
            "id": f"p{number}",
            "file": _beside(photograph, folder),
            "sha256": sha256_of(photograph),
            "size": probe(photograph),
        }
        for number, photograph in enumerate(photographs, 1)
    ]
    view = {"face": "obverse", "photograph": "p1"}
    record = {"schema": SCHEMA, "name": name, "photographs": described, "views": [view]}
    return parse(json.dumps(record))


def _beside(photograph: Path, folder: Path) -> str:
    """Return a photograph's name as seen from the record's folder."""
    relative = Path(os.path.relpath(photograph.parent.resolve() / photograph.name, folder.resolve()))
    if ".." in relative.parts:
        message = f"lies outside the record's folder {folder}; begin the record beside its photographs"
        raise PhotographError(message, file=photograph)
    return relative.as_posix()
