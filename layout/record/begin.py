"""A new record from photographs: their names, sizes and hashes, and one view to begin with."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import numpy as np

from layout.errors import CallError
from layout.image.camera_data import focal_px, read_camera_data
from layout.image.photograph import probe, sha256_of
from layout.record.model import SCHEMA, Record

CLOSE = (0.04, 0.04)
"""A lens that is focused on a tablet stands further out: 1 to 10 % for pictures of 100 to 250 mm, as a rule."""


def begin(name: str, photographs: list[Path], folder: Path) -> Record:
    """Begin a record: its photographs with the focal length of the camera data, and a view of the obverse on the first.

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
        If one of them cannot be used.
    CallError
        If one lies elsewhere than beside the record, is named twice, or none is given.
    """
    files = [_beside(photograph, folder) for photograph in photographs]
    if not files:
        message = "needs one photograph or more, has none"
        raise CallError(message)
    most, times = Counter(files).most_common(1)[0]
    if times > 1:
        message = f"is named {times} times; name each photograph once"
        raise CallError(message, file=most)
    stems = Counter(file.stem for file in files)
    ids = [file.stem if stems[file.stem] == 1 else file.as_posix() for file in files]
    return Record.model_validate(
        {
            "schema": SCHEMA,
            "name": name,
            "photographs": [
                {
                    "id": each,
                    "file": file.as_posix(),
                    "sha256": sha256_of(path),
                    "size": size,
                    "focal_length": _focal_length(path, size),
                }
                for each, file, path in zip(ids, files, photographs, strict=True)
                for size in [probe(path)]
            ],
            "views": [{"face": "obverse", "photograph": ids[0]}],
        }
    )


def _focal_length(photograph: Path, size: tuple[int, int]) -> dict[str, float] | None:
    """Return the focal length that the camera wrote into a photograph, as it is at the distance of a tablet."""
    camera = read_camera_data(photograph)
    far = None if camera is None else focal_px(camera, size)
    if far is None:
        return None
    px = far[0] * (1 + CLOSE[0])
    return {"px": round(px, 1), "sd": round(px * float(np.hypot(far[1], CLOSE[1])), 1)}


def _beside(photograph: Path, folder: Path) -> Path:
    """Return a photograph's name as seen from the record's folder."""
    try:
        return photograph.resolve().relative_to(folder.resolve())
    except ValueError:
        message = f"lies outside the record's folder {folder.resolve()}; copy it there first"
        raise CallError(message, file=photograph) from None
