"""The command's three ways to speak: results to stdout, one-line messages to stderr, a bar for what lasts."""

from __future__ import annotations

import io
import os
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager

PATIENCE_S = 1.0
"""What takes no longer than this shows no bar."""


def speak_utf8() -> None:
    """Write UTF-8 whatever the locale says; what cannot be encoded is spelt out, never an error."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(encoding="utf-8", errors="backslashreplace")


def printable(text: str) -> str:
    r"""Return a text on one line, without what a terminal would obey: control characters are spelt out.

    Examples
    --------
    >>> print(printable("two\nlines"))
    two\nlines
    """
    return "".join(
        char if char.isprintable() else char.encode("unicode_escape").decode("ascii") for char in text
    )


def emit(text: str) -> None:
    """Write results to stdout; that the reader has seen enough and closed it is no error.

    Raises
    ------
    OSError
        If stdout takes no more for another reason, as on a full disk.
    """
    try:
        sys.stdout.write(text)
        sys.stdout.flush()
    except OSError as error:
        # let go of it, so that Python does not try once again as it ends
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        if not isinstance(error, BrokenPipeError):
            raise


def say(message: str) -> None:
    """Write one line to stderr, in the form of every message of this program."""
    sys.stderr.write(f"layout: {printable(message)}\n")


@contextmanager
def waiting(doing: str) -> Iterator[None]:
    """Show a bar on stderr, if that is a terminal, once the work inside has taken a second."""
    if not sys.stderr.isatty():
        yield
        return
    done = threading.Event()
    bar = threading.Thread(target=_show_bar, args=(doing, done), daemon=True)
    bar.start()
    try:
        yield
    finally:
        done.set()
        bar.join()


def _show_bar(doing: str, done: threading.Event) -> None:
    """Wait a while, then show the bar until the work is done."""
    if done.wait(PATIENCE_S):
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

    columns = (TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        progress.add_task(doing, total=None)
        done.wait()
