"""What masks cost a curve: clicks that lie under one, and stretches that are mostly hidden. Each is said, none is refused."""

from typing import Any

import numpy as np

from ..recipe import CurveModel
from ..records import Notice, Trace
from ..sheet import under_mask

HIDDEN_SHARE = 1 / 3
"""A curve with more than this share of its length under masks rests on too little ink to be taken without a look."""


def on_curve(curve: CurveModel, trace: Trace, prepared: Any) -> tuple[Notice, ...]:
    """Notices for clicks under a mask, and for a curve that masks hide for more than a third of its length."""
    if prepared.masked is None:
        return ()
    out = []
    for k in np.flatnonzero(under_mask(prepared, curve.clicks)):
        x, y = curve.clicks[k]
        text = f"A mask lies over click {k + 1} ({x:.0f}, {y:.0f}): no ink can confirm it. Move the mask or the click."
        out.append(Notice(code="mask-over-click", message=text))
    covered = under_mask(prepared, trace.pixels)
    share = float(covered.mean()) if len(covered) else 0.0
    if share > HIDDEN_SHARE:
        edges = np.flatnonzero(np.diff(np.r_[0, covered.astype(np.int8), 0])).reshape(-1, 2)
        first, after = edges[np.argmax(edges[:, 1] - edges[:, 0])]
        text = (
            f"Masks hide {100 * share:.0f} % of this curve. There it is bridged from what shows on either side. "
            "Make the masks smaller, or click the line where you can read it."
        )
        out.append(Notice(code="mask-hides-curve", message=text, stretch=(int(first), int(after) - 1)))
    return tuple(out)
