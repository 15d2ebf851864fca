"""Reading and writing records: nothing is lost, no input leads further than to a RecordError."""

from __future__ import annotations

import json
import os
import resource
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from layout.errors import RecordError
from layout.record.faults import shown
from layout.record.files import LARGEST_FILE, MOST_FAULTS, parse, read, to_text, write
from layout.record.model import LARGEST
from tests import zoo
from tests.command import ROOT, UNPRIVILEGED


def lines_of(data: bytes | str) -> list[str]:
    """Return what is wrong with the text of a record."""
    with pytest.raises(RecordError, match=r"\S") as raised:
        parse(data)
    return raised.value.lines()


def said_of(data: str) -> list[str]:
    """Return what is wrong with the text of a record, if anything is; any other exception fails the test."""
    try:
        parse(data)
    except RecordError as error:
        return error.lines()
    return []


TEXT = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)
NAME = TEXT.filter(bool)
NUMBER = st.floats(-LARGEST, LARGEST)
POSITIVE = st.floats(1e-6, LARGEST)
MEASURED = st.fixed_dictionaries({"mm": NUMBER, "sd": st.floats(0, LARGEST)})
POINT = st.tuples(st.floats(-0.5, 639.5), st.floats(-0.5, 479.5)).map(list)
POINTS = st.lists(POINT, max_size=4)
RULINGS = st.lists(
    st.fixed_dictionaries(
        {
            "id": NAME.filter(lambda name: name != "edge"),
            "runs": st.sampled_from(["vertical", "horizontal"]),
            "points": POINTS,
        },
        optional={"kind": st.sampled_from(["single", "double", "spacing", "writing"])},
    ),
    max_size=3,
    unique_by=lambda ruling: ruling["id"],
)
MARKS = st.lists(
    st.fixed_dictionaries(
        {"at": POINT, "mm": NUMBER | st.tuples(NUMBER, NUMBER).map(list)}, optional={"bar": NAME}
    ),
    max_size=1,
)
COLUMN = st.fixed_dictionaries(
    {}, optional={"heading": TEXT, "entries": st.lists(TEXT), "remains": st.lists(TEXT)}
)


@st.composite
def records(draw: st.DrawFn) -> dict[str, Any]:
    """Draw the values of a well-formed record."""
    values = zoo.smallest_record() | draw(
        st.fixed_dictionaries(
            {"name": NAME},
            optional={
                "remarks": TEXT,
                "thickness": MEASURED | st.none(),
                "asymmetry_percent": st.floats(0, 50) | st.none(),
                "lost": st.fixed_dictionaries(
                    {}, optional={"sides": st.sampled_from([[], ["left"], ["left", "right"]])}
                ),
                "series": st.dictionaries(NAME, st.lists(TEXT), max_size=2),
                "candidates": st.lists(
                    st.fixed_dictionaries({"name": NAME, "columns": st.lists(COLUMN, max_size=2)}),
                    max_size=2,
                    unique_by=lambda candidate: candidate["name"],
                ),
                "evidence": st.lists(
                    st.fixed_dictionaries({"about": st.just("width"), "mm": POSITIVE, "sd": POSITIVE}),
                    max_size=1,
                ),
            },
        )
    )
    values["views"][0] |= draw(
        st.fixed_dictionaries(
            {},
            optional={
                "pointing_px": POSITIVE | st.none(),
                "region": st.just([0, 0, 640, 480]) | st.none(),
                "scale": st.fixed_dictionaries(
                    {}, optional={"marks": MARKS, "ppi": POSITIVE | st.none(), "below_face": MEASURED}
                ),
                "rulings": RULINGS,
            },
        )
    )
    return values


@given(records())
@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
def test_reading_writing_and_reading_again_is_the_identity(values: dict[str, Any]) -> None:
    record = parse(json.dumps(values))
    text = to_text(record)
    assert parse(text) == record
    assert parse(text.encode()) == record
    assert to_text(parse(text)) == text


@given(
    st.recursive(
        st.none() | st.booleans() | st.floats() | st.integers() | st.text(),
        lambda inner: (
            st.lists(inner, max_size=3)
            | st.dictionaries(st.sampled_from([*sorted(zoo.small_record()), "at", "x"]), inner, max_size=4)
        ),
        max_leaves=12,
    )
)
@settings(max_examples=200, deadline=None)
def test_any_json_is_read_or_refused(value: object) -> None:
    assert all(line.isprintable() for line in said_of(json.dumps(value)))


@given(st.binary(max_size=60) | st.text(max_size=60))
@settings(max_examples=200, deadline=None)
def test_any_bytes_are_refused(data: bytes | str) -> None:
    assert lines_of(data)


@given(st.data())
@settings(max_examples=150, deadline=None)
def test_any_value_anywhere_is_read_or_refused(data: st.DataObject) -> None:
    values = zoo.small_record()
    part: Any = values
    while True:
        step = data.draw(st.sampled_from(sorted(part) if isinstance(part, dict) else range(len(part))))
        if not isinstance(part[step], (dict, list)) or not part[step] or data.draw(st.booleans()):
            break
        part = part[step]
    part[step] = data.draw(
        st.none()
        | st.booleans()
        | st.floats()
        | st.integers()
        | TEXT
        | st.lists(st.integers(), max_size=3)
        | st.just({})
    )
    assert all(line.isprintable() for line in said_of(json.dumps(values)))


def test_keys_stand_in_the_order_of_the_format_and_a_point_on_one_line() -> None:
    values = zoo.small_record()
    text = to_text(parse(json.dumps(dict(reversed(values.items())))))
    assert list(json.loads(text)) == list(values)
    assert json.loads(text) == values
    assert (
        '\n          "points": [\n            [450.0, 150.0],\n            [800.0, 151.0]\n          ]\n'
        in text
    )
    assert '"size": [1000, 800]' in text
    assert '"remains": [\n            "",\n            "[…]"\n          ]' in text
    assert text.endswith("\n}\n")


def test_a_text_that_looks_like_a_list_stays_as_it_is() -> None:
    values = zoo.smallest_record() | {"remarks": "[\n  1,\n  2\n]"}
    assert parse(to_text(parse(json.dumps(values)))).remarks == "[\n  1,\n  2\n]"


def test_what_nobody_gave_is_not_written() -> None:
    values = zoo.smallest_record()
    given_null = zoo.smallest_record() | {"thickness": None}
    given_null["views"][0] |= {"region": None, "scale": {"marks": [], "ppi": None}}
    text = to_text(parse(json.dumps(values)))
    assert json.loads(text) == values
    assert "null" not in to_text(parse(json.dumps(given_null)))
    assert parse(text) == parse(json.dumps(given_null))


def test_writing_twice_gives_the_same_bytes_and_no_other_file(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    record = parse(json.dumps(zoo.small_record()))
    write(record, path)
    first = path.read_bytes()
    write(read(path), path)
    assert path.read_bytes() == first
    assert list(tmp_path.iterdir()) == [path]
    assert read(str(path)) == record


def test_writing_keeps_the_rights_and_follows_a_link(tmp_path: Path) -> None:
    path, link = tmp_path / "q17.fragment.json", tmp_path / "link.fragment.json"
    record = parse(json.dumps(zoo.smallest_record()))
    write(record, path)
    path.chmod(0o640)
    link.symlink_to(path.name)
    write(record.model_copy(update={"remarks": "new"}), link)
    assert link.is_symlink()
    assert read(path).remarks == "new"
    assert path.stat().st_mode & 0o777 == 0o640


def test_what_could_not_be_read_again_is_not_written(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    record = parse(json.dumps(zoo.smallest_record()))
    write(record, path)
    before = path.read_bytes()
    with pytest.raises(RecordError, match=r"q17.fragment.json: views: needs one view or more"):
        write(record.model_copy(update={"views": ()}), path)
    assert path.read_bytes() == before


WRITE_LONGER = """
import sys
from pathlib import Path
from layout.errors import RecordError
from layout.record.files import read, write
path = Path(sys.argv[1])
try:
    write(read(path).model_copy(update={"remarks": "x" * 20_000}), path)
except RecordError as error:
    sys.exit(str(error))
"""


def write_longer(
    path: Path, prefix: tuple[str, ...] = (), limit: int | None = None
) -> subprocess.CompletedProcess[str]:
    """Write a record in a process of its own, which may write no file longer than a limit."""

    def full() -> None:
        if limit is not None:
            resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit))

    return subprocess.run(
        [*prefix, sys.executable, "-c", WRITE_LONGER, path],
        env={**os.environ, "PYTHONPATH": str(ROOT), "PYTHONDONTWRITEBYTECODE": "1"},
        preexec_fn=full,
        capture_output=True,
        text=True,
        check=False,
    )


def test_a_full_disk_leaves_the_old_record_and_no_rubbish(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    write(parse(json.dumps(zoo.small_record())), path)
    before = path.read_bytes()
    done = write_longer(path, limit=10_000)
    assert done.returncode == 1
    assert done.stderr.startswith(f"{path}: cannot be written: file too large")
    assert len(done.stderr.splitlines()) == 1
    assert path.read_bytes() == before
    assert list(tmp_path.iterdir()) == [path]
    assert write_longer(path).returncode == 0
    assert len(read(path).remarks) == 20_000


def test_a_folder_without_permission_leaves_the_old_record(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    write(parse(json.dumps(zoo.small_record())), path)
    before = path.read_bytes()
    tmp_path.chmod(0o500)
    done = write_longer(path, prefix=UNPRIVILEGED)
    tmp_path.chmod(0o700)
    assert done.stderr.startswith(f"{path}: cannot be written: permission denied; change the rights")
    assert done.stderr.endswith("; the file is as it was\n")
    assert path.read_bytes() == before


@pytest.mark.parametrize(
    ("place", "said"),
    [
        ("nowhere/q.fragment.json", "there is no such file or folder; check the name"),
        ("folder", "folder"),
        ("file/q.fragment.json", "a part of its path is no folder"),
        ("zero\0.fragment.json", "null"),
    ],
)
def test_where_nothing_can_be_written_is_said(tmp_path: Path, place: str, said: str) -> None:
    (tmp_path / "folder").mkdir()
    (tmp_path / "file").touch()
    with pytest.raises(RecordError, match=said) as raised:
        write(parse(json.dumps(zoo.smallest_record())), tmp_path / place)
    assert raised.value.file == tmp_path / place


@pytest.mark.parametrize(
    ("data", "line"),
    [
        (b"", "is empty; begin a record with 'layout new'"),
        (b"\xef\xbb\xbf \n", "is empty; begin a record with 'layout new'"),
        ("Q 17", "line 1, column 1: is not JSON here"),
        ('{"schema": 1,\n "name": }', "line 2, column 10: is not JSON here"),
        ("[]", "needs one object in { }, has []"),
        ("null", "needs one object in { }, has null"),
        (b'{"name": "\xff"}', "byte 10: is not UTF-8; save the file as UTF-8"),
        ('{"schema": 2}', "schema: needs 1, has 2; update the program if the file is newer"),
        ('{"schema": true}', "schema: needs 1, has true"),
        ('{"schema": "1"}', 'schema: needs 1, has "1"'),
        ('{"schema": 1, "schema": 1}', 'the key "schema" stands twice; delete one'),
        ('{"views": [{"a": 1, "a": 2}]}', 'views[0]: the key "a" stands twice; delete one'),
        (r'{"name": "\ud800"}', "name: holds half of a character"),
        (r'{"\ud800": 1}', "holds half of a character"),
        ("[" * 100_000, "is nested too deeply for a record"),
        ('{"name":' * 100_000 + "1" + "}" * 100_000, "is nested too deeply for a record"),
        ('{"schema": 1, "name": ' + "[" * 900 + "]" * 900 + "}", ""),
        (b"[" + b" " * LARGEST_FILE, "is larger than 50 MB, which no record is"),
    ],
)
def test_what_is_no_record_is_refused_in_one_line(data: bytes | str, line: str) -> None:
    assert lines_of(data)[0].startswith(line)


@pytest.mark.parametrize("number", ["NaN", "Infinity", "-Infinity", "1e400", "1" * 400, "-" + "9" * 5000])
def test_numbers_without_end_are_refused_at_their_place(number: str) -> None:
    text = json.dumps(zoo.small_record()).replace('"mm": 24.0', f'"mm": {number}')
    [line] = lines_of(text)
    assert line.startswith("thickness.mm: needs ")
    # where a whole number is needed too
    [line] = lines_of(json.dumps(zoo.small_record()).replace('"line": 3', f'"line": {number}'))
    assert line.startswith("views[0].writing[1].line: needs a whole number, has ")


def test_a_byte_order_mark_is_accepted() -> None:
    data = json.dumps(zoo.smallest_record()).encode("utf-8-sig")
    assert parse(data) == parse(json.dumps(zoo.smallest_record()))


def test_of_very_many_faults_the_first_are_named() -> None:
    values = zoo.small_record()
    values["views"][0]["rulings"][0]["points"] = ["a"] * 1000
    lines = lines_of(json.dumps(values))
    assert len(lines) == MOST_FAULTS + 1
    assert lines[-1] == "950 more faults; mend these first"


def test_a_long_value_is_cut_and_control_characters_are_escaped() -> None:
    assert shown("x" * 100) == '"' + "x" * 39 + "…"
    assert shown("a\x1b\x9b") == r'"a\u001b\u009b"'
    assert shown("[…],20") == '"[…],20"'


def test_each_line_names_the_file(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    path.write_text(json.dumps(zoo.small_record() | {"thickness": 3, "convexity": 4}))
    with pytest.raises(RecordError, match="thickness") as raised:
        read(path)
    assert raised.value.lines() == [
        f"{path}: thickness: needs an object in {{ }}, has 3",
        f"{path}: convexity: needs an object in {{ }}, has 4",
    ]


def test_what_is_no_file_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="cannot be read: there is no such file or folder; check the name"):
        read(tmp_path / "q17.fragment.json")
    with pytest.raises(RecordError, match="is no file but a folder or a device; name a record"):
        read(tmp_path)
    os.mkfifo(tmp_path / "pipe")
    with pytest.raises(RecordError, match="is no file but a folder or a device"):
        read(tmp_path / "pipe")
    with pytest.raises(RecordError, match=r"cannot be read: .*null"):
        read("q\0")
    with pytest.raises(RecordError, match="cannot be read: file name too long"):
        read("q" * 5000)


def test_a_file_of_100_mb_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "q17.fragment.json"
    with path.open("wb") as file:
        file.truncate(100 * 1024 * 1024)
    with pytest.raises(RecordError, match="is larger than 50 MB"):
        read(path)
