"""What the camera wrote into a photograph, and the distance that follows from it."""

from __future__ import annotations

import math
import struct
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from PIL import Image, TiffImagePlugin

from layout.errors import PhotographError
from layout.image.camera_data import CameraData, camera_data_of, focal_px, read_camera_data, suggest_distance

SIZE = (6000, 4000)
# a full-frame camera with a lens of 50 mm, 6000 pixels on 36 mm
WRITTEN: dict[int, Any] = {
    37386: (50, 1),
    41989: 50,
    41486: (600_000, 3600),
    41487: (600_000, 3600),
    41488: 4,
    40962: 6000,
    40963: 4000,
    37382: (62, 100),
    41988: (1, 1),
}
READ = CameraData(
    focal_mm=50.0,
    focal_35mm=50.0,
    sensor_px_per_mm=(600_000 / 3600, 600_000 / 3600),
    size_px=SIZE,
    subject_mm=620.0,
    digital_zoom=1.0,
)


def exif_block(tags: dict[int, Any], order: str = "<") -> bytes:
    """Return a TIFF structure whose Exif directory holds these tags: pairs as rationals, numbers as long."""
    head = (b"II*\0" if order == "<" else b"MM\0*") + struct.pack(f"{order}I", 8)
    first = struct.pack(f"{order}HHHIII", 1, 34665, 4, 1, 26, 0)
    after = 26 + 2 + 12 * len(tags) + 4
    entries, more = b"", b""
    for tag, value in tags.items():
        if isinstance(value, tuple):
            entries += struct.pack(f"{order}HHII", tag, 5, 1, after + len(more))
            more += struct.pack(f"{order}II", *value)
        else:
            entries += struct.pack(f"{order}HHII", tag, 4, 1, value)
    return head + first + struct.pack(f"{order}H", len(tags)) + entries + bytes(4) + more


def jpeg_with(block: bytes) -> bytes:
    """Return the beginning of a JPEG that holds an Exif block, behind a segment of another kind."""
    other = b"\xff\xe0" + struct.pack(">H", 7) + b"JFIF\0"
    return (
        b"\xff\xd8"
        + other
        + b"\xff\xff\xe1"
        + struct.pack(">H", len(block) + 8)
        + b"Exif\0\0"
        + block
        + b"\xff\xd9"
    )


def png_with(block: bytes) -> bytes:
    """Return a PNG that holds an Exif block; its checksums are not looked at."""
    chunks = [(b"IHDR", bytes(13)), (b"eXIf", block), (b"IEND", b"")]
    return b"\x89PNG\r\n\x1a\n" + b"".join(
        struct.pack(">I", len(body)) + kind + body + bytes(4) for kind, body in chunks
    )


@pytest.mark.parametrize("order", ["<", ">"])
@pytest.mark.parametrize("wrapped", [jpeg_with, png_with, bytes])
def test_every_kind_of_file_and_either_order_of_bytes_is_read(wrapped: Any, order: str) -> None:  # noqa: ANN401
    assert camera_data_of(wrapped(exif_block(WRITTEN, order))) == READ


@pytest.mark.parametrize("ending", ["jpg", "png"])
def test_what_another_program_wrote_is_read(tmp_path: Path, ending: str) -> None:
    path = tmp_path / f"camera.{ending}"
    exif = Image.Exif()
    rational = TiffImagePlugin.IFDRational
    exif[34665] = {37386: rational(243, 10), 41989: 37, 40962: 80, 40963: 60, 41988: rational(0, 1)}
    Image.fromarray(np.zeros((60, 80, 3), np.uint8)).save(path, exif=exif)
    assert read_camera_data(path) == CameraData(focal_mm=24.3, focal_35mm=37.0, size_px=(80, 60))


@pytest.mark.parametrize(
    ("unit", "per_mm"), [(2, 4000 / 25.4), (3, 400.0), (4, 4000.0), (None, 4000 / 25.4), (1, None), (9, None)]
)
def test_the_unit_of_the_sensors_resolution_is_honoured(unit: int | None, per_mm: float | None) -> None:
    tags = {41486: (4000, 1), 41487: (4000, 1), 37386: (24, 1)} | ({} if unit is None else {41488: unit})
    found = camera_data_of(exif_block(tags))
    assert found is not None
    assert found.sensor_px_per_mm == (None if per_mm is None else pytest.approx((per_mm, per_mm)))


@pytest.mark.parametrize(
    "tags",
    [
        {},
        {41989: 0},
        {37386: (0, 0)},
        {37386: (50, 0), 41989: 1_000_000},
        {37382: (0xFFFFFFFF, 1)},
        {40962: 6000, 40963: 4000},
    ],
)
def test_what_is_unknown_or_cannot_be_is_nothing(tags: dict[int, Any]) -> None:
    assert camera_data_of(jpeg_with(exif_block(tags))) is None


def test_a_photograph_without_camera_data_gives_none(tmp_path: Path) -> None:
    path = tmp_path / "plain.png"
    Image.fromarray(np.zeros((6, 8, 3), np.uint8)).save(path)
    assert read_camera_data(path) is None
    assert camera_data_of(b"") is None


def test_a_file_that_cannot_be_read_is_refused(tmp_path: Path) -> None:
    with pytest.raises(PhotographError, match=r"none\.jpg: cannot be read: there is no such file"):
        read_camera_data(tmp_path / "none.jpg")
    with pytest.raises(PhotographError, match="is no file but a folder"):
        read_camera_data(tmp_path)


@given(st.data())
def test_damaged_bytes_never_crash(data: st.DataObject) -> None:
    block = bytearray(exif_block(WRITTEN, data.draw(st.sampled_from("<>"))))
    for _ in range(data.draw(st.integers(1, 6))):
        block[data.draw(st.integers(4, len(block) - 1))] = data.draw(st.integers(0, 255))
    del block[data.draw(st.integers(8, len(block))) :]
    kinds: list[Any] = [jpeg_with, png_with, bytes]
    wrapped = bytearray(data.draw(st.sampled_from(kinds))(bytes(block)))
    if data.draw(st.booleans()):
        wrapped[data.draw(st.integers(0, min(40, len(wrapped) - 1)))] = data.draw(st.integers(0, 255))
    found = camera_data_of(bytes(wrapped))
    if found is not None:
        for answer in (focal_px(found, SIZE), suggest_distance(found, SIZE, 0.05)):
            assert answer is None or all(math.isfinite(value) and value > 0 for value in answer)


@given(st.binary(max_size=300), st.sampled_from([jpeg_with, png_with, bytes, lambda rest: b"II*\0" + rest]))
def test_random_bytes_never_crash(rest: bytes, wrapped: Any) -> None:  # noqa: ANN401
    camera_data_of(wrapped(rest))


def test_the_focal_length_in_pixels_by_both_ways() -> None:
    by_both = focal_px(READ, SIZE)
    by_equivalent = focal_px(CameraData(focal_35mm=50.0, size_px=SIZE), SIZE)
    by_sensor = focal_px(
        CameraData(focal_mm=50.0, sensor_px_per_mm=READ.sensor_px_per_mm, size_px=SIZE), SIZE
    )
    for found in (by_both, by_equivalent, by_sensor):
        assert found is not None
        # 50 mm of 36 mm, on which there are 6000 pixels
        assert found[0] == pytest.approx(50 / 36 * 6000)
        # the lens itself 2 %, and the rounding to a whole mm: 0.5 / sqrt(3) of 50
        assert found[1] == pytest.approx(math.hypot(0.02, 0.5 / math.sqrt(3) / 50))


def test_either_side_may_be_the_longer_one() -> None:
    assert focal_px(READ, (4000, 6000)) == focal_px(READ, SIZE)


def test_a_picture_made_smaller_has_a_shorter_focal_length() -> None:
    whole, half = focal_px(READ, SIZE), focal_px(READ, (3000, 2000))
    assert whole is not None
    assert half is not None
    assert half == pytest.approx((whole[0] / 2, whole[1]))


@pytest.mark.parametrize(
    ("camera", "size"),
    [
        (READ, (6000, 3000)),
        (READ, (4000, 4000)),
        (CameraData(focal_35mm=50.0, digital_zoom=2.0), SIZE),
        (CameraData(subject_mm=500.0), SIZE),
        (CameraData(focal_mm=50.0), SIZE),
        # the equivalent says 50 mm, the sensor that 50 mm are 75 mm: cropped, or wrong
        (CameraData(focal_mm=50.0, focal_35mm=50.0, sensor_px_per_mm=(250.0, 250.0)), SIZE),
    ],
)
def test_no_focal_length_follows_from_a_crop_or_a_contradiction(
    camera: CameraData, size: tuple[int, int]
) -> None:
    assert focal_px(camera, size) is None
    assert suggest_distance(camera, size, 0.05) is None


def test_less_that_is_known_widens_the_spread() -> None:
    known = focal_px(CameraData(focal_35mm=50.0, size_px=SIZE), SIZE)
    maybe_cropped = focal_px(CameraData(focal_35mm=50.0), SIZE)
    other_shape = focal_px(CameraData(focal_35mm=50.0, size_px=(4000, 3000)), (4000, 3000))
    rounded = focal_px(CameraData(focal_35mm=24.0, size_px=SIZE), SIZE)
    assert known is not None
    for wider in (maybe_cropped, other_shape, rounded):
        assert wider is not None
        assert wider[1] > known[1]


def lens_before(distance_mm: float, focal_mm: float, *, shortens: bool, pupil_mm: float) -> float:
    """Return the scale, mm per px of the full frame of 6000 pixels, of a plane so far from the entrance pupil."""
    pitch = 36 / 6000
    from_principal = distance_mm + pupil_mm
    # a thin lens: 1 / u + 1 / v = 1 / f; one that shortens itself keeps v = f
    behind = focal_mm if shortens else 1 / (1 / focal_mm - 1 / from_principal)
    return pitch * from_principal / behind


@pytest.mark.parametrize("shortens", [False, True])
@pytest.mark.parametrize("pupil_mm", [-10.0, 0.0, 10.0])
@pytest.mark.parametrize(
    ("distance_mm", "focal_mm"), [(400.0, 50.0), (620.0, 100.0), (900.0, 60.0), (300.0, 24.0)]
)
def test_the_true_distance_lies_within_two_standard_uncertainties(
    distance_mm: float, focal_mm: float, pupil_mm: float, *, shortens: bool
) -> None:
    camera = CameraData(focal_mm=focal_mm, focal_35mm=focal_mm, size_px=SIZE)
    scale = lens_before(distance_mm, focal_mm, shortens=shortens, pupil_mm=pupil_mm)
    found = suggest_distance(camera, SIZE, scale)
    assert found is not None
    assert abs(found[0] - distance_mm) < 2 * found[1]
    # and the spread says something
    assert found[1] < 0.2 * distance_mm


def test_far_away_the_lens_is_a_pinhole() -> None:
    found = suggest_distance(READ, SIZE, 10.0)
    assert found is not None
    assert found[0] == pytest.approx(50 / 36 * 6000 * 10.0, rel=1e-3)
    assert found[1] / found[0] == pytest.approx(math.hypot(0.02, 0.5 / math.sqrt(3) / 50), rel=1e-3)


def test_a_telephone_needs_no_true_focal_length() -> None:
    # equivalent of 26 mm, 4000 pixels wide, 0.08 mm to a pixel: 4:3, so that makers differ by 4 %
    found = suggest_distance(CameraData(focal_35mm=26.0, size_px=(4000, 3000)), (4000, 3000), 0.08)
    with_focal = suggest_distance(CameraData(6.8, 26.0, size_px=(4000, 3000)), (4000, 3000), 0.08)
    assert found is not None
    assert with_focal is not None
    assert with_focal[0] == pytest.approx(26 * 5000 / math.hypot(36, 24) * 0.08, rel=0.02)
    assert abs(found[0] - with_focal[0]) < found[1]
    assert with_focal[1] < found[1]


@pytest.mark.parametrize("mm_per_px", [0.0, -1.0, math.inf, math.nan])
def test_without_a_scale_there_is_no_distance(mm_per_px: float) -> None:
    assert suggest_distance(READ, SIZE, mm_per_px) is None
