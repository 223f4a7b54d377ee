"""Is the line there? Row by row along an axis: inked, hidden (under a printed line or another stroke), or empty."""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from ..sheet import Prepared, under_mask
from .axis import Axis
from .band import sample
from .profile import Shape

EMPTY, INKED, HIDDEN, CROSSED = 0, 1, 2, 3


@dataclass(frozen=True, slots=True, eq=False)
class Presence:
    """State of rows about 1 px apart at arc lengths ``s``.

    ``height`` is the line's contrast against what is usual on it, ``left`` and ``right`` the ink just beside it in the same measure,
    ``lean`` [px] where across the path the ink's middle lies.
    """

    s: FloatArray
    state: npt.NDArray[np.int8]
    height: FloatArray
    left: FloatArray
    right: FloatArray
    lean: FloatArray

    def runs(self, wanted: npt.NDArray[np.bool_]) -> npt.NDArray[np.intp]:
        """Runs [k, 2] (first row, row after the last) where ``wanted`` holds."""
        edge = np.flatnonzero(np.diff(np.r_[0, wanted.astype(np.int8), 0]))
        return edge.reshape(-1, 2)


@dataclass(frozen=True, slots=True)
class Rhythm:
    """How the line is drawn: the longest gap [px] that belongs to it and the shortest ink [px] that resumes it; ``dashed`` or solid."""

    dashed: bool
    gap_px: float
    ink_px: float


def presence(prepared: Prepared, axis: Axis, shape: Shape, s: FloatArray) -> Presence:
    """Look along the axis at arc lengths ``s`` (beyond the ends the axis is continued straight)."""
    reach = shape.half_extent + 4.0
    offsets = np.arange(-reach, reach + 0.25, 0.5)
    band = sample(prepared.clean, axis, s, offsets, 1.0)
    band = np.asarray(cv2.blur(band, (1, 3), borderType=cv2.BORDER_REPLICATE), dtype=np.float32)  # single noisy rows do not break a line
    under = sample(prepared.printed, axis, s, np.array([-0.5, 0.0, 0.5]), 1.0).max(axis=1)
    core = np.abs(offsets) <= max(0.5 * shape.width - 0.3, 0.5)
    near = (np.abs(offsets) > shape.half_extent) & (np.abs(offsets) <= shape.half_extent + 3.0)
    left, right = band[:, near & (offsets < 0)].mean(axis=1), band[:, near & (offsets > 0)].mean(axis=1)
    middle = band[:, core].mean(axis=1)
    full = max(shape.height, 0.05)
    rise = (middle - np.minimum(left, right)) / full
    crowd = np.minimum(left, right) / full
    state = np.where(rise > 0.45, INKED, EMPTY)
    state = np.where((crowd > 0.35) & (middle > 0.45 * full), CROSSED, state)
    state = np.where((under > 0.45) & (state == EMPTY), HIDDEN, state)
    if prepared.masked is not None:
        state = np.where(under_mask(prepared, axis.at(s)[0]), HIDDEN, state)
    inner = np.abs(offsets) <= shape.half_extent
    lean = (band[:, inner] * offsets[inner]).sum(axis=1) / np.maximum(band[:, inner].sum(axis=1), 0.2 * full)
    beside = (np.abs(offsets) > shape.half_extent) & (np.abs(offsets) <= shape.half_extent + 2.0)
    sides = [band[:, beside & (offsets * sign > 0)].mean(axis=1) / full for sign in (-1, 1)]
    return Presence(s, state.astype(np.int8), rise, sides[0], sides[1], lean)


def rhythm(seen: Presence, unit: float) -> Rhythm:
    """Solid or dashed, from the gaps inside the trace."""
    gaps = seen.runs(seen.state == EMPTY)
    gaps = gaps[(gaps[:, 0] > 0) & (gaps[:, 1] < len(seen.s))]
    lengths = (gaps[:, 1] - gaps[:, 0]).astype(float)
    real = lengths[lengths >= 2.0 * unit]
    inked = seen.runs(seen.state != EMPTY)
    inked = (inked[:, 1] - inked[:, 0]).astype(float)
    if len(real) >= 4 and real.sum() > 0.08 * len(seen.s):
        usual = float(np.median(real))
        regular = real[real < 2.5 * usual + 3]
        return Rhythm(True, float(np.percentile(regular, 90)) * 1.4 + 3.0 * unit, 0.6 * float(np.percentile(inked, 15)))
    # A solid line may fade for a while; what resumes it must be long and straight, so letters behind its end do not.
    return Rhythm(False, 10.0 * unit, 14.0 * unit)


def style_change(seen: Presence, unit: float) -> tuple[int, bool] | None:
    """Where a line printed solid goes over into dashes, or the other way round: (row, solid first). None where it has one style.

    Both parts must be long and clear: the dashed one has at least four gaps of one kind, the solid one none of them.
    """
    gaps = seen.runs(seen.state == EMPTY)
    lengths = (gaps[:, 1] - gaps[:, 0]).astype(float)
    inner = (lengths >= 2.0 * unit) & (gaps[:, 0] > 0) & (gaps[:, 1] < len(seen.s))
    gaps, lengths = gaps[inner], lengths[inner]
    usual = float(np.median(lengths)) if len(lengths) >= 4 else 0.0
    own = gaps[(lengths > 0.4 * usual) & (lengths < 2.5 * usual + 3)] if usual else gaps[:0]
    if len(own) < 4:
        return None
    period = float(np.median(np.diff(own[:, 0])))
    total, first, last = len(seen.s), int(own[0, 0]), int(own[-1, 1])
    before, after = first, total - last
    # What is called solid must be many periods long, and the gaps must follow each other without a break.
    need = max(6.0 * period, 0.15 * total)
    steady = float(np.diff(own[:, 0]).max()) < 4.0 * period and last - first > 0.1 * total
    inked = lambda a, b: float((seen.state[a:b] != EMPTY).mean()) > 0.9  # noqa: E731
    if steady and before > need and after < need and inked(0, first):
        return first, True
    if steady and after > need and before < need and inked(last, total):
        return last, False
    return None
