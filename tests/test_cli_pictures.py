"""The commands that look into photographs, as a user runs them."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest

from layout.image.photograph import Pixels
from layout.lens import read_lens
from layout.record.model import Mark
from tests.command import run
from tests.pictures import card
from tests.pictures.bars import Bar, photograph

BAR = Bar(px_per_mm=9, turn_deg=4)
SIZE = (1400, 900)


def save(pixels: Pixels, path: Path) -> Path:
    """Write a picture."""
    assert cv2.imwrite(str(path), cv2.cvtColor(pixels, cv2.COLOR_RGB2BGR))
    return path


@pytest.fixture(scope="module")
def bar(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str, str]:
    """Return a photograph of a bar and two rough points on it."""
    picture = photograph(BAR)
    points = picture.to_px(np.array([[0.2, 0.5], [49.8, 2.0]]))
    path = save(picture.pixels, tmp_path_factory.mktemp("bar") / "bar.png")
    start, end = (f"{x:.0f},{y:.0f}" for x, y in points)
    return path, start, end


def test_ticks_print_marks_as_a_record_holds_them(bar: tuple[Path, str, str]) -> None:
    path, start, end = bar
    done = run("ticks", path.name, "--from", start, "--to", end, "--bar", "b", "--json", cwd=path.parent)
    assert (done.code, done.err) == (0, "")
    marks = [Mark.model_validate(mark) for mark in json.loads(done.out)]
    assert [mark.mm for mark in marks] == [float(n) for n in range(51)]
    assert {mark.bar for mark in marks} == {"b"}
    assert all(0 < mark.sd_px < 0.5 for mark in marks if mark.sd_px is not None)


def test_ticks_say_in_words_what_was_found(bar: tuple[Path, str, str]) -> None:
    path, start, end = bar
    done = run("ticks", path.name, "--from", start, "--to", end, cwd=path.parent)
    assert done.out.startswith("ticks, 1 mm apart: 51 seen from 0 to 50 mm\npitch ")
    assert len(done.out.splitlines()) == 51 + 3


def test_blocks_without_a_step_are_pointed_out(tmp_path: Path) -> None:
    picture = photograph(Bar("blocks", growth=0.3))
    (x0, y0), (x1, y1) = picture.to_px(np.array([[1.0, 2.0], [49.0, 2.5]]))
    save(picture.pixels, tmp_path / "b.png")
    done = run("ticks", "b.png", "--from", f"{x0},{y0}", "--to", f"{x1},{y1}", cwd=tmp_path)
    assert done.code == 0
    assert done.err == (
        "layout: b.png: blocks are taken to be 1 mm wide; give --step 5 or --step 10 if they are wider\n"
    )
    assert "dark blocks came out" in done.out


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ((), "bar.png: shows no scale card; point at a bar with --from X,Y --to X,Y"),
        (("--from", "1,2"), "needs both --from and --to, or neither to look for the scale card"),
        (("--from", "1,2", "--to", "here"), "--to: needs two numbers, as in 512,3720.5; has 'here'"),
        (
            ("--from", "10,10", "--to", "200,12"),
            "bar.png: finds no regular divisions from (10, 10) to (200, 12)",
        ),
        (("--from", "10,10", "--to", "9999,12"), "bar.png: (9999, 12) lies outside the photograph"),
    ],
)
def test_what_cannot_be_found_is_one_line(
    bar: tuple[Path, str, str], options: tuple[str, ...], message: str
) -> None:
    done = run("ticks", bar[0].name, *options, cwd=bar[0].parent)
    assert (done.code, done.out) == (2, "")
    assert done.err.startswith(f"layout: {message}")
    assert done.err.count("\n") == 1


def test_a_printed_card_is_found_without_pointing(tmp_path: Path) -> None:
    assert run("target", "-o", "card.svg", cwd=tmp_path).code == 0
    assert run("target", "-o", "card.pdf", cwd=tmp_path).code == 0
    assert (tmp_path / "card.pdf").read_bytes().startswith(b"%PDF-1.")
    svg = (tmp_path / "card.svg").read_text(encoding="utf-8")
    printed = card.printed_card(svg)
    camera = card.facing(SIZE, (72.0, 30.0), 8.0, tilts_deg=(12.0, -9.0, 5.0))
    seen = card.photograph(printed, (0.0, 0.0), camera, SIZE, card.Print(noise=0.01), 1)
    save(seen, tmp_path / "photo.png")
    done = run("ticks", "photo.png", "--json", cwd=tmp_path)
    marks = json.loads(done.out)
    assert len(marks) == 16
    assert all(mark["bar"] == "card" and len(mark["mm"]) == 2 for mark in marks)
    # a printer that made 99 mm of 100 made everything smaller by as much
    smaller = json.loads(run("ticks", "photo.png", "--printed", "99,60", "--json", cwd=tmp_path).out)
    assert [one["mm"][0] for one in smaller] == pytest.approx([0.99 * one["mm"][0] for one in marks])


def test_a_target_of_another_kind_is_refused(tmp_path: Path) -> None:
    done = run("target", "-o", "card.png", cwd=tmp_path)
    assert (done.code, done.err) == (
        2,
        "layout: card.png: a scale card is written as .pdf or .svg; name such a file\n",
    )


def test_a_lens_is_calibrated_and_its_file_can_be_read(tmp_path: Path) -> None:
    board = card.printed_board(10, 7, 12.0)
    names = []
    for number, (a, b) in enumerate([(3, 2), (25, 5), (-25, 8), (6, 28), (-5, -26), (20, -20)]):
        square_on = card.facing((900, 640), (48.0, 30.0), 5.0, tilts_deg=(float(a), float(b), 4.0 * number))
        camera = replace(square_on, lens=(-0.12, 0.03, 8e-4, -5e-4, 0.0))
        names.append(f"{number}.png")
        seen = card.photograph(board, (-24.0, -24.0), camera, (900, 640), card.Print(noise=0.01), number)
        save(seen, tmp_path / names[-1])
    done = run("lens", *names, "-o", "our.lens.json", cwd=tmp_path)
    assert done.code == 0
    assert "pictures used 6 of 6, reprojection error 0." in done.out
    found = read_lens(tmp_path / "our.lens.json")
    assert found.rms_px < 0.3
    few = run("lens", *names[:3], "-o", "few.lens.json", cwd=tmp_path)
    assert few.code == 2
    assert "needs 5 pictures or more" in few.err


def test_camera_data_go_into_a_new_record_and_it_says_so(tmp_path: Path) -> None:
    from PIL import Image

    picture = Image.new("RGB", (600, 400), (90, 80, 70))
    exif = Image.Exif()
    # Exif 2.3: 37386 focal length, 41989 equivalent for 35 mm film
    exif.get_ifd(0x8769).update({37386: 50.0, 41989: 50})
    picture.save(tmp_path / "a.jpg", exif=exif)
    done = run("new", "a.jpg", "-o", "n.fragment.json", cwd=tmp_path)
    assert done.code == 0
    assert "from the camera data" in done.err
    focal = json.loads((tmp_path / "n.fragment.json").read_text(encoding="utf-8"))["photographs"][0][
        "focal_length"
    ]
    # 50 mm on a frame of 36 mm: 600 / 36 * 50 px, and up to 10 % more when focused near
    assert focal["px"] == pytest.approx(600 / 36 * 50, rel=0.1)
    assert 0.03 < focal["sd"] / focal["px"] < 0.12
