"""Writing a file so that no crash at any moment leaves less than the last one that was saved."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

from layout.errors import CallError


def replace_file(path: Path, content: bytes) -> None:
    """Write a file whole or not at all: a temporary file in the same folder, synced, then renamed.

    A link is followed, so that the file that it names is replaced and not the link.

    Raises
    ------
    CallError
        If the file cannot be written; what was there before is then untouched.
    """
    if path.is_dir():
        message = "is a folder; name a file"
        raise CallError(message, file=path)
    target = Path(os.path.realpath(path))
    temporary = target.with_name(f".{target.name}.{os.getpid()}")
    try:
        with temporary.open("wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        temporary.replace(target)
    except OSError as error:
        message = f"cannot be written: {error.strerror or error}; choose another folder, or make room"
        raise CallError(message, file=path) from error
    finally:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)
    _sync_folder(target.parent)


def _sync_folder(folder: Path) -> None:
    """Make the renaming itself last; a system that cannot sync a folder has its own way to."""
    with contextlib.suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
