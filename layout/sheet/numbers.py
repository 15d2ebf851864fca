"""Numbers as a person reads them: the value with its uncertainty in brackets, and the 95 % interval."""

from __future__ import annotations

from layout.quantity import Summary, concise, decimals_of

UNITS = {"1": "", "mm2": "cm²", "deg": "°", "mm_per_100mm": "mm per 100 mm"}
MM2_PER_CM2 = 100.0
NO_NUMBER = "–"


def plain(value: float, unit: str) -> Summary:
    """Return a number that has no uncertainty of its own: a count, a share, a scatter."""
    return Summary(value, None, None, None, unit)


def unit_of(summary: Summary) -> str:
    """Return the unit as it is printed; a pure number has none."""
    return UNITS.get(summary.unit, summary.unit)


def number(summary: Summary) -> str:
    """Write a summary without its unit: ``41.38(22)``, ``at least 12.3``, ``8.5``.

    Examples
    --------
    >>> number(Summary(41.378, 0.2231, 40.95, 41.81, "mm"))
    '41.38(22)'
    >>> number(plain(0.004, "1"))
    '< 0.01'
    """
    summary = _printed(summary)
    if summary.value is None:
        return _bound(summary)
    if summary.sd is not None:
        return concise(summary.value, summary.sd)
    return _share(summary.value) if summary.unit == "1" else f"{summary.value:g}"


def interval(summary: Summary) -> str:
    """Write the 95 % interval with as many decimals as the value has; empty where there is none.

    Examples
    --------
    >>> interval(Summary(41.378, 0.2231, 40.952, 41.809, "mm"))
    '[40.95, 41.81]'
    >>> interval(plain(8.5, "mm"))
    ''
    """
    summary = _printed(summary)
    if not summary.sd or summary.low is None or summary.high is None:
        return ""
    places = decimals_of(summary.sd)
    # adding zero turns a rounded -0.0 into 0.0
    low, high = (f"{round(end, places) + 0.0:.{max(places, 0)}f}" for end in (summary.low, summary.high))
    return f"[{low}, {high}]"


def shown(summary: Summary) -> str:
    """Write a summary with its unit: ``41.38(22) mm``.

    Examples
    --------
    >>> shown(Summary(4712.0, 93.0, 4530.0, 4895.0, "mm2"))
    '47.12(93) cm²'
    """
    unit = unit_of(summary)
    space = "" if unit in ("", "°") else " "
    return f"{number(summary)}{space}{unit}"


def _printed(summary: Summary) -> Summary:
    """Return the summary in the unit that is printed: areas in square centimetres."""
    if summary.unit != "mm2":
        return summary
    value, sd, low, high = (
        None if part is None else part / MM2_PER_CM2
        for part in (summary.value, summary.sd, summary.low, summary.high)
    )
    return Summary(value, sd, low, high, "cm²")


def _bound(summary: Summary) -> str:
    """Write a one-sided bound."""
    if summary.low is not None:
        return f"at least {summary.low:.3g}"
    return NO_NUMBER if summary.high is None else f"at most {summary.high:.3g}"


def _share(share: float) -> str:
    """Write a probability or a share: some thousands of draws tell no more than two decimals."""
    if 0 < share < 0.005:
        return "< 0.01"
    return "> 0.99" if 0.995 < share < 1 else f"{share:.2f}"
