"""The same edge seen on two faces has one length.

Plates are often put together from several pictures, resized and turned. Seen from the front and from the back a
fragment has one outline, mirrored; an upper or lower edge is as wide as the faces, a left or right one as high.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np

from layout.notices import Caveat, warn
from layout.quantity import Quantity
from layout.views import MeasuredView

SURPRISING = 2.58
"""So many standard uncertainties apart, one pair in a hundred is by chance."""
BOUNDS = {"width": {"left", "right"}, "height": {"upper", "lower"}}
"""An extent is one only between original edges: along a break, front and back end at different places."""
SHARED = {
    "width": ("obverse", "reverse", "upper edge", "lower edge"),
    "height": ("obverse", "reverse", "left edge", "right edge"),
}


def compare_faces(views: Sequence[MeasuredView]) -> list[Caveat]:
    """Warn of faces on which the fragment's width or height differs by more than chance allows."""
    return [
        warn(
            "faces.disagree",
            one=one.view.face,
            other=other.view.face,
            extent=extent,
            first=first,
            second=second,
        )
        for extent, faces in SHARED.items()
        for one, other in itertools.combinations(views, 2)
        if one.view.face in faces and other.view.face in faces and one.view.face != other.view.face
        for first, second in _differing(one, other, extent)
    ]


def _differing(one: MeasuredView, other: MeasuredView, extent: str) -> list[tuple[str, str]]:
    """Return both lengths as text where they differ by more than chance allows."""
    lengths: list[Quantity] = []
    for view in (one, other):
        edges = {piece.edge for piece in view.view.outline if piece.points}
        if view.preserved is None or not view.scale.known or not BOUNDS[extent] <= edges:
            return []
        lengths.append(view.preserved.width if extent == "width" else view.preserved.height)
    means, sds = zip(*((float(np.mean(q.draws)), float(np.std(q.draws))) for q in lengths), strict=True)
    if abs(means[0] - means[1]) <= SURPRISING * float(np.hypot(*sds)):
        return []
    first, second = (f"{mean:.1f} mm" for mean in means)
    return [(first, second)]
