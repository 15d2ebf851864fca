"""The commands as a user runs them."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import signal
import subprocess
import time
from pathlib import Path

import cv2
import numpy as np
import pytest

import layout
from layout import demo
from tests import zoo_results
from tests.command import command, environment, run

NAME = "ta12.fragment.json"
COMMANDS = ("demo", "new", "check", "measure", "rank", "sheet")
SLOW = ("cv2", "jinja2", "rich", "fastapi", "scipy.stats", "skimage")


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a folder with a record and the photograph that it names."""
    place = tmp_path_factory.mktemp("fragment")
    assert cv2.imwrite(str(place / "ta12.png"), np.full((2400, 3000), 90, np.uint8))
    sha256 = hashlib.sha256((place / "ta12.png").read_bytes()).hexdigest()
    photograph = {"id": "obv", "file": "ta12.png", "size": [3000, 2400], "sha256": sha256}
    (place / NAME).write_text(json.dumps(zoo_results.record(photographs=[photograph])))
    return place


def test_the_version_and_every_command_are_named(tmp_path: Path) -> None:
    assert run("--version", cwd=tmp_path).out == f"layout {layout.__version__}\n"
    helped = run("--help", cwd=tmp_path)
    assert (helped.code, helped.err) == (0, "")
    for name in COMMANDS:
        assert f"  {name} " in helped.out
    assert run(cwd=tmp_path).out == helped.out


def test_measure_prints_the_results_file(folder: Path) -> None:
    ran = run("measure", NAME, "--json", "--draws", 500, "--seed", 3, cwd=folder)
    assert (ran.code, ran.err) == (0, "")
    measured = layout.measure(layout.read(folder / NAME), draws=500, seed=3)
    assert json.loads(ran.out) == measured.to_json()
    assert ran == run("measure", NAME, "--json", "--draws", 500, "--seed", 3, cwd=folder)


def test_measure_prints_numbers_with_their_intervals(folder: Path) -> None:
    ran = run("measure", NAME, cwd=folder, LANG="C", LC_ALL="C", PYTHONUTF8="0", PYTHONIOENCODING="")
    assert (ran.code, ran.err) == (0, "")
    width = layout.measure(layout.read(folder / NAME)).views[0].columns[0].width.summary()
    from layout.sheet.numbers import interval, shown

    assert f"{shown(width)}  {interval(width)}" in ran.out
    assert "cm²" in ran.out


def test_measure_imports_nothing_that_it_does_not_need(folder: Path) -> None:
    ran = run("measure", NAME, "--json", cwd=folder, PYTHONPROFILEIMPORTTIME="1")
    imported = {line.split("|")[-1].strip() for line in ran.err.splitlines()}
    assert "numpy" in imported
    assert imported.isdisjoint(SLOW)


def test_rank_prints_the_candidates_best_first_and_what_decides(folder: Path) -> None:
    as_json = run("rank", NAME, "--json", cwd=folder)
    ranking = json.loads(as_json.out)
    weights = [row["weight"] for row in ranking["ranking"] if row["weight"] is not None]
    assert weights == sorted(weights, reverse=True)
    assert {row["name"] for row in ranking["ranking"]} == {"reciprocals", "squares", "none of these"}
    ran = run("rank", NAME, cwd=folder)
    assert (ran.code, ran.err) == (0, "")
    said = " ".join(ran.out.split())
    assert " ".join(ranking["decides"].split()) in said
    assert "relative support within a list that a person made" in said


def test_rank_without_candidates_says_so(folder: Path) -> None:
    bare = folder / "bare.fragment.json"
    bare.write_text(json.dumps(zoo_results.record(candidates=[])))
    ran = run("rank", bare.name, cwd=folder)
    assert ran.code == 2
    assert len(ran.err.splitlines()) == 1
    assert "candidate" in ran.err


def test_a_sheet_is_the_same_bytes_each_time(folder: Path) -> None:
    for form in ("html", "csv", "json"):
        sheets = []
        for seed in ("1", "2"):
            ran = run("sheet", NAME, "-o", f"sheet.{form}", cwd=folder, PYTHONHASHSEED=seed)
            assert (ran.code, ran.out) == (0, "")
            assert ran.err == f"layout: sheet.{form}: written\n"
            sheets.append((folder / f"sheet.{form}").read_bytes())
        assert sheets[0] == sheets[1]
    assert json.loads(sheets[0]) == layout.measure(layout.read(folder / NAME)).to_json()
    assert b"data:image/jpeg" in (folder / "sheet.html").read_bytes()


def test_check_notices_a_changed_photograph(folder: Path, tmp_path: Path) -> None:
    for name in (NAME, "ta12.png"):
        shutil.copy(folder / name, tmp_path)
    assert "ta12.png" not in "".join(
        line for line in run("check", NAME, cwd=tmp_path).out.splitlines() if "chang" in line
    )
    with (tmp_path / "ta12.png").open("ab") as file:
        file.write(b"\0")
    changed = run("check", NAME, cwd=tmp_path)
    assert changed.code == 1
    assert changed.err == ""
    assert "SHA-256" in changed.out


def test_new_begins_a_record_that_the_other_commands_take(folder: Path, tmp_path: Path) -> None:
    (tmp_path / "photographs").mkdir()
    for name in ("ta12.png", "ta12 edge.png"):
        shutil.copy(folder / "ta12.png", tmp_path / "photographs" / name)
    photographs = ("photographs/ta12.png", "photographs/ta12 edge.png")
    begun = run("new", *photographs, "-o", "q17.fragment.json", cwd=tmp_path)
    assert (begun.code, begun.out) == (0, "")
    record = layout.read(tmp_path / "q17.fragment.json")
    assert record.name == "q17"
    assert [one.file for one in record.photographs] == list(photographs)
    assert record.photographs[0].size == (3000, 2400)
    sha256 = hashlib.sha256((folder / "ta12.png").read_bytes()).hexdigest()
    assert record.photographs[0].sha256 == sha256
    assert [(view.face, view.photograph) for view in record.views] == [("obverse", record.photographs[0].id)]
    # a second time it would destroy work
    before = (tmp_path / "q17.fragment.json").read_bytes()
    again = run("new", photographs[0], "-o", "q17.fragment.json", "--name", "Q 17", cwd=tmp_path)
    assert (again.code, len(again.err.splitlines())) == (2, 1)
    assert (tmp_path / "q17.fragment.json").read_bytes() == before
    measured = run("measure", "q17.fragment.json", cwd=tmp_path)
    assert measured.code == 0
    assert "What could not be computed" in measured.out
    assert run("check", "q17.fragment.json", cwd=tmp_path).code == 1


def test_the_demo_does_the_whole_job_and_keeps_what_a_person_changed(tmp_path: Path) -> None:
    first = run("demo", cwd=tmp_path)
    assert (first.code, first.err) == (0, "")
    place = tmp_path / "demo"
    for name in ("sheet.html", "sheet.csv", "sheet.json"):
        assert (place / name).stat().st_size > 1000
        assert f"demo/{name}" in first.out
    assert "sign widths" in first.out
    record, kept = demo.unpack(place)
    assert kept == ()
    # a person goes on with the record: the demo works on it and leaves it as it is
    changed = json.loads(record.read_text())
    changed["name"] = "changed by a person"
    record.write_text(json.dumps(changed))
    again = run("demo", cwd=tmp_path)
    assert again.code == 0
    assert f"{record.name}: differs" in again.err
    assert json.loads(record.read_text())["name"] == "changed by a person"
    assert json.loads((place / "sheet.json").read_text())["name"] == "changed by a person"


def test_a_reader_who_has_seen_enough_is_no_error(folder: Path) -> None:
    process = subprocess.Popen(
        command("measure", NAME, "--json"),
        cwd=folder,
        env=environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    assert process.stdout is not None
    process.stdout.close()
    assert process.stderr is not None
    err = process.stderr.read()
    process.stderr.close()
    assert process.wait() == 0
    assert err == b""


def test_an_interrupt_is_one_line(folder: Path) -> None:
    process = subprocess.Popen(
        command("measure", NAME, "--draws", 1_000_000),
        cwd=folder,
        env=environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    maps = Path(f"/proc/{process.pid}/maps")
    while process.poll() is None and "_umath_linalg" not in maps.read_text():
        time.sleep(0.01)
    time.sleep(1.0)  # a million draws take far longer than what is still to be loaded
    os.kill(process.pid, signal.SIGINT)
    out, err = process.communicate()
    assert process.returncode == 130
    assert out == b""
    assert err.decode().splitlines() == ["layout: interrupted; nothing was left half written"]
