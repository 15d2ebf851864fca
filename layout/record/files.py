"""Reading a record, with every fault named, and writing one so that no crash costs more than a change."""

from __future__ import annotations

import json
import re
import stat
from collections import Counter
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from layout.errors import Fault, RecordError
from layout.files import reason, replace_file
from layout.record.consistency import inconsistencies
from layout.record.faults import Step, faults_of, place_of, shown
from layout.record.model import SCHEMA, Record

LARGEST_FILE = 50 * 1024 * 1024
TOO_LARGE = Fault("", f"is larger than {LARGEST_FILE >> 20} MB, which no record is; name another file")
MOST_FAULTS = 50
LONGEST_INTEGER = 18

# a list that holds numbers only, as json sets it: one number to a line
_NUMBERS = re.compile(r"\[\n\s+(-?\d[-+.\de]*(?:,\n\s+-?\d[-+.\de]*)*)\n\s+\]")
_BETWEEN_NUMBERS = re.compile(r",\n\s+")


class _Object(dict[str, Any]):
    """A JSON object that remembers which keys stood in it twice, and that json would drop silently."""

    def __init__(self, pairs: list[tuple[str, Any]]) -> None:
        super().__init__(pairs)
        counts = Counter(key for key, _ in pairs) if len(self) < len(pairs) else {}
        self.repeated = [key for key, count in counts.items() if count > 1]


def read(path: str | Path) -> Record:
    """Read a record.

    Parameters
    ----------
    path
        A ``NAME.fragment.json``.

    Raises
    ------
    RecordError
        If the file cannot be read, is no JSON, or is malformed: with one fault for each thing to mend. What
        is merely incomplete is read.
    """
    path = Path(path)
    try:
        # before opening: a pipe would wait for ever, and what is too large need not be read
        found = path.stat()
        if not stat.S_ISREG(found.st_mode):
            raise RecordError([Fault("", "is no file but a folder or a device; name a record")], file=path)
        if found.st_size > LARGEST_FILE:
            raise RecordError([TOO_LARGE], file=path)
        data = path.read_bytes()
    except (OSError, ValueError) as error:
        raise RecordError([Fault("", f"cannot be read: {reason(error)}")], file=path) from None
    return parse(data, file=path)


def parse(data: bytes | str, *, file: Path | None = None) -> Record:
    """Read a record from the text of its file.

    Parameters
    ----------
    data
        JSON, UTF-8 where it is bytes.
    file
        Where the text comes from, for the messages.

    Raises
    ------
    RecordError
        As in ``read``.
    """
    try:
        faults, record = _parse(data)
    except RecursionError:
        text = "is nested too deeply for a record; compare its brackets with the format"
        faults, record = [Fault("", text)], None
    if record is None or faults:
        if len(faults) > MOST_FAULTS:
            faults[MOST_FAULTS:] = [Fault("", f"{len(faults) - MOST_FAULTS} more faults; mend these first")]
        raise RecordError(faults, file=file)
    return record


def write(record: Record, path: str | Path) -> None:
    """Write a record over the old one in one step: a crash at any moment leaves the old or the new one.

    Parameters
    ----------
    record
        What is to be written; fields that nobody gave are left out, and keys stand in the format's order.
    path
        A ``NAME.fragment.json``; a link is followed.

    Raises
    ------
    RecordError
        If the record is malformed, so that it could not be read again, or if the file cannot be written. The
        old file is then as it was.
    """
    path = Path(path)
    text = to_text(record)
    parse(text, file=path)
    try:
        replace_file(path, text.encode())
    except (OSError, ValueError) as error:
        text = f"cannot be written: {reason(error)}; the file is as it was"
        raise RecordError([Fault("", text)], file=path) from None


def to_text(record: Record) -> str:
    """Return the text of a record's file: two-space indent, a point on one line.

    Examples
    --------
    >>> photograph = {"id": "p", "file": "q.jpg", "size": [640, 480]}
    >>> view = {"face": "obverse", "photograph": "p"}
    >>> record = {"schema": 1, "name": "Q", "photographs": [photograph], "views": [view]}
    >>> to_text(Record.model_validate(record)).splitlines()[7]
    '      "size": [640, 480]'
    """
    values = record.model_dump(by_alias=True, exclude_unset=True, exclude_none=True)
    text = json.dumps(values, indent=2, ensure_ascii=False, allow_nan=False)
    # a string holds no line feed of its own, so that only lists match
    text = _NUMBERS.sub(lambda match: f"[{_BETWEEN_NUMBERS.sub(', ', match[1])}]", text)
    return text + "\n"


def _parse(data: bytes | str) -> tuple[list[Fault], Record | None]:
    """Return the faults, and the record if its form is sound; each stage needs the one before it."""
    if len(data) > LARGEST_FILE:
        return [TOO_LARGE], None
    try:
        text = data.decode("utf-8-sig") if isinstance(data, bytes) else data
        if not text.strip():
            return [Fault("", "is empty; begin a record with 'layout new'")], None
        values = json.loads(text, object_pairs_hook=_Object, parse_int=_integer)
    except UnicodeDecodeError as error:
        return [Fault(f"byte {error.start}", "is not UTF-8; save the file as UTF-8")], None
    except json.JSONDecodeError as error:
        place = f"line {error.lineno}, column {error.colno}"
        return [Fault(place, f"is not JSON here ({error.msg}); compare commas, quotes and brackets")], None
    if not isinstance(values, dict):
        return [Fault("", f"needs one object in {{ }}, has {shown(values)}")], None
    if faults := [*_slips(values, ())] or [*_wrong_schema(values)]:
        return faults, None
    try:
        record = Record.model_validate(values)
    except ValidationError as error:
        return faults_of(error), None
    return inconsistencies(record), record


def _integer(digits: str) -> int | float:
    """Read a whole number; a huge one as a float, since Python refuses thousands of digits."""
    return int(digits) if len(digits) <= LONGEST_INTEGER else float(digits)


def _slips(values: object, steps: tuple[Step, ...]) -> Iterator[Fault]:
    """Find what JSON allows and a record does not: a key that stands twice, half of a character."""
    if isinstance(values, _Object):
        for key in values.repeated:
            yield Fault(place_of(steps), f"the key {shown(key)} stands twice; delete one")
        for key, value in values.items():
            yield from _slips(key, steps)
            yield from _slips(value, (*steps, key))
    elif isinstance(values, list):
        for index, value in enumerate(values):
            # points are most of a file, and hold no text
            if not isinstance(value, (int, float)):
                yield from _slips(value, (*steps, index))
    elif isinstance(values, str) and not _is_unicode(values):
        yield Fault(
            place_of(steps), r"holds half of a character (\ud800 to \udfff); write the character itself"
        )


def _is_unicode(text: str) -> bool:
    """Say whether a text can be written as UTF-8."""
    try:
        text.encode()
    except UnicodeEncodeError:
        return False
    return True


def _wrong_schema(values: dict[str, Any]) -> Iterator[Fault]:
    """Refuse another format before its keys are compared with those of this one."""
    schema = values.get("schema", SCHEMA)
    if schema != SCHEMA or isinstance(schema, bool):
        text = f"needs {SCHEMA}, has {shown(schema)}; update the program if the file is newer"
        yield Fault("schema", text)
