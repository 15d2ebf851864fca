"""What the header of a JPEG, PNG or TIFF says, so that a photograph is judged before any pixel is decoded.

Marker, chunk and tag numbers are those of the standards: ITU-T T.81 (JPEG), ISO/IEC 15948 (PNG), TIFF 6.0 and
Exif 2.3, from memory.
"""

from __future__ import annotations

import struct
from dataclasses import dataclass

PNG_SIGNATURE = b"\x89PNG\r\n\x1a\n"

# TIFF tags
REDUCED, WIDTH, HEIGHT, BITS, PHOTOMETRIC, ORIENTATION, SAMPLE_FORMAT = 254, 256, 257, 258, 262, 274, 339
STRIPS, TILES = (273, 279), (324, 325)
CIELAB = (8, 9, 10)

# bytes of each TIFF type that holds whole numbers, and its code in struct
TYPES = {1: "B", 3: "H", 4: "I"}


class HeaderError(ValueError):
    """The header cannot be used; the message says why and what to do."""


@dataclass(frozen=True)
class Header:
    """Kind of file, stored size in pixels, Exif orientation (1-8), and whether the file reaches its end."""

    kind: str
    width: int
    height: int
    orientation: int
    whole: bool

    @property
    def upright_size(self) -> tuple[int, int]:
        """Return (width, height) once the photograph stands upright."""
        return (self.width, self.height) if self.orientation < 5 else (self.height, self.width)


def read_header(data: bytes) -> Header:
    """Read the header of a photograph.

    Parameters
    ----------
    data
        The whole file.

    Raises
    ------
    HeaderError
        If the file is of another kind, is damaged, or stores what is no photograph of 8 or 16 bits.
    """
    if not data:
        message = "is empty; copy the photograph again"
        raise HeaderError(message)
    readers = {
        b"\xff\xd8\xff": _read_jpeg,
        PNG_SIGNATURE: _read_png,
        b"II*\0": _read_tiff,
        b"MM\0*": _read_tiff,
    }
    for signature, read in readers.items():
        if data.startswith(signature):
            try:
                header = read(data)
            except (struct.error, IndexError):
                message = "breaks off in its header; copy the photograph again"
                raise HeaderError(message) from None
            if header.width < 1 or header.height < 1:
                message = f"says that it is {header.width} x {header.height} pixels large; export it again"
                raise HeaderError(message)
            return header
    message = "is no JPEG, PNG or TIFF; export the photograph as one of these"
    raise HeaderError(message)


def _read_jpeg(data: bytes) -> Header:
    """Walk the segments up to the first scan; behind it only the end marker counts."""
    width = height = 0
    orientation = 1
    place = 2
    while data[place] == 0xFF:
        marker = data[place + 1]
        if marker == 0xFF:
            # fill bytes may precede a marker
            place += 1
            continue
        if marker in (0xD9, 0xDA):
            break
        length = struct.unpack_from(">H", data, place + 2)[0]
        # the fourteen frame headers; three numbers between them mean other things
        if 0xC0 <= marker <= 0xCF and marker not in (0xC4, 0xC8, 0xCC):
            bits, height, width = struct.unpack_from(">BHH", data, place + 4)
            _need_bits(bits, (8,), "JPEG")
        elif marker == 0xE1 and data[place + 4 : place + 10] == b"Exif\0\0":
            orientation = _exif_orientation(data[place + 10 : place + 2 + length])
        place += 2 + length
    # a scan escapes every FF of its own, so that the first end marker behind its beginning is the end
    return Header("JPEG", width, height, orientation, data.find(b"\xff\xd9", place) >= 0)


def _read_png(data: bytes) -> Header:
    """Walk the chunks to the last one."""
    width, height = struct.unpack_from(">II", data, 16)
    orientation, whole = 1, False
    place = len(PNG_SIGNATURE)
    while place + 12 <= len(data) and not whole:
        length, kind = struct.unpack_from(">I4s", data, place)
        if kind == b"eXIf":
            orientation = _exif_orientation(data[place + 8 : place + 8 + length])
        place += 12 + length
        whole = kind == b"IEND" and place <= len(data)
    return Header("PNG", width, height, orientation, whole)


def _read_tiff(data: bytes) -> Header:
    """Read the first directory; its strips or tiles must lie within the file."""
    tags = _tags(data)
    if tags.get(REDUCED, (0,))[0] & 1:
        message = "begins with a preview, as raw files do; develop it and export it as TIFF or JPEG"
        raise HeaderError(message)
    for bits in tags.get(BITS, (1,)):
        _need_bits(bits, (8, 16), "TIFF")
    if set(tags.get(SAMPLE_FORMAT, (1,))) != {1}:
        message = "is a TIFF of signed or floating-point numbers; export it with 8 or 16 bits a channel"
        raise HeaderError(message)
    if tags.get(PHOTOMETRIC, (1,))[0] in CIELAB:
        message = "is a TIFF in L*a*b* colours; export it in RGB"
        raise HeaderError(message)
    end = max(
        (
            offset + count
            for offsets, counts in (STRIPS, TILES)
            for offset, count in zip(tags.get(offsets, ()), tags.get(counts, ()), strict=False)
        ),
        default=len(data) + 1,
    )
    width, height = tags.get(WIDTH, (0,))[0], tags.get(HEIGHT, (0,))[0]
    return Header("TIFF", width, height, _orientation(tags), end <= len(data))


def _exif_orientation(data: bytes) -> int:
    """Read the orientation of an Exif block; a damaged one says nothing."""
    try:
        return _orientation(_tags(data))
    except (struct.error, IndexError):
        return 1


def _orientation(tags: dict[int, tuple[int, ...]]) -> int:
    """Return the orientation, upright where it is not one of the eight."""
    orientation = tags.get(ORIENTATION, (1,))[0]
    return orientation if 1 <= orientation <= 8 else 1


def _tags(data: bytes) -> dict[int, tuple[int, ...]]:
    """Read the tags of the first directory that hold whole numbers."""
    order = "<" if data[:2] == b"II" else ">"
    start = struct.unpack_from(f"{order}I", data, 4)[0]
    tags = {}
    for entry in range(struct.unpack_from(f"{order}H", data, start)[0]):
        place = start + 2 + 12 * entry
        tag, kind, count = struct.unpack_from(f"{order}HHI", data, place)
        if kind not in TYPES or count == 0:
            continue
        # up to four bytes stand in the entry itself
        inside = count * struct.calcsize(TYPES[kind]) <= 4
        at = place + 8 if inside else struct.unpack_from(f"{order}I", data, place + 8)[0]
        if count > len(data):
            message = "is damaged: a tag is longer than the file; export it again"
            raise HeaderError(message)
        tags[tag] = struct.unpack_from(f"{order}{count}{TYPES[kind]}", data, at)
    return tags


def _need_bits(bits: int, known: tuple[int, ...], kind: str) -> None:
    """Refuse a depth that is not read."""
    if bits not in known:
        message = f"is a {kind} of {bits} bits a channel; export it with 8 or 16 bits in TIFF, or 8 in JPEG"
        raise HeaderError(message)
