"""Bad input, through the real command: exit 2, one line for each fault, nothing on stdout, files intact."""

from __future__ import annotations

import json
import resource
from pathlib import Path
from typing import Any

import pytest

from tests import zoo_results
from tests.command import UNPRIVILEGED, assert_refused, run

HUNDRED_MB = 100 * 1024 * 1024
NAME = "q.fragment.json"


def _write(folder: Path, text: str | bytes) -> Path:
    path = folder / NAME
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


def _text(**changes: Any) -> str:  # noqa: ANN401
    return json.dumps(zoo_results.record(**changes))


def _replaced(old: str, new: str) -> str:
    text = _text()
    assert old in text
    return text.replace(old, new, 1)


@pytest.mark.parametrize(
    ("content", "said"),
    [
        pytest.param("", "empty", id="empty"),
        pytest.param("no record at all", "JSON", id="not JSON"),
        pytest.param(_text()[:-40], "JSON", id="cut off"),
        pytest.param("[1, 2]", "", id="a list"),
        pytest.param(b"\xff\xfe\x00{", "", id="not UTF-8"),
        pytest.param("[" * 200_000, "", id="deep nesting"),
        pytest.param('{"a":' * 100_000 + "1" + "}" * 100_000, "", id="deep nesting that ends"),
        pytest.param(_replaced('"schema": 1', '"schema": 99'), "schema", id="wrong schema number"),
        pytest.param(_replaced('"mm": 40', '"mm": NaN'), "views[0].scale.marks[1].mm", id="NaN"),
        pytest.param(_replaced('"mm": 40', '"mm": Infinity'), "views[0].scale.marks[1].mm", id="infinite"),
        pytest.param(_replaced('"mm": 40', '"mm": 1e999'), "views[0].scale.marks[1].mm", id="beyond doubles"),
        pytest.param(_replaced('"mm": 40', '"mm": ' + "9" * 5000), "", id="5000 digits"),
        pytest.param(_replaced('"name": "Tell Amat 12"', r'"name": "\ud800"'), "name", id="half a character"),
        pytest.param(_replaced('"findspot"', '"findsp\\u001b[31mot\\n"'), "findsp", id="a key that commands"),
    ],
)
def test_a_file_that_is_no_record_is_refused_in_one_line(
    tmp_path: Path, content: str | bytes, said: str
) -> None:
    _write(tmp_path, content)
    ran = run("measure", NAME, "--json", cwd=tmp_path)
    assert_refused(ran, said)
    assert ran.err.startswith(f"layout: {NAME}: ")
    assert "\x1b" not in ran.err


def test_each_fault_has_its_own_line_and_place(tmp_path: Path) -> None:
    record = zoo_results.record()
    record["views"][0]["rulings"][3]["points"][2] = [7012.0, 88.5]
    record["views"][0]["face"] = "front"
    record["colour"] = "red"
    _write(tmp_path, json.dumps(record))
    ran = run("measure", NAME, cwd=tmp_path)
    assert ran.code == 2
    assert ran.out == ""
    assert all(line.startswith(f"layout: {NAME}: ") for line in ran.err.splitlines())
    assert "views[0].face: " in ran.err
    assert "colour" in ran.err


def test_huge_but_finite_numbers_lead_to_no_traceback(tmp_path: Path) -> None:
    for number in ("1e308", "-1e308", "1e-308"):
        _write(tmp_path, _replaced('"mm": 40', f'"mm": {number}'))
        ran = run("measure", NAME, "--json", cwd=tmp_path)
        assert ran.code in (0, 2)
        assert "Traceback" not in ran.err
        assert ran.code == 0 or ran.err.count("layout: ") == len(ran.err.splitlines())
        assert "NaN" not in ran.out
        assert "Infinity" not in ran.out


def test_a_file_of_100_mb_is_refused_before_it_is_read(tmp_path: Path) -> None:
    with (tmp_path / NAME).open("wb") as file:
        file.truncate(HUNDRED_MB)
    assert_refused(run("measure", NAME, cwd=tmp_path), "MB")


def test_what_is_no_readable_file_is_refused(tmp_path: Path) -> None:
    assert_refused(run("measure", NAME, cwd=tmp_path), NAME)
    (tmp_path / NAME).mkdir()
    assert_refused(run("measure", NAME, cwd=tmp_path), "folder")
    assert_refused(run("check", NAME, cwd=tmp_path), "folder")


def test_a_record_without_permission_is_refused(tmp_path: Path) -> None:
    _write(tmp_path, _text()).chmod(0o000)
    ran = run("measure", NAME, cwd=tmp_path, prefix=UNPRIVILEGED)
    assert_refused(ran, "permission")
    assert NAME in ran.err


def test_a_missing_photograph_hinders_the_check_only(tmp_path: Path) -> None:
    _write(tmp_path, _text())
    assert run("measure", NAME, cwd=tmp_path).code == 0
    assert run("sheet", NAME, "-o", "sheet.html", cwd=tmp_path).code == 0
    checked = run("check", NAME, cwd=tmp_path)
    assert checked.code == 1
    assert "ta12.png" in checked.out


def test_an_output_that_cannot_be_written_is_refused_and_the_old_one_stays(tmp_path: Path) -> None:
    _write(tmp_path, _text())
    folder = tmp_path / "out"
    folder.mkdir()
    old = folder / "sheet.html"
    old.write_text("old")
    folder.chmod(0o500)
    ran = run("sheet", NAME, "-o", "out/sheet.html", cwd=tmp_path, prefix=UNPRIVILEGED)
    folder.chmod(0o700)
    assert_refused(ran, "out/sheet.html")
    assert old.read_text() == "old"
    assert_refused(run("sheet", NAME, "-o", "nowhere/sheet.html", cwd=tmp_path), "nowhere/sheet.html")
    (tmp_path / "page.html").mkdir()
    assert_refused(run("sheet", NAME, "-o", "page.html", cwd=tmp_path), "page.html")


def test_a_full_disk_leaves_the_old_file_and_no_rubbish(tmp_path: Path) -> None:
    _write(tmp_path, _text())
    old = tmp_path / "sheet.html"
    old.write_text("old")

    def fill() -> None:
        resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))

    ran = run("sheet", NAME, "-o", "sheet.html", cwd=tmp_path, before=fill, PYTHONDONTWRITEBYTECODE="1")
    assert_refused(ran, "sheet.html")
    assert old.read_text() == "old"
    assert sorted(path.name for path in tmp_path.iterdir()) == [NAME, "sheet.html"]


def test_results_that_nobody_can_take_are_an_error_in_one_line(tmp_path: Path) -> None:
    _write(tmp_path, _text())
    ran = run("measure", NAME, "--json", cwd=tmp_path, prefix=("sh", "-c", '"$@" > /dev/full', "sh"))
    assert_refused(ran, "stdout: ")


def test_the_record_is_never_overwritten_by_a_sheet(tmp_path: Path) -> None:
    before = _write(tmp_path, _text()).read_bytes()
    assert_refused(run("sheet", NAME, "-o", NAME, cwd=tmp_path), "record")
    (tmp_path / "link.json").symlink_to(NAME)
    assert_refused(run("sheet", NAME, "-o", "link.json", cwd=tmp_path), "record")
    assert (tmp_path / NAME).read_bytes() == before


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["measure"], "RECORD"),
        (["measure", NAME, "--colour"], "--colour"),
        (["measure", NAME, "--draws", "5"], "--draws"),
        (["measure", NAME, "--draws", "2000000"], "--draws"),
        (["measure", NAME, "--draws", "many"], "--draws"),
        (["measure", NAME, "--seed", "-1"], "--seed"),
        (["sheet", NAME], "--output"),
        (["sheet", NAME, "-o", "sheet.docx"], ".html, .csv or .json"),
        (["new", "photo.jpg", "-o", "photo.jpg"], ".fragment.json"),
        (["new", "photo.jpg", "-o", "photo.fragment.json"], "photo.jpg"),
        (["weigh", NAME], "weigh"),
        (["demo", NAME], "folder"),
    ],
)
def test_a_wrong_call_is_refused_in_one_line(tmp_path: Path, arguments: list[str], said: str) -> None:
    _write(tmp_path, _text())
    assert_refused(run(*arguments, cwd=tmp_path), said)
    assert [path.name for path in tmp_path.iterdir()] == [NAME]
