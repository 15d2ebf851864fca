"""Photographs: decoding, orientation, limits and hash.

A photograph is refused before it is decoded when its header says that it is too large, of another kind, or
cut off. OpenCV is imported where pixels are decoded: size and hash do without it.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import tempfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from layout.errors import PhotographError
from layout.image.headers import Header, HeaderError, read_header

Pixels = NDArray[np.uint8 | np.uint16]

MOST_PIXELS = 400_000_000
# three channels of 16 bits, uncompressed, and room for what else stands in a file
LARGEST_FILE = MOST_PIXELS * 6 + 100_000_000


def read_photograph(path: str | Path) -> Pixels:
    """Decode a photograph and turn it upright.

    Grey values are repeated in three channels, transparency is dropped, palettes and CMYK become RGB; colour
    profiles are not applied.

    Parameters
    ----------
    path
        JPEG, PNG or TIFF; of several pages the first.

    Returns
    -------
    ndarray
        Shape (height, width, 3), red first, of 8 or 16 bits a channel as the file has it.

    Raises
    ------
    PhotographError
        If the file cannot be read, is no such photograph, is damaged or cut off, or has more than 400
        megapixels.
    """
    path = Path(path)
    data = _load(path)
    header = _header(data, path)
    if not header.whole:
        raise _refusal(path, "breaks off before its end; copy the photograph again")
    # OpenCV turns a TIFF upright itself, and leaves JPEG and PNG when told so
    orientation = 1 if header.kind == "TIFF" else header.orientation
    return np.ascontiguousarray(_turn_upright(_decode(data, path), orientation))


def probe(path: str | Path) -> tuple[int, int]:
    """Return width and height of a photograph once it stands upright, without decoding it.

    Raises
    ------
    PhotographError
        If the file cannot be read, is no JPEG, PNG or TIFF, or has more than 400 megapixels.
    """
    path = Path(path)
    return _header(_load(path), path).upright_size


def sha256_of(path: str | Path) -> str:
    """Return the SHA-256 of a file, as 64 digits.

    Raises
    ------
    PhotographError
        If the file cannot be read.
    """
    path = Path(path)
    with _readable(path), path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def _refusal(path: Path, text: str) -> PhotographError:
    """Return the error that names the photograph and what is wrong with it."""
    return PhotographError(text, file=path)


def _load(path: Path) -> bytes:
    """Return the bytes of a file that is not too large to hold a photograph."""
    with _readable(path):
        if path.stat().st_size > LARGEST_FILE:
            text = f"is larger than {LARGEST_FILE // 10**6} MB; export a smaller photograph"
            raise _refusal(path, text)
        return path.read_bytes()


@contextlib.contextmanager
def _readable(path: Path) -> Iterator[None]:
    """Turn what the system refuses into our own words."""
    try:
        if path.exists() and not path.is_file():
            raise _refusal(path, "is no file but a folder or a device; name a photograph")
        yield
    except FileNotFoundError:
        raise _refusal(path, "there is no such photograph; check the name") from None
    except PermissionError:
        raise _refusal(path, "permission denied; change the rights of the file") from None
    except (OSError, ValueError) as error:
        raise _refusal(path, f"cannot be read ({error}); copy the photograph again") from None


def _header(data: bytes, path: Path) -> Header:
    """Read the header and hold the limit on pixels."""
    try:
        header = read_header(data)
    except HeaderError as error:
        raise _refusal(path, str(error)) from None
    if header.width * header.height > MOST_PIXELS:
        size = f"{header.width} x {header.height} pixels"
        text = f"has {size}; export it with {MOST_PIXELS // 10**6} megapixels or fewer"
        raise _refusal(path, text)
    return header


def _decode(data: bytes, path: Path) -> Pixels:
    """Decode to red, green and blue, at the depth of the file."""
    import cv2

    flags = cv2.IMREAD_COLOR | cv2.IMREAD_ANYDEPTH | cv2.IMREAD_IGNORE_ORIENTATION
    try:
        with _silence():
            pixels: Any = cv2.imdecode(np.frombuffer(data, np.uint8), flags)
            if pixels is not None:
                pixels = cv2.cvtColor(pixels, cv2.COLOR_BGR2RGB)
    except (cv2.error, MemoryError):
        pixels = None
    if pixels is None or pixels.dtype not in (np.uint8, np.uint16):
        raise _refusal(path, "is damaged or stored in a rare way; export it again")
    decoded: Pixels = pixels
    return decoded


@contextlib.contextmanager
def _silence() -> Iterator[None]:
    """Keep what the decoders in C print away from the terminal: our own error says it."""
    try:
        terminal = os.dup(2)
    except OSError:
        # nothing to keep it from
        yield
        return
    try:
        with tempfile.TemporaryFile() as nowhere:
            os.dup2(nowhere.fileno(), 2)
            yield
    finally:
        os.dup2(terminal, 2)
        os.close(terminal)


def _turn_upright(pixels: Pixels, orientation: int) -> Pixels:
    """Apply an Exif orientation (tag 274): where row 0 and column 0 of the stored picture stand."""
    turned: Pixels = pixels.swapaxes(0, 1) if orientation >= 5 else pixels
    if orientation in (3, 4, 7, 8):
        turned = turned[::-1]
    if orientation in (2, 3, 6, 7):
        turned = turned[:, ::-1]
    return turned
