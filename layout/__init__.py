"""How big a broken tablet was, how much its lost part held, and what would have fitted there.

The public names are loaded when they are first used, so that importing the package is cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from layout.errors import CallError, LayoutError, PhotographError, RecordError
    from layout.image.contour import find_contour
    from layout.image.faces import find_faces, match_silhouettes
    from layout.image.grooves import draw_to_groove
    from layout.image.photograph import read_photograph
    from layout.image.ruled import propose_rulings
    from layout.image.target import find_card
    from layout.image.ticks import find_divisions
    from layout.lens import read_lens, read_lenses
    from layout.pipeline import measure
    from layout.quantity import Quantity
    from layout.record.check import check
    from layout.record.files import parse, read, write
    from layout.record.model import Record
    from layout.results import Results

__version__ = "0.1.0"

__all__ = [
    "CallError",
    "LayoutError",
    "PhotographError",
    "Quantity",
    "Record",
    "RecordError",
    "Results",
    "check",
    "draw_to_groove",
    "find_card",
    "find_contour",
    "find_divisions",
    "find_faces",
    "match_silhouettes",
    "measure",
    "parse",
    "propose_rulings",
    "read",
    "read_lens",
    "read_lenses",
    "read_photograph",
    "write",
]

_HOMES = {
    "CallError": "layout.errors",
    "LayoutError": "layout.errors",
    "PhotographError": "layout.errors",
    "Quantity": "layout.quantity",
    "Record": "layout.record.model",
    "RecordError": "layout.errors",
    "Results": "layout.results",
    "check": "layout.record.check",
    "draw_to_groove": "layout.image.grooves",
    "find_card": "layout.image.target",
    "find_contour": "layout.image.contour",
    "find_divisions": "layout.image.ticks",
    "find_faces": "layout.image.faces",
    "match_silhouettes": "layout.image.faces",
    "measure": "layout.pipeline",
    "parse": "layout.record.files",
    "propose_rulings": "layout.image.ruled",
    "read": "layout.record.files",
    "read_lens": "layout.lens",
    "read_lenses": "layout.lens",
    "read_photograph": "layout.image.photograph",
    "write": "layout.record.files",
}


def __getattr__(name: str) -> object:
    """Load a public name from its module."""
    if name not in _HOMES:
        message = f"module 'layout' has no attribute {name!r}"
        raise AttributeError(message)
    return getattr(import_module(_HOMES[name]), name)
