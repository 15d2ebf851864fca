"""Photographs of every kind that is read, upright and whole, and those that are refused."""

from __future__ import annotations

import hashlib
import os
import struct
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image

from layout.errors import PhotographError
from layout.image.photograph import LARGEST_FILE, probe, read_photograph, sha256_of
from tests.command import ROOT, UNPRIVILEGED

# four fields of colour, wider than high: each of the eight orientations looks different
RED, GREEN, BLUE, PALE = (200, 30, 30), (30, 200, 30), (30, 30, 200), (220, 220, 220)
HEIGHT, WIDTH = 48, 80


def fields() -> NDArray[np.uint8]:
    """Return red and green above blue and pale, (48, 80, 3)."""
    rows = [
        np.hstack([np.full((HEIGHT // 2, WIDTH // 2, 3), colour) for colour in row])
        for row in ((RED, GREEN), (BLUE, PALE))
    ]
    return np.vstack(rows).astype(np.uint8)


def corners(pixels: NDArray[Any]) -> list[tuple[int, ...]]:
    """Return the colours in the middles of the four quarters, row by row."""
    height, width = pixels.shape[:2]
    middles = [(height * i // 4, width * j // 4) for i in (1, 3) for j in (1, 3)]
    return [tuple(int(value) for value in pixels[middle]) for middle in middles]


def assert_colours(pixels: NDArray[Any], *expected: tuple[int, ...], within: int = 2) -> None:
    """Assert the four quarters' colours, as far as a JPEG keeps them."""
    np.testing.assert_allclose(corners(pixels), expected, atol=within)


# where the four fields stand in the upright picture: Exif 2.3, tag 274, from memory
UPRIGHT = {
    1: (RED, GREEN, BLUE, PALE),
    2: (GREEN, RED, PALE, BLUE),
    3: (PALE, BLUE, GREEN, RED),
    4: (BLUE, PALE, RED, GREEN),
    5: (RED, BLUE, GREEN, PALE),
    6: (BLUE, RED, PALE, GREEN),
    7: (PALE, GREEN, BLUE, RED),
    8: (GREEN, PALE, RED, BLUE),
}


@pytest.mark.parametrize("ending", ["jpg", "png", "tif"])
@pytest.mark.parametrize("orientation", UPRIGHT)
def test_every_orientation_is_turned_upright(tmp_path: Path, orientation: int, ending: str) -> None:
    path = tmp_path / f"turned.{ending}"
    exif = Image.Exif()
    exif[274] = orientation
    if ending == "tif":
        Image.fromarray(fields()).save(path, tiffinfo={274: orientation})
    else:
        Image.fromarray(fields()).save(path, exif=exif, quality=95)
    pixels = read_photograph(path)
    assert_colours(pixels, *UPRIGHT[orientation])
    assert probe(path) == (pixels.shape[1], pixels.shape[0])
    assert probe(path) == ((WIDTH, HEIGHT) if orientation < 5 else (HEIGHT, WIDTH))
    assert pixels.flags.c_contiguous


def test_an_orientation_that_does_not_exist_is_upright(tmp_path: Path) -> None:
    for orientation in (0, 9):
        exif = Image.Exif()
        exif[274] = orientation
        Image.fromarray(fields()).save(tmp_path / "a.jpg", exif=exif)
        assert probe(tmp_path / "a.jpg") == (WIDTH, HEIGHT)
        assert_colours(read_photograph(tmp_path / "a.jpg"), *UPRIGHT[1], within=4)


def test_a_damaged_exif_block_is_upright(tmp_path: Path) -> None:
    Image.fromarray(fields()).save(tmp_path / "a.jpg", exif=b"Exif\0\0II*\0\xff\xff\xff\x7f")
    assert probe(tmp_path / "a.jpg") == (WIDTH, HEIGHT)


@pytest.mark.parametrize("ending", ["png", "tif"])
@pytest.mark.parametrize("channels", [1, 3])
def test_sixteen_bits_stay_sixteen_bits(tmp_path: Path, ending: str, channels: int) -> None:
    import cv2

    path = tmp_path / f"deep.{ending}"
    stored = np.arange(HEIGHT * WIDTH * channels, dtype=np.uint16).reshape(HEIGHT, WIDTH, channels) * 5
    cv2.imwrite(str(path), stored)
    pixels = read_photograph(path)
    assert pixels.dtype == np.uint16
    assert probe(path) == (WIDTH, HEIGHT)
    # OpenCV writes blue first
    np.testing.assert_array_equal(pixels, np.broadcast_to(stored[..., ::-1], pixels.shape))


@pytest.mark.parametrize(
    ("mode", "name"),
    [
        ("CMYK", "a.jpg"),
        ("CMYK", "a.tif"),
        ("RGBA", "a.png"),
        ("RGBA", "a.tif"),
        ("YCbCr", "a.tif"),
        ("RGB", "a.png"),
    ],
)
def test_colours_of_other_kinds_become_rgb(tmp_path: Path, mode: str, name: str) -> None:
    Image.fromarray(fields()).convert(mode).save(tmp_path / name)
    pixels = read_photograph(tmp_path / name)
    assert pixels.dtype == np.uint8
    assert_colours(pixels, *UPRIGHT[1])


@pytest.mark.parametrize("name", ["a.png", "a.tif"])
def test_a_palette_becomes_rgb(tmp_path: Path, name: str) -> None:
    Image.fromarray(fields()).quantize(4).save(tmp_path / name)
    assert_colours(read_photograph(tmp_path / name), *UPRIGHT[1])


@pytest.mark.parametrize(("mode", "name"), [("L", "a.jpg"), ("L", "a.png"), ("L", "a.tif"), ("LA", "a.png")])
def test_grey_is_repeated_in_three_channels(tmp_path: Path, mode: str, name: str) -> None:
    Image.fromarray(fields()).convert(mode).save(tmp_path / name)
    pixels = read_photograph(tmp_path / name)
    assert pixels.shape == (HEIGHT, WIDTH, 3)
    # ITU-R BT.601 luma, as the writer documents it
    grey = [round(0.299 * red + 0.587 * green + 0.114 * blue) for red, green, blue in UPRIGHT[1]]
    assert_colours(pixels, *[(value,) * 3 for value in grey])


@pytest.mark.parametrize("compression", ["tiff_lzw", "tiff_deflate", "packbits", "jpeg"])
def test_compressed_tiffs_are_read(tmp_path: Path, compression: str) -> None:
    Image.fromarray(fields()).save(tmp_path / "a.tif", compression=compression)
    assert_colours(read_photograph(tmp_path / "a.tif"), *UPRIGHT[1], within=4)


def tiff(path: Path, changes: dict[int, int]) -> None:
    """Write a TIFF with some of its short tags changed."""
    Image.fromarray(fields()).save(path)
    data = bytearray(path.read_bytes())
    start = struct.unpack_from("<I", data, 4)[0]
    for entry in range(struct.unpack_from("<H", data, start)[0]):
        place = start + 2 + 12 * entry
        tag, _, count = struct.unpack_from("<HHI", data, place)
        if tag in changes:
            assert count == 1
            struct.pack_into("<I", data, place + 8, changes[tag])
    path.write_bytes(data)


def write_float(path: Path) -> None:
    """Write a TIFF of floating-point numbers."""
    Image.fromarray(np.zeros((HEIGHT, WIDTH), np.float32)).save(path)


def write_lines(path: Path) -> None:
    """Write a TIFF of one bit a pixel."""
    Image.fromarray(np.zeros((HEIGHT, WIDTH), bool)).save(path)


def write_lab(path: Path) -> None:
    """Write a TIFF in L*a*b* colours."""
    Image.fromarray(fields()).convert("LAB").save(path)


def write_raw(path: Path) -> None:
    """Write a TIFF whose first picture is a preview."""
    Image.fromarray(fields()).save(path, tiffinfo={254: 1})


@pytest.mark.parametrize(
    ("make", "said"),
    [
        (write_float, "is a TIFF of 32 bits a channel; export it with 8 or 16 bits"),
        (write_lines, "is a TIFF of 1 bits a channel"),
        (write_lab, r"is a TIFF in L\*a\*b\* colours; export it in RGB"),
        (write_raw, "begins with a preview, as raw files do; develop it"),
        (lambda path: tiff(path, {256: 0}), "says that it is 0 x 48 pixels large; export it again"),
        (
            lambda path: tiff(path, {256: 40_000, 257: 10_001}),
            "has 40000 x 10001 pixels; export it with 400 megapixels",
        ),
        (
            lambda path: path.write_bytes(b"II*\0\xff\xff\0\0"),
            "breaks off in its header; copy the photograph again",
        ),
        (lambda path: path.write_bytes(b"MM\0*"), "breaks off in its header"),
        (lambda path: path.write_bytes(b"\xff\xd8\xff\xe0"), "breaks off in its header"),
        (lambda path: path.write_bytes(b"\x89PNG\r\n\x1a\n"), "breaks off in its header"),
        (lambda path: path.write_bytes(b""), "is empty; copy the photograph again"),
        (
            lambda path: path.write_bytes(b"GIF89a" + bytes(100)),
            "is no JPEG, PNG or TIFF; export the photograph",
        ),
        (lambda path: path.write_bytes(b"{}"), "is no JPEG, PNG or TIFF"),
        (lambda path: path.mkdir(), "is no file but a folder or a device; name a photograph"),
        (lambda path: None, "there is no such photograph; check the name"),
    ],
)
def test_what_is_no_photograph_is_refused_without_decoding(
    tmp_path: Path, make: Callable[[Path], object], said: str
) -> None:
    path = tmp_path / "a.tif"
    make(path)
    for use in (probe, read_photograph):
        with pytest.raises(PhotographError, match=said) as raised:
            use(path)
        assert raised.value.file == path
        assert len(raised.value.lines()) == 1


def png_of(width: int, height: int) -> bytes:
    """Return a PNG that says it is so large and holds one byte of pixels (ISO/IEC 15948, from memory)."""
    import zlib

    def chunk(kind: bytes, data: bytes) -> bytes:
        return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))

    header = struct.pack(">IIBBBBB", width, height, 8, 0, 0, 0, 0)
    return (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", header)
        + chunk(b"IDAT", zlib.compress(b"\0"))
        + chunk(b"IEND", b"")
    )


def test_four_hundred_megapixels_are_the_limit(tmp_path: Path) -> None:
    (tmp_path / "a.png").write_bytes(png_of(20_000, 20_000))
    assert probe(tmp_path / "a.png") == (20_000, 20_000)
    (tmp_path / "a.png").write_bytes(png_of(20_000, 20_001))
    for use in (probe, read_photograph):
        with pytest.raises(
            PhotographError, match="has 20000 x 20001 pixels; export it with 400 megapixels or fewer"
        ):
            use(tmp_path / "a.png")


def test_a_file_too_large_for_a_photograph_is_not_read(tmp_path: Path) -> None:
    with (tmp_path / "a.tif").open("wb") as file:
        file.truncate(LARGEST_FILE + 1)
    with pytest.raises(PhotographError, match="is larger than 2500 MB; export a smaller photograph"):
        probe(tmp_path / "a.tif")


@pytest.mark.parametrize("ending", ["jpg", "png", "tif"])
@pytest.mark.parametrize("share", [0.3, 0.6, 0.9, 0.999])
def test_a_file_that_was_cut_off_is_refused(tmp_path: Path, ending: str, share: float) -> None:
    path = tmp_path / f"a.{ending}"
    noise = np.random.default_rng(3).integers(0, 255, (HEIGHT, WIDTH, 3), dtype=np.uint8)
    # a thumbnail has an end marker of its own, which must not pass for the photograph's
    Image.fromarray(noise).save(path, comment=b"\xff\xd9" if ending == "jpg" else b"")
    data = path.read_bytes()
    read_photograph(path)
    path.write_bytes(data[: int(len(data) * share)])
    with pytest.raises(
        PhotographError, match=r"breaks off (in its header|before its end); copy the photograph again"
    ):
        read_photograph(path)


@pytest.mark.parametrize("ending", ["jpg", "png"])
def test_bytes_behind_the_end_do_no_harm(tmp_path: Path, ending: str) -> None:
    path = tmp_path / f"a.{ending}"
    Image.fromarray(fields()).save(path, quality=95)
    with path.open("ab") as file:
        file.write(b"more" * 100)
    assert_colours(read_photograph(path), *UPRIGHT[1])


TRY = """
import sys
from layout.errors import PhotographError
from layout.image.photograph import probe, read_photograph, sha256_of
for use in map(globals().get, sys.argv[1].split(",")):
    for path in sys.argv[2:]:
        try:
            use(path)
        except PhotographError as error:
            print(error)
"""


def run_program(program: str, *arguments: object, prefix: tuple[str, ...] = ()) -> tuple[str, str]:
    """Run a program in a process of its own and return its stdout and stderr."""
    done = subprocess.run(
        [*prefix, sys.executable, "-c", program, *map(str, arguments)],
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        capture_output=True,
        text=True,
        check=True,
    )
    return done.stdout, done.stderr


def test_the_decoders_print_nothing(tmp_path: Path) -> None:
    empty, damaged = tmp_path / "a.png", tmp_path / "a.jpg"
    empty.write_bytes(png_of(64, 64))
    Image.fromarray(fields()).save(damaged)
    data = bytearray(damaged.read_bytes())
    data[-300:-2] = bytes(298)
    damaged.write_bytes(data)
    out, err = run_program(TRY, "read_photograph", empty, damaged)
    assert f"{empty}: is damaged or stored in a rare way; export it again\n" in out
    assert err == ""


def test_a_photograph_without_permission_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "a.png"
    Image.fromarray(fields()).save(path)
    path.chmod(0)
    out, _ = run_program(TRY, "sha256_of,probe,read_photograph", path, prefix=UNPRIVILEGED)
    assert out == f"{path}: permission denied; change the rights of the file\n" * 3


def test_the_hash_is_that_of_the_file(tmp_path: Path) -> None:
    # FIPS 180-4 example: SHA-256 of "abc", from memory
    (tmp_path / "a").write_bytes(b"abc")
    assert sha256_of(tmp_path / "a") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert sha256_of(str(tmp_path / "a")) == hashlib.sha256(b"abc").hexdigest()
    with pytest.raises(PhotographError, match=r"cannot be read .*null"):
        sha256_of("a\0")


def test_size_and_hash_need_no_decoder() -> None:
    program = """
import sys, layout.image.photograph, layout.record.check
print([name for name in ("cv2", "PIL", "scipy", "shapely") if name in sys.modules])
"""
    assert run_program(program) == ("[]\n", "")
