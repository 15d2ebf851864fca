"""The capacity sheet: all that was measured is on it, true to scale, and a record's texts stay texts."""

from __future__ import annotations

import base64
import csv
import dataclasses
import hashlib
import io
import re
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest

from layout.errors import CallError
from layout.notices import Notice
from layout.quantity import Summary
from layout.record.model import Record
from layout.results import Results
from layout.sheet import form_of, sheet
from layout.sheet.content import Content, compose
from layout.sheet.csv import COLUMNS, to_csv
from layout.sheet.drawing import Box, Drawing, draw
from layout.sheet.html import to_html
from layout.sheet.numbers import interval, number, plain, shown
from layout.sheet.picture import Embedded, embed
from layout.sheet.prose import CAUTIONS, NOTATION, RELATIVE_SUPPORT
from layout.sheet.terminal import to_text
from tests import zoo_results

HASH = "a" * 64
NASTY = (
    "=1+1",
    "+49",
    "-2",
    "@SUM(A1)",
    "\t=1",
    "<script>alert(1)</script>",
    '"><img src=x onerror=alert(1)>',
)
EMPTY: dict[str, Any] = {
    "views": (),
    "reconstructed": None,
    "sign_width": None,
    "clearance": None,
    "capacity": None,
    "ranking": (),
}


def _record(**changes: Any) -> Record:  # noqa: ANN401
    return Record.model_validate(zoo_results.record(**changes))


def _content(record: Record | None = None, results: Results | None = None) -> Content:
    return compose(record or _record(), results or zoo_results.results(), HASH, "The clearance decides.")


def _drawing(results: Results | None = None) -> Drawing:
    drawing = draw(_record(), results or zoo_results.results())
    assert drawing is not None
    return drawing


def _rows(content: Content) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(to_csv(content), newline="")))


def _quantities(results: object) -> Iterator[dict[str, Any]]:
    """Yield every quantity of a results file."""
    if isinstance(results, dict):
        if set(results) == {"value", "sd", "low", "high", "unit"}:
            yield results
        else:
            for part in results.values():
                yield from _quantities(part)
    elif isinstance(results, list):
        for part in results:
            yield from _quantities(part)


class _Page(HTMLParser):
    """What a page holds: its elements, their attributes, its text."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.elements: list[str] = []
        self.attributes: list[tuple[str, str | None]] = []
        self.text = ""
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append(tag)
        self.attributes += attrs

    def handle_data(self, data: str) -> None:
        self.text += data


# numbers


def test_a_number_is_written_as_the_guide_prints_it() -> None:
    # JCGM 100:2008, 7.2.2, second form: m_S = 100,021 47(35) g (from memory)
    assert number(Summary(100.02147, 0.00035, 100.0208, 100.0222, "g")) == "100.02147(35)"
    # JCGM 100:2008, 7.2.6: 10,057 62 ohm with u = 27 milliohm is rounded to 10,058 ohm (from memory)
    resistance = Summary(10.05762, 0.027, 10.0047, 10.1105, "ohm")
    assert number(resistance) == "10.058(27)"
    assert interval(resistance) == "[10.005, 10.111]"


@pytest.mark.parametrize(
    ("summary", "text"),
    [
        (Summary(41.378, 0.2231, 40.95, 41.81, "mm"), "41.38(22) mm"),
        (Summary(4712.0, 93.0, 4530.0, 4895.0, "mm2"), "47.12(93) cm²"),
        (Summary(-0.0004, 0.19, -0.4, 0.4, "deg"), "0.00(19)°"),
        (Summary(None, None, 12.34, None, "mm"), "at least 12.3 mm"),
        (Summary(None, None, None, 12.34, "mm"), "at most 12.3 mm"),
        (Summary(0.0, 0.0, 0.0, 0.0, "mm"), "0 mm"),
        (plain(8.5, "sign widths"), "8.5 sign widths"),
        (plain(0.004, "1"), "< 0.01"),
        (plain(0.996, "1"), "> 0.99"),
        (plain(0.0, "1"), "0.00"),
        (plain(0.463, "1"), "0.46"),
    ],
)
def test_a_number_says_no_more_than_is_known(summary: Summary, text: str) -> None:
    assert shown(summary) == text


def test_a_number_without_spread_has_no_interval() -> None:
    assert interval(Summary(0.0, 0.0, 0.0, 0.0, "mm")) == ""
    assert interval(Summary(None, None, 12.0, None, "mm")) == ""


# content


def test_every_quantity_of_the_results_is_on_the_sheet() -> None:
    results = zoo_results.results()
    on_sheet = {(row["value"], row["sd"], row["low"], row["high"], row["unit"]) for row in _rows(_content())}
    measured = list(_quantities(results.to_json()))
    assert len(measured) > 30
    for quantity in measured:
        assert tuple(str(part) for part in quantity.values()) in on_sheet


def test_every_assumption_warning_and_missing_result_is_on_the_sheet() -> None:
    results = zoo_results.results()
    page = to_html(_content(), None, None)
    notices: list[Notice] = [*results.assumptions, *results.warnings, *results.missing]
    for notice in notices:
        assert notice.text in page


def test_the_sheet_explains_its_notation_and_its_limits() -> None:
    text = _Page(to_html(_content(), None, None)).text
    for sentence in (*NOTATION, *CAUTIONS, RELATIVE_SUPPORT, "The clearance decides."):
        assert sentence in text
    assert HASH in text


def test_the_plain_count_stands_beside_what_is_required() -> None:
    section = _content().section("ranking")
    assert section is not None
    heads = section.tables[0].columns
    assert heads.index("required") == heads.index("plain count") + 1
    assert section.tables[0].rows[0][1:3] == (
        plain(7.5, "sign widths"),
        zoo_results.results().ranking[0].required.summary(),  # type: ignore[union-attr]
    )


def test_the_method_names_only_what_was_used() -> None:
    results = zoo_results.results()
    assert "superellipse" in to_html(_content(), None, None)
    without = dataclasses.replace(results, reconstructed=None, clearance=None, ranking=())
    page = to_html(_content(results=without), None, None)
    assert "superellipse" not in page
    assert "log-normal" not in page
    assert "JCGM 101:2008" in page


def test_results_of_which_nothing_could_be_computed_still_make_a_sheet() -> None:
    nothing = dataclasses.replace(zoo_results.results(), **EMPTY)
    text = _Page(to_html(_content(results=nothing), None, None)).text
    assert "No lower edge is traced." in text
    assert "Candidates" not in text


def test_mean_signs_come_from_the_draws_of_both_widths() -> None:
    results = zoo_results.results()
    assert results.capacity is not None
    assert results.capacity.sign_widths is not None
    assert results.sign_width is not None
    ratio = results.capacity.sign_widths.draws / results.sign_width.mean_sign.draws
    section = _content().section("summary")
    assert section is not None
    assert f"{np.median(ratio):.1f}({ratio.std(ddof=1):.1f}) mean signs" in " ".join(section.sentences)


# texts of a record


@pytest.mark.parametrize("text", NASTY)
def test_a_text_cannot_become_markup_or_a_formula(text: str) -> None:
    ranking = (dataclasses.replace(zoo_results.results().ranking[0], name=text),)
    content = _content(
        _record(name=text, observer=text, findspot=text),
        dataclasses.replace(zoo_results.results(), name=text, ranking=ranking),
    )
    page = _Page(to_html(content, _drawing(), None))
    assert "script" not in page.elements
    assert "img" not in page.elements
    assert not [name for name, _ in page.attributes if name.startswith("on")]
    assert text in page.text
    for row in _rows(content):
        for column in ("section", "table", "of", "quantity", "unit", "text"):
            assert not row[column].startswith(("=", "+", "-", "@", "\t"))
        for column in ("value", "sd", "low", "high"):
            assert row[column] == "" or float(row[column]) is not None
    assert "\x1b" not in to_text(content, ("summary", "ranking"))


def test_a_text_cannot_command_the_terminal() -> None:
    content = _content(_record(name="\x1b[2J\x1b]0;x\x07\r\n"))
    text = to_text(content, ("summary",))
    assert "\x1b" not in text
    assert "\x07" not in text
    assert r"\x1b[2J" in text.splitlines()[0]


def test_the_page_asks_for_nothing_from_elsewhere() -> None:
    page = to_html(_content(), _drawing(), Embedded("data:image/jpeg;base64,AAAA", Box(0.0, 0.0, 10.0, 10.0)))
    parsed = _Page(page)
    assert "script" not in parsed.elements
    assert "link" not in parsed.elements
    addresses = [value for name, value in parsed.attributes if name in ("src", "href") and value]
    assert addresses == ["data:image/jpeg;base64,AAAA"]
    assert all(address.startswith("#") for address in re.findall(r"url\(([^)]*)\)", page))


def test_csv_has_one_row_for_each_number() -> None:
    rows = _rows(_content())
    assert tuple(rows[0]) == COLUMNS
    widths = [row for row in rows if row["of"] == "v1 to v2" and row["quantity"] == "width"]
    assert len(widths) == 1
    assert widths[0]["unit"] == "mm"
    assert float(widths[0]["value"]) == pytest.approx(16.0, abs=0.1)


# drawing


def test_the_drawing_is_true_to_scale() -> None:
    drawing = _drawing()
    mm_per_px = zoo_results.results().views[0].scale.mm_per_px.summary().value  # type: ignore[union-attr]
    assert mm_per_px is not None
    assert drawing.width_mm == pytest.approx(drawing.box.width * mm_per_px)
    assert drawing.bar is not None
    bar_px = sum(block.width for block in drawing.bar.blocks)
    assert bar_px * mm_per_px == pytest.approx(drawing.bar.mm, abs=0.01)
    # all of the whole tablet (2500 px wide) and its band are within
    assert drawing.box.x < 250 - 40
    assert drawing.box.x + drawing.box.width > 2750 + 40


def test_the_break_is_told_apart_from_the_edges() -> None:
    assert [edge.kind for edge in _drawing().edges] == ["sound", "sound", "sound", "break"]


def test_what_is_not_inferred_is_not_drawn() -> None:
    drawing = _drawing(dataclasses.replace(zoo_results.results(), reconstructed=None))
    assert drawing.whole == ""
    page = to_html(_content(), drawing, None)
    assert "hatching are inferred" not in page
    assert "hatching are inferred" in to_html(_content(), _drawing(), None)


def test_without_a_scale_there_is_no_bar() -> None:
    results = zoo_results.results()
    view = dataclasses.replace(results.views[0], scale=None)
    drawing = _drawing(dataclasses.replace(results, views=(view,)))
    assert drawing.bar is None
    assert drawing.width_mm is None


def test_a_record_without_traces_has_no_drawing() -> None:
    record = _record(views=[{"face": "obverse", "photograph": "obv"}])
    assert draw(record, zoo_results.results()) is None


# photograph


def _photograph(folder: Path) -> str:
    """Write the fragment's photograph, grey with one small bright square, and return its SHA-256."""
    image = np.full((2400, 3000, 3), 90, np.uint8)
    image[995:1006, 1995:2006] = 255
    assert cv2.imwrite(str(folder / "ta12.png"), image)
    return hashlib.sha256((folder / "ta12.png").read_bytes()).hexdigest()


def _with_photograph(sha256: str | None) -> Record:
    photograph = {"id": "obv", "file": "ta12.png", "size": [3000, 2400], "sha256": sha256}
    return _record(photographs=[photograph])


def test_the_embedded_photograph_lies_where_it_was_traced(tmp_path: Path) -> None:
    record = _with_photograph(_photograph(tmp_path))
    embedded = embed(record, _drawing(), tmp_path)
    assert embedded is not None
    encoded = np.frombuffer(base64.b64decode(embedded.href.split(",")[1]), np.uint8)
    image = cv2.imdecode(encoded, cv2.IMREAD_GRAYSCALE)
    assert image is not None
    assert max(image.shape) <= 1600
    y, x = (float(np.mean(where)) for where in np.nonzero(image > 200))
    # the centre of pixel (x, y) of the picture, in pixels of the photograph
    at_x = embedded.box.x + (x + 0.5) * embedded.box.width / image.shape[1]
    at_y = embedded.box.y + (y + 0.5) * embedded.box.height / image.shape[0]
    assert (at_x, at_y) == pytest.approx((2000.0, 1000.0), abs=1.0)


@pytest.mark.parametrize("sha256", [None, "0" * 64])
def test_a_photograph_that_is_not_known_to_be_the_traced_one_is_left_out(
    tmp_path: Path, sha256: str | None
) -> None:
    _photograph(tmp_path)
    assert embed(_with_photograph(sha256), _drawing(), tmp_path) is None


def test_a_missing_or_damaged_photograph_is_left_out(tmp_path: Path) -> None:
    assert embed(_with_photograph("0" * 64), _drawing(), tmp_path) is None
    (tmp_path / "ta12.png").write_bytes(b"no picture")
    damaged = hashlib.sha256(b"no picture").hexdigest()
    assert embed(_with_photograph(damaged), _drawing(), tmp_path) is None


# forms


@pytest.mark.parametrize("name", ["a.html", "a.csv", "a.json", "a.HTML"])
def test_the_ending_says_the_form(name: str) -> None:
    assert form_of(Path(name)) == Path(name).suffix.lower()


@pytest.mark.parametrize("name", ["a", "a.docx", "a.html.bak"])
def test_an_unknown_ending_is_refused_with_those_that_are_known(name: str) -> None:
    with pytest.raises(CallError, match=r"a sheet ends in \.html, \.csv or \.json"):
        form_of(Path(name))


def test_the_same_results_give_the_same_bytes(tmp_path: Path) -> None:
    path = tmp_path / "ta12.fragment.json"
    path.write_bytes(b"{}")
    for form in (".html", ".csv", ".json"):
        first, second = (sheet(form, _record(), zoo_results.results(), path) for _ in range(2))
        assert first == second


# terminal


@pytest.mark.parametrize("columns", [40, 80, 200])
def test_no_terminal_is_too_narrow_for_a_number(monkeypatch: pytest.MonkeyPatch, columns: int) -> None:
    monkeypatch.setenv("COLUMNS", str(columns))
    content = _content()
    text = to_text(content, ("view", "whole", "capacity", "ranking"))
    for section in content.sections:
        for table in section.tables:
            cells = [cell for row in table.rows for cell in row if isinstance(cell, Summary)]
            for cell in cells:
                assert number(cell) in text
                assert interval(cell) in text
            assert all(row[-1] in text for row in table.rows if isinstance(row[-1], str))
    assert max(map(len, text.splitlines())) <= max(columns, 80)
