"""The sheet's sentences: the answer in short, notation, method, cautions."""

from __future__ import annotations

from layout.quantity import Quantity
from layout.results import Results
from layout.sheet.numbers import shown

NOTATION = (
    "41.38(22) mm is a value of 41.38 mm (the median) with a standard uncertainty of 0.22 mm: the bracket "
    "counts in the last digits shown. Where the bracket has a decimal point it is in the unit itself: "
    "12.3(1.4) mm has a standard uncertainty of 1.4 mm (JCGM 100:2008, 7.2.2).",
    "[40.95, 41.81] is the interval that holds the true value with a probability of 95 %, under the stated "
    "assumptions.",
    "A sign width is the width of a full digit on this fragment; a mean sign is what running text takes on "
    "average. The plain count is the convention's: a digit without tens counts half, any other digit one.",
)

RELATIVE_SUPPORT = (
    "Weight is relative support within a list that a person made: it cannot speak for a proposal that is "
    "not on the list."
)

CAUTIONS = (
    "Whatever is called reconstructed, lost or predicted is inferred, not seen. That something would have "
    "fitted is no evidence that it stood there.",
    "Handling the object, and bringing a scale near it, is for the institution's conservators and its own "
    "rules to decide. The scale never touches the clay.",
)


def summary(results: Results) -> tuple[str, ...]:
    """Return the answer in plain sentences, as far as there is one."""
    sentences = []
    whole, capacity = results.reconstructed, results.capacity
    if whole is not None:
        survives = next((view.preserved for view in results.views if view.face == whole.face), None)
        kept = "" if survives is None else f", of which {_say(survives.width)} survive"
        sentences.append(
            f"The tablet is inferred to have been {_say(whole.width)} wide{kept}"
            + ("." if whole.height is None else f", and {_say(whole.height)} high.")
        )
        for side, space in whole.lost_space_by_side.items():
            sentences.append(f"On the {side} {_say(space)} of writing surface are lost.")
    if capacity is not None and capacity.sign_widths is not None:
        sentences.append(f"The lost space has room for {_say(capacity.sign_widths)}{_in_signs(results)}.")
    if results.ranking:
        fits = [row.name for row in results.ranking if row.verdict == "fits"]
        judged = sum(row.verdict is not None for row in results.ranking)
        sentences.append(
            f"Of {judged} candidates {len(fits)} fit{'s' if len(fits) == 1 else ''} the lost space"
            f"{': ' + ', '.join(fits) if fits else ''}."
        )
    return tuple(sentences)


def _in_signs(results: Results) -> str:
    """Return the capacity in mean signs of running text, from the same draws."""
    if results.capacity is None or results.capacity.sign_widths is None or results.sign_width is None:
        return ""
    sign_widths, mean_sign = results.capacity.sign_widths, results.sign_width.mean_sign
    mean_signs = Quantity("mean signs", sign_widths.draws / mean_sign.draws)
    return f", or for {_say(mean_signs)} of running text"


def method(results: Results) -> tuple[str, ...]:
    """Return how these results were computed: only what was in fact used."""
    whole, ranked = results.reconstructed is not None, bool(results.ranking)
    steps = (
        (
            True,
            f"Uncertainty is carried by {results.draws} joint draws of everything that is not known exactly "
            "(propagation of distributions by Monte Carlo, JCGM 101:2008). All numbers come from the same "
            "draws, so what depends on one scale or one ruling stays correlated.",
        ),
        (
            any(view.scale for view in results.views),
            "The scale is fitted to every bar and known length at once. Its uncertainty holds the height of the bar "
            "below the face, the distance of the lens, and how far the camera may be from square; the outline lies "
            "half the tablet's thickness further from the lens than the face.",
        ),
        (
            any(view.rulings for view in results.views),
            "A ruling is a straight line fitted by least squares. It wobbles about that line as a scribe's hand "
            "does; size and length of the wobble are learned from all rulings of the face together, and give its "
            "uncertainty with the pointing error.",
        ),
        (
            any(view.line_pitch for view in results.views),
            "The line pitch is a regression of the rulings' positions on their line numbers, which are inferred "
            "where rulings are missing.",
        ),
        (
            whole,
            "The surviving original edges are fitted with a smooth outline about an unknown axis: a superellipse, "
            "rounded differently above and below, whose sides and ends may bulge. A hand-made edge wobbles: its "
            "departures are taken as correlated along the edge, with a Matérn covariance of smoothness 5/2 or 3/2 "
            "whose size and length are learned from the edge. Width and height lie between the tangents of the "
            "smooth outline; the wobble is not part of them, so that the surviving extent may be a little more. "
            "The break's course is no evidence of the shape, but lies inside.",
        ),
        (
            results.clearance is not None,
            "Clearance, the width of a column over that of its widest entry, is taken as log-normal about "
            "this scribe's typical one, learned from the columns that survive.",
        ),
        (
            ranked,
            "A candidate requires, column by column, the width of its widest entry; what is predicted adds "
            "each column's clearance. It is too wide where the prediction exceeds the capacity in more than "
            "95 % of the draws, too narrow where it does so in fewer than 5 %.",
        ),
    )
    return tuple(text for used, text in steps if used)


def as_sentence(notice: str) -> str:
    """Return a notice, which begins small so that it can follow a colon, as a sentence of its own.

    Examples
    --------
    >>> as_sentence("the bar lies below the face")
    'The bar lies below the face.'
    """
    return f"{notice[:1].upper()}{notice[1:]}."


def _say(quantity: Quantity) -> str:
    """Write a quantity for running text."""
    return shown(quantity.summary())
