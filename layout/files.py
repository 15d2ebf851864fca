"""Writing a file whole or not at all, and what to do when the system refuses."""

from __future__ import annotations

import contextlib
import os
import stat
from pathlib import Path

from layout.errors import CallError


def replace_file(path: Path, data: bytes) -> None:
    """Write a temporary file beside the old one, sync it, and rename it over the old one.

    A link is followed, so that the file that it names is replaced and not the link.

    Raises
    ------
    OSError
        If the file cannot be written; what was there before is then untouched.
    """
    path = path.resolve()
    temporary = path.with_name(f".{path.name}.{os.urandom(4).hex()}.tmp")
    try:
        with temporary.open("xb") as file:
            if path.exists():
                os.chmod(file.fileno(), stat.S_IMODE(path.stat().st_mode))
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        os.replace(temporary, path)
    except BaseException:
        with contextlib.suppress(OSError):
            temporary.unlink()
        raise
    _sync_folder(path.parent)


def write_whole(path: Path, data: bytes) -> None:
    """Write a file whole or not at all, for whoever has nothing to add to why it failed.

    Raises
    ------
    CallError
        If it cannot be written; what was there before is then untouched.
    """
    try:
        replace_file(path, data)
    except (OSError, ValueError) as error:
        message = f"cannot be written: {reason(error)}"
        raise CallError(message, file=path) from None


def reason(error: OSError | ValueError) -> str:
    """Say why the system refused, and what to do."""
    mends: dict[type[BaseException], str] = {
        FileNotFoundError: "there is no such file or folder; check the name",
        PermissionError: "permission denied; change the rights of the file or folder",
        IsADirectoryError: "it is a folder; name a file",
        NotADirectoryError: "a part of its path is no folder; check the name",
        FileExistsError: "a folder or file is in the way; name another",
    }
    if type(error) in mends:
        return mends[type(error)]
    strerror = error.strerror if isinstance(error, OSError) else None
    return f"{(strerror or str(error)).lower()}; name another file, or free space where the disk is full"


def _sync_folder(folder: Path) -> None:
    """Make the renaming last; some file systems cannot, and the file is whole there too."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)
