"""Every assumption, warning and missing result: its code and its sentence, in one registry.

What is assumed is never silent: a step that uses a value which nobody gave returns a ``Notice``, and the
results and the sheet print it. Templates take their numbers by name.
"""

from __future__ import annotations

from dataclasses import dataclass

ASSUMPTIONS: dict[str, str] = {
    "outline.asymmetry": "halves made by hand are taken to differ by {percent:g} % (standard uncertainty)",
    "outline.shape": "the outline is taken to be smooth, rounded alike left and right, about as wide as high (give or "
    "take half), its sides and ends to bulge by about 2 % of half its width or height (give or take 2), and "
    "its edge to wobble by about 0.35 mm over 8 mm (each give or take half)",
    "outline.share": "any share of the width is taken to be as likely lost as any other, before the edges speak",
    "lost.sides": "which side is lost was not given: {sides}, where no original edge is traced",
    "margin.mirrored": "the margin on the lost side is taken to be as wide as the one that survives",
    "scale.pointing": "a traced point is taken to be good to {px:g} px (standard uncertainty)",
    "scale.thickness": "the thickness was not given: {mm:g} mm with a standard uncertainty of {sd:g} mm",
    "scale.below_face": "how far the bar lies below the face was not given: {mm:.1f} mm with a standard "
    "uncertainty of {sd:.1f} mm, anywhere from the table to the face",
    "scale.distance": "the distance of the lens was not given: about {mm:g} mm, from half to twice that",
    "scale.focal": "the distance of the lens was not given: it follows from the scale and the {name}, which is "
    "taken to be good to {percent:.1f} %",
    "scale.bar": "the divisions of the bar are taken to be printed where they should be, to 0.1 % of any distance",
    "scale.rocking": "the face is taken to lie parallel to the plane of the marks, whose tilt they show, within "
    "{deg:g} degrees about each axis (standard uncertainty)",
    "scale.tilt": "how square the camera stood to the face was not given: {deg:g} degrees about each axis "
    "(standard uncertainty)",
    "scale.ppi": "the stated resolution is taken to be good to {percent:g} % (standard uncertainty)",
    "scale.unit": "without a scale the shape's priors take the fragment to be 90 mm across",
    "signs.full_of_pitch": "no entry is measured: a full digit is taken to be {share:g} line pitches wide, "
    "give or take {percent:g} % (common practice)",
    "signs.full": "neither an entry nor a line pitch is measured: a full digit is taken to be {mm:g} mm "
    "wide, give or take {percent:g} % (common practice)",
    "signs.ratios": "no measured entry holds these kinds of sign; their widths in full digits are assumed: "
    "{kinds}",
    "signs.stretch": "each entry is taken to be stretched or squeezed by about 11 %, its signs to scatter by "
    "up to 20 %, as far as the measured entries do not tell otherwise",
    "clearance.none": "no column survives with entries: columns are taken to be {typical:g} times as wide as "
    "their widest entry, give or take {percent:g} %",
    "clearance.few": "surviving columns with entries: {columns}; what they say is joined to an expected "
    "clearance of {typical:g}, give or take {percent:g} %, and to a spread between columns of about "
    "{spread:g} %",
    "clearance.widest": "the widest recorded entry of a surviving column is taken to be the widest that it "
    "held",
    "ranking.none": "'none of these' stands for contents that may need any width from one full digit to the "
    "tablet's own, each doubling equally likely; it starts as likely as each candidate",
}

WARNINGS: dict[str, str] = {
    "pitch.ambiguous": "{face}: the lines can be numbered in more than one way: a pitch of {best} was taken, "
    "possible too: {others}; trace a ruling between two neighbouring lines",
    "lens.unread": "{face}: the lens file {file} was not given to the measurement: the distortion of the lens is still "
    "in the numbers; pass lenses=layout.read_lenses(record, folder)",
    "outline.state": "{face}: edges marked abraded or doubtful were left out as evidence of shape",
    "outline.proportion": "{face}: no original edge survives {side}: the height is not known, and the width "
    "rests on what tablets are like",
    "surface.flat": "lengths are taken along the flat of the face, although a convexity is given",
    "evidence.unused": "the evidence from elsewhere ({sources}) is not yet weighed with the outline's",
    "ranking.remains": "the remains at the break are not compared with the candidates",
    "ranking.pool": "the pool of columns and the gaps of running text are not ranked",
    "lost_space.negative": "in {percent} % of the draws nothing is lost: the reconstructed edge lies inside the "
    "surviving boundary",
    "outline.unsure": "the surviving edges do not determine the whole outline: only {percent} % of the draws of "
    "its approximate posterior agree with the exact one",
    "outline.reweighted": "the outline's posterior is far from the form it was drawn in ({percent} % effective): "
    "the draws were weighted by the exact one",
    "outline.break_outside": "the break lies outside every outline that fits the original edges: check which "
    "pieces are original edge and which are break",
    "groove.unseen": "no groove is seen near the tracing, which is kept as it was drawn",
    "faces.disagree": "the fragment's {extent} is {first} on the {one} and {second} on the {other}, though it is one: "
    "on a plate put together from several pictures each face needs a scale of its own; check both scales and outlines",
    "scale.disagree": "the sources of scale contradict one another ({sources}): their errors were enlarged "
    "{ratio} times; check the readings of the marks",
    "outline.crossing": "where outline[{first}] and outline[{second}] of views[{view}] meet, they cross within a few "
    "pixels of ({x}, {y}); what stands out is cut off for the measurement and kept in the record",
    "signs.efficiency": "the widths of signs rest on few effective draws ({percent} % of all): the measured "
    "entries disagree with what is usual; check their texts and ends",
}


@dataclass(frozen=True)
class Assumption:
    """A value that the user did not give but that matters: code, the field it is about, and a sentence."""

    code: str
    about: str
    text: str


@dataclass(frozen=True)
class Caveat:
    """A caveat on a result: code and sentence."""

    code: str
    text: str


@dataclass(frozen=True)
class Missing:
    """A result that cannot be given, and why: the result's name in the results file, and a sentence."""

    result: str
    text: str


Notice = Assumption | Caveat | Missing


def assume(code: str, about: str, **values: object) -> Assumption:
    """Return the assumption registered under ``code``; a KeyError is a fault of this program."""
    return Assumption(code, about, ASSUMPTIONS[code].format(**values))


def warn(code: str, **values: object) -> Caveat:
    """Return the warning registered under ``code``; a KeyError is a fault of this program."""
    return Caveat(code, WARNINGS[code].format(**values))
