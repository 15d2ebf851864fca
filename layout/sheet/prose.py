"""The sheet's standing sentences: notation, method, cautions."""

from __future__ import annotations

from layout.results import Results

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
            any(view.rulings for view in results.views),
            "A ruling is a straight line fitted by orthogonal least squares; the scatter seen about it, and "
            "not the pointing error alone, gives its uncertainty.",
        ),
        (
            any(view.line_pitch for view in results.views),
            "The line pitch is a regression of the rulings' positions on their line numbers.",
        ),
        (
            whole,
            "The surviving original edges are fitted with a superellipse about an unknown axis. A hand-made "
            "edge wobbles: its departures are taken as correlated along the edge, with a Matérn covariance "
            "of smoothness 5/2. The break's course is no evidence of the shape.",
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
