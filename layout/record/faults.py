"""Faults of a record in our own words: where, what is needed, what came, and how to mend it."""

import json
from collections.abc import Callable, Iterator
from typing import Any, get_args

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from layout.errors import Fault
from layout.record.model import Record

Step = str | int
LONGEST = 40


def shown(value: object) -> str:
    """Return a value as the file writes it, cut where it is long."""
    text = json.dumps(value, ensure_ascii=False)
    if not text.isprintable():
        # control characters and halves of characters, which no terminal should be sent
        text = json.dumps(value)
    return text if len(text) <= LONGEST else f"{text[:LONGEST]}…"


def place_of(steps: tuple[Step, ...]) -> str:
    """Write a place in the record.

    Examples
    --------
    >>> place_of(("views", 0, "rulings", 3, "points"))
    'views[0].rulings[3].points'
    >>> place_of(("series", "n 1"))
    'series["n 1"]'
    """
    place = ""
    for step in steps:
        if isinstance(step, int):
            place += f"[{step}]"
        elif step.isidentifier() and len(step) <= LONGEST:
            place += f".{step}" if place else step
        else:
            place += f"[{shown(step)}]"
    return place


def faults_of(error: ValidationError) -> list[Fault]:
    """Turn what the model refuses into faults, one for each place and reason, in the order of the file."""
    faults = [_fault(detail) for detail in error.errors(include_url=False)]
    return list(dict.fromkeys(faults))


def _fault(detail: ErrorDetails) -> Fault:
    """Return one fault; a missing key is reported at the part that lacks it."""
    steps, kind = detail["loc"], detail["type"]
    if kind == "missing":
        if isinstance(steps[-1], int):
            return Fault(place_of(steps[:-1]), _wrong_length(steps[:-1], detail["input"]))
        return Fault(place_of(steps[:-1]), f"needs the key {steps[-1]!r}; add it")
    if kind == "too_long":
        return Fault(place_of(steps), _wrong_length(steps, detail["input"]))
    if kind == "extra_forbidden":
        return Fault(place_of(steps), _unknown_key(steps))
    if steps[-1:] == ("[key]",):
        return Fault(place_of(steps[:-2]), "needs a name for each run, has an empty one")
    return Fault(place_of(steps), _sentence(detail))


def _sentence(detail: ErrorDetails) -> str:
    """Say what is needed and what came instead."""
    needs: dict[str, Callable[[dict[str, Any]], str]] = {
        "float_type": lambda _: "needs a number",
        "finite_number": lambda _: "needs a finite number",
        "int_type": lambda _: "needs a whole number",
        "string_type": lambda _: "needs a text in quotes",
        "string_too_short": lambda _: "needs a text that is not empty",
        "string_pattern_mismatch": lambda _: "needs a SHA-256 of 64 digits 0-9 a-f",
        "literal_error": lambda ctx: f"needs {ctx['expected']}",
        "tuple_type": lambda _: "needs a list in [ ]",
        "dict_type": lambda _: "needs an object in { }",
        "model_type": lambda _: "needs an object in { }",
        "greater_than_equal": lambda ctx: f"needs {ctx['ge']:g} or more",
        "less_than_equal": lambda ctx: f"needs {ctx['le']:.0f} or less",
        "value_error": lambda ctx: str(ctx["error"]),
    }
    return f"{needs[detail['type']](detail.get('ctx', {}))}, has {shown(detail['input'])}"


def _wrong_length(steps: tuple[Step, ...], value: object) -> str:
    """Say how many numbers a list of fixed length needs."""
    if steps[-1] == "region":
        form = "[x, y, width, height]"
    elif steps[-1] == "size":
        form = "[width, height]"
    elif steps[-1] == "together":
        form = "[fewest, most]"
    else:
        form = "[x, y]"
    return f"needs {form}, has {shown(value)}"


def _unknown_key(steps: tuple[Step, ...]) -> str:
    """Name the unknown key, the key that was probably meant, and those that are known here."""
    import difflib

    key, known = str(steps[-1]), _known_keys(steps[:-1])
    near = difflib.get_close_matches(key, known, n=1)
    meant = f"did you mean {near[0]!r}? " if near else ""
    return f"unknown key; {meant}known here: {', '.join(known)}"


def _known_keys(steps: tuple[Step, ...]) -> list[str]:
    """Return the keys of the part that stands at a place."""
    part: type[BaseModel] = Record
    for step in steps:
        if isinstance(step, str):
            fields = {field.alias or name: field.annotation for name, field in part.model_fields.items()}
            part = next(_parts_in(fields[step]))
    return [field.alias or name for name, field in part.model_fields.items()]


def _parts_in(annotation: Any) -> Iterator[type[BaseModel]]:  # noqa: ANN401 - annotations have no common type
    """Find the parts of a record that a field holds: itself, or inside of a tuple or an option."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        yield annotation
    for inner in get_args(annotation):
        yield from _parts_in(inner)
