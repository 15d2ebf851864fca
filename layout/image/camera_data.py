"""What the camera wrote into the photograph about its lens, and the distance that follows from it.

Exif 2.3, tag numbers from memory. Where the numbers are damaged, absent or against each other there is no answer:
a distance that nobody measured is only a suggestion, with an honest spread.

The spread is put together from these standard uncertainties, each relative to the distance; m is the magnification
on the sensor, a few hundredths for a telephone and up to a fifth for a large sensor close to a tablet:

- the 35 mm equivalent is a whole number of mm: 0.29 mm of it;
- whether it keeps the picture's diagonal or its width, which makers do differently: half of the difference;
- the focal length as written, against the true one: 2 %, and the rounding of what is written;
- close by, the image stands further behind the lens than the focal length, by 1 + m, or, in a lens that shortens
  itself when it focuses, does not: half way between the two, give or take m / 2;
- the point from which the lens sees, its entrance pupil, is not where its thin model stands: m / 4.
"""

from __future__ import annotations

import math
import struct
from dataclasses import dataclass
from pathlib import Path

from layout.errors import PhotographError
from layout.files import reason
from layout.image.headers import PNG_SIGNATURE

# tags of the first directory and of the Exif directory
EXIF_DIRECTORY = 34665
FOCAL_LENGTH, FOCAL_35MM, SUBJECT_DISTANCE, DIGITAL_ZOOM = 37386, 41989, 37382, 41988
PLANE_X, PLANE_Y, PLANE_UNIT = 41486, 41487, 41488
STORED_WIDTH, STORED_HEIGHT = 40962, 40963

# bytes and struct codes of the types that hold numbers; a rational is two of them
TYPES = {1: "B", 3: "H", 4: "I", 5: "II", 9: "i", 10: "ii"}
MOST_ENTRIES = 1000
UNITS_MM = {2: 25.4, 3: 10.0, 4: 1.0, 5: 0.001}
DIAGONAL_35MM = math.hypot(36.0, 24.0)
WIDTH_35MM = 36.0

NOMINAL_SD = 0.02
"""Of the focal length as written, against the true one: an assumption."""
UNKNOWN_CROP_SD = 0.05
"""Where the camera did not write how large its picture was: it may have been cropped since."""
AT_ODDS = 3.0
SAME_SHAPE = 0.01
SHORTEST_MM, LONGEST_MM = 1.0, 3000.0


@dataclass(frozen=True)
class CameraData:
    """What the camera says of itself; None where it says nothing, or what cannot be.

    ``focal_mm`` is the focal length, ``focal_35mm`` its equivalent for a picture of 36 mm by 24 mm,
    ``sensor_px_per_mm`` the resolution (x, y) of the sensor, ``size_px`` the picture as it was taken, width and
    height before it was turned upright, ``subject_mm`` the distance at which the camera focused, ``digital_zoom``
    how many times the picture was enlarged.
    """

    focal_mm: float | None = None
    focal_35mm: float | None = None
    sensor_px_per_mm: tuple[float, float] | None = None
    size_px: tuple[int, int] | None = None
    subject_mm: float | None = None
    digital_zoom: float | None = None


def read_camera_data(path: str | Path) -> CameraData | None:
    """Read what the camera wrote into a photograph.

    Returns
    -------
    CameraData or None
        None where it wrote nothing about its lens, or nothing that can be read.

    Raises
    ------
    PhotographError
        If there is no such file, or it cannot be read.
    """
    path = Path(path)
    try:
        if path.exists() and not path.is_file():
            text = "is no file but a folder or a device; name a photograph"
            raise PhotographError(text, file=path)
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        text = f"cannot be read: {reason(error)}"
        raise PhotographError(text, file=path) from None
    return camera_data_of(data)


def camera_data_of(data: bytes) -> CameraData | None:
    """Read what the camera wrote, from the bytes of a JPEG, PNG or TIFF; None where nothing can be read."""
    try:
        tags = _exif_tags(_exif_block(data))
    except (struct.error, IndexError, OverflowError):
        return None
    found = CameraData(
        focal_mm=_between(tags.get(FOCAL_LENGTH, 0.0), SHORTEST_MM, LONGEST_MM),
        focal_35mm=_between(tags.get(FOCAL_35MM, 0.0), SHORTEST_MM, LONGEST_MM),
        sensor_px_per_mm=_sensor(tags),
        size_px=_stored_size(tags),
        subject_mm=_between(1000 * tags.get(SUBJECT_DISTANCE, 0.0), 1.0, 1e6),
        digital_zoom=_between(tags.get(DIGITAL_ZOOM, 0.0), 0.01, 1000),
    )
    about_lens = (found.focal_mm, found.focal_35mm, found.sensor_px_per_mm, found.subject_mm)
    return None if all(value is None for value in about_lens) else found


def focal_px(camera: CameraData, size_px: tuple[int, int]) -> tuple[float, float] | None:
    """Return the focal length in pixels, for an object far away, and its relative standard uncertainty.

    Parameters
    ----------
    camera
        What the camera wrote.
    size_px
        Width and height of the photograph as it is now; either side may be the longer one.

    Returns
    -------
    (focal_px, relative_sd) or None
        None where the photograph was cropped or enlarged, where nothing is known, or where the 35 mm equivalent
        and the sensor's resolution are against each other.

    Examples
    --------
    >>> value, sd = focal_px(CameraData(focal_35mm=50.0, size_px=(6000, 4000)), (6000, 4000))
    >>> round(value), round(sd, 3)
    (8333, 0.021)
    >>> focal_px(CameraData(focal_35mm=50.0, size_px=(6000, 4000)), (3000, 3000)) is None
    True
    """
    reduced = _reduction(camera, size_px)
    if reduced is None or camera.digital_zoom not in (None, 1.0):
        return None
    found = [*_from_equivalent(camera, size_px), *_from_sensor(camera, reduced)]
    if not found:
        return None
    if len(found) == 2:
        (first, first_sd), (second, second_sd) = found
        if abs(math.log(first / second)) > AT_ODDS * math.hypot(first_sd, second_sd, NOMINAL_SD):
            return None
    # both rest on what is written about one lens: the better one counts, and nothing is averaged away
    value, sd = min(found, key=lambda pair: pair[1])
    return value, math.hypot(sd, NOMINAL_SD, 0.0 if camera.size_px else UNKNOWN_CROP_SD)


def suggest_distance(
    camera: CameraData, size_px: tuple[int, int], mm_per_px: float
) -> tuple[float, float] | None:
    """Suggest how far the lens stood from the plane whose scale is known.

    The assumption: the photograph is not cropped, and shows the plane about square.

    Parameters
    ----------
    camera
        What the camera wrote.
    size_px
        Width and height of the photograph.
    mm_per_px
        Scale in that plane.

    Returns
    -------
    (mm, sd) or None
        Distance and standard uncertainty, mm; None where ``focal_px`` is None.

    Examples
    --------
    >>> distance, sd = suggest_distance(CameraData(focal_mm=50.0, focal_35mm=50.0), (6000, 4000), 0.05)
    >>> round(distance), round(sd)
    (442, 38)
    """
    focal = focal_px(camera, size_px)
    if focal is None or not 0 < mm_per_px < math.inf:
        return None
    # far away a pinhole: distance = focal length in px times mm per px
    far, relative = focal[0] * mm_per_px, focal[1]
    magnification, spread = _magnification(camera, size_px, mm_per_px, far)
    # a thin lens: v = f (1 + m) behind, u = f (1 + m) / m before it; one that shortens itself keeps v = f
    mm = far * (1 + magnification / 2)
    return mm, mm * math.hypot(relative, magnification / 2, magnification / 4, spread / 2)


def _magnification(
    camera: CameraData, size_px: tuple[int, int], mm_per_px: float, far_mm: float
) -> tuple[float, float]:
    """Return how large the object stands on the sensor, and the standard uncertainty of that."""
    if camera.focal_mm is not None:
        return min(camera.focal_mm / far_mm, 1.0), 0.0
    # the sensor is of unknown size, up to 36 mm wide
    most = min(WIDTH_35MM / (max(size_px) * mm_per_px), 1.0)
    return most / 2, most / 2


def _from_equivalent(camera: CameraData, size_px: tuple[int, int]) -> list[tuple[float, float]]:
    """Return the focal length in px by the 35 mm equivalent and its relative sd, or nothing."""
    if camera.focal_35mm is None:
        return []
    by_diagonal = math.hypot(*size_px) / DIAGONAL_35MM
    by_width = max(size_px) / WIDTH_35MM
    rounding = 0.5 / math.sqrt(3) / camera.focal_35mm
    return [
        (camera.focal_35mm * by_diagonal, math.hypot(rounding, abs(math.log(by_diagonal / by_width)) / 2))
    ]


def _from_sensor(camera: CameraData, reduced: float) -> list[tuple[float, float]]:
    """Return the focal length in px by the resolution of the sensor and its relative sd, or nothing."""
    if camera.focal_mm is None or camera.sensor_px_per_mm is None:
        return []
    across, down = camera.sensor_px_per_mm
    # a whole number of mm has probably been rounded to it, another one to a tenth
    step = 1.0 if camera.focal_mm == round(camera.focal_mm) and camera.focal_mm >= 10 else 0.1
    rounding = step / 2 / math.sqrt(3) / camera.focal_mm
    uneven = abs(math.log(across / down)) / 2
    return [(camera.focal_mm * math.sqrt(across * down) * reduced, math.hypot(rounding, uneven))]


def _reduction(camera: CameraData, size_px: tuple[int, int]) -> float | None:
    """Return how many times smaller the photograph is than it was taken; None where it was cropped."""
    if camera.size_px is None:
        return 1.0
    (short, long), (short_then, long_then) = sorted(size_px), sorted(camera.size_px)
    # a pixel or two are lost when a picture is made smaller
    if abs(math.log(short * long_then / (long * short_then))) > SAME_SHAPE:
        return None
    return math.sqrt(short * long / (short_then * long_then))


def _sensor(tags: dict[int, float]) -> tuple[float, float] | None:
    """Return the resolution of the sensor in pixels per mm; a unit that is missing is the inch."""
    unit = UNITS_MM.get(int(tags.get(PLANE_UNIT, 2.0)))
    if unit is None:
        return None
    across, down = (_between(tags.get(tag, 0.0) / unit, 1.0, 100_000.0) for tag in (PLANE_X, PLANE_Y))
    return None if across is None or down is None else (across, down)


def _stored_size(tags: dict[int, float]) -> tuple[int, int] | None:
    """Return the size that the camera wrote."""
    width, height = (_between(tags.get(tag, 0.0), 1, 1e6) for tag in (STORED_WIDTH, STORED_HEIGHT))
    return None if width is None or height is None else (int(width), int(height))


def _between(value: float, least: float, most: float) -> float | None:
    """Return a number if it can be true; zero means unknown."""
    return value if least <= value <= most else None


def _exif_block(data: bytes) -> bytes:
    """Return the TIFF structure that holds the tags, from a file of any of the three kinds; empty without one."""
    if data[:4] in (b"II*\0", b"MM\0*"):
        return data
    if data.startswith(PNG_SIGNATURE):
        place = len(PNG_SIGNATURE)
        while place + 12 <= len(data):
            length, kind = struct.unpack_from(">I4s", data, place)
            if kind == b"eXIf":
                return data[place + 8 : place + 8 + length]
            place += 12 + length
    elif data.startswith(b"\xff\xd8\xff"):
        place = 2
        while place + 4 <= len(data) and data[place] == 0xFF:
            marker, length = struct.unpack_from(">xBH", data, place)
            if marker == 0xFF:
                # fill bytes may precede a marker
                place += 1
                continue
            if marker in (0xD9, 0xDA):
                break
            if marker == 0xE1 and data[place + 4 : place + 10] == b"Exif\0\0":
                return data[place + 10 : place + 2 + length]
            place += 2 + length
    return b""


def _exif_tags(block: bytes) -> dict[int, float]:
    """Return the numbers of the Exif directory, to which the first directory points."""
    if block[:4] not in (b"II*\0", b"MM\0*"):
        return {}
    order = "<" if block[:2] == b"II" else ">"
    main = _directory(block, order, struct.unpack_from(f"{order}I", block, 4)[0])
    return _directory(block, order, int(main[EXIF_DIRECTORY])) if EXIF_DIRECTORY in main else {}


def _directory(block: bytes, order: str, start: int) -> dict[int, float]:
    """Read the tags of a directory that hold numbers; one that lies outside of the block is left out."""
    count = struct.unpack_from(f"{order}H", block, start)[0]
    tags: dict[int, float] = {}
    for entry in range(min(count, MOST_ENTRIES)):
        place = start + 2 + 12 * entry
        tag, kind, length = struct.unpack_from(f"{order}HHI", block, place)
        if kind not in TYPES or not 0 < length <= len(block):
            continue
        form = f"{order}{TYPES[kind]}"
        # up to four bytes stand in the entry itself; of many numbers the first is all that is needed
        inside = length * struct.calcsize(form) <= 4
        at = place + 8 if inside else struct.unpack_from(f"{order}I", block, place + 8)[0]
        if at + struct.calcsize(form) <= len(block):
            numbers = struct.unpack_from(form, block, at)
            tags[tag] = _ratio(*numbers) if len(numbers) == 2 else float(numbers[0])
    return tags


def _ratio(above: int, below: int) -> float:
    """Return a rational number; zero, which means unknown, where it divides by zero."""
    return above / below if below else 0.0
