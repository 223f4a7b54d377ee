"""Two overlapping scans of one large sheet made into one picture, so that one pair of axes can lie over both.

The first scan stays as it is, to the bit, up to the seam; the second is laid on its pixels by a map of few freedoms (turn, scale, shift),
because what the overlap shows is carried far beyond it. The seam runs where there is least ink.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import cv2
import numpy as np
import numpy.typing as npt

from ..errors import SheetError
from .coarse import Floats
from .load import LIMITS, Sheet
from .paperwarp import projected
from .register import match
from .seam import compose

Pixels = npt.NDArray[np.uint8]
Progress = Callable[[float, str], Any]

TIE_APART_PX = 40.0
"""Two ties nearer to each other than this fix no turn."""
TIE_MISS_PX = 15.0
"""A tie that misses by more than this contradicts the others."""
OVERHANG = 0.03
"""Share of a page that may hang over the first scan's left or upper edge and be cut off: the margin of a sheet laid down askew."""


@dataclass(frozen=True, slots=True, eq=False)
class Joined:
    """One picture of two halves.

    ``pixels`` uint8 [h, w] or [h, w, 3]; ``plane`` [3, 3] from px of the half that comes first to px of the other scan; ``offset`` (x, y)
    px of that half in the picture; ``swapped`` where the second scan had to come first; ``found`` is "ink" or "ties"; ``residual_px`` the
    rms of matched places (or of the ties; None for exactly two); ``overlap`` (width, height) px.
    """

    pixels: Pixels
    plane: Floats
    offset: tuple[int, int]
    swapped: bool
    found: str
    residual_px: float | None
    overlap: tuple[int, int]


def join(first: Sheet, second: Sheet, *, ties: Sequence[Any] | None = None, progress: Progress | None = None) -> Joined:
    """Join two scans of one sheet.

    Parameters
    ----------
    ties : sequence of ((x1, y1), (x2, y2)), optional
        Points clicked on both scans, two or more: needed where the halves share no print (a butt joint), a start where they do.

    Raises
    ------
    SheetError
        ``no-overlap``: the halves are not found on each other; ``ties``: too few, too close, or contradicting; ``too-large``.
    """
    tell = progress or (lambda share, text: None)
    pairs = None if ties is None or not len(ties) else _checked(ties, first, second)
    plane, found, residual = _placed(first, second, pairs, lambda s, t: tell(0.7 * s, t))
    swapped = False
    if _before(plane, first, second):
        first, second, plane, swapped = second, first, _inverse(plane), True
    tell(0.75, "Laying the halves side by side")
    x0, y0, x1, y1 = _canvas(plane, first, second)
    if (x1 - x0) * (y1 - y0) > LIMITS.pixels or max(x1 - x0, y1 - y0) > LIMITS.side_px:
        raise SheetError(
            f"Joined, the page would be {x1 - x0} x {y1 - y0} pixels, more than can be read. Scan the halves at a lower resolution.",
            code="too-large",
        )
    one, two = _same_depth(first.pixels, second.pixels)
    laid, valid = _laid(two, plane, (x0, y0, x1, y1))
    pixels, overlap = compose(one, laid, valid, (-x0, -y0))
    tell(1.0, "Joined")
    return Joined(pixels, plane, (-x0, -y0), swapped, found, residual, overlap)


def _checked(ties: Sequence[Any], first: Sheet, second: Sheet) -> Floats:
    """Ties as [n, 2, 2] (scan, x and y), refused where they can fix nothing."""
    pairs = np.array(ties, dtype=np.float64)
    if pairs.ndim != 3 or pairs.shape[1:] != (2, 2) or not np.isfinite(pairs).all():
        raise SheetError("A tie is a pair of points, x1,y1 on the first scan and x2,y2 on the second.", code="ties")
    if len(pairs) < 2:
        raise SheetError("One tie fixes no turn. Click a second point that both scans show, far from the first.", code="ties")
    for k, page in enumerate((first, second)):
        off = (pairs[:, k] < -0.5).any(axis=1) | (pairs[:, k] > [page.info.width - 0.5, page.info.height - 0.5]).any(axis=1)
        for i in np.flatnonzero(off):
            x, y = pairs[i, k]
            which = "first" if k == 0 else "second"
            raise SheetError(f"Tie {i + 1} lies off the {which} scan ({x:.0f}, {y:.0f}). Click it again.", code="ties")
        if np.hypot(*np.ptp(pairs[:, k], axis=0)) < TIE_APART_PX:
            raise SheetError("The ties lie too close together to fix the turn. Click points far apart.", code="ties")
    return pairs


def _placed(first: Sheet, second: Sheet, pairs: Floats | None, tell: Progress) -> tuple[Floats, str, float | None]:
    """The map from the first scan to the second, what it rests on, and its residual [px of the second]."""
    start = None
    by_ties: float | None = None
    if pairs is not None:
        start = similarity(pairs[:, 0], pairs[:, 1])
        misses = np.hypot(*(projected(start, pairs[:, 0]) - pairs[:, 1]).T)
        if misses.max() > TIE_MISS_PX:
            worst = int(misses.argmax()) + 1
            raise SheetError(
                f"Tie {worst} contradicts the others by {misses.max():.0f} px. Click the same point on both scans.",
                code="ties",
            )
        by_ties = float(np.sqrt(np.mean(misses**2))) if len(pairs) > 2 else None
    try:
        found = match(first, second, progress=tell, bend=False, part=True, start=start)
    except SheetError as refused:
        if start is not None:
            return start, "ties", by_ties
        several = refused.code == "ambiguous-paper"
        raise SheetError(
            ("The halves fit together in more than one way: " if several else "No part of one half is found on the other: ")
            + "click two or more points that both scans show, as ties.",
            code="no-overlap",
        ) from None
    weight = np.ones(len(found.here))
    plane = similarity(found.here, found.there)
    miss = np.zeros(len(found.here))
    for _ in range(5):
        plane = similarity(found.here, found.there, found.white * np.sqrt(weight)[:, None, None])
        miss = np.hypot(*np.einsum("nij,nj->ni", found.white, found.there - projected(plane, found.here)).T)
        weight = np.maximum(1 - (miss / (6 * max(float(np.median(miss)), 0.5))) ** 2, 0.0) ** 2
    told = found.white[:, [0, 1], [0, 1]].min(axis=1) > 4  # places whose shift is known both ways
    gap = np.hypot(*(found.there - projected(plane, found.here)).T)
    use = told & (weight > 0) if (told & (weight > 0)).sum() >= 4 else weight > 0
    return plane, "ink", float(np.sqrt(np.mean(gap[use] ** 2) / 2))


def similarity(here: Floats, there: Floats, white: Floats | None = None) -> Floats:
    """Turn, scale and shift [3, 3] by least squares on (whitened) misses."""
    rows = np.zeros((len(here), 2, 4))
    rows[:, 0] = np.stack([here[:, 0], -here[:, 1], np.ones(len(here)), np.zeros(len(here))], axis=1)
    rows[:, 1] = np.stack([here[:, 1], here[:, 0], np.zeros(len(here)), np.ones(len(here))], axis=1)
    w = np.broadcast_to(np.eye(2), (len(here), 2, 2)) if white is None else white
    lhs = np.einsum("nij,njk->nik", w, rows).reshape(-1, 4)
    a, b, x, y = np.linalg.lstsq(lhs, np.einsum("nij,nj->ni", w, there).ravel(), rcond=None)[0]
    return np.array([[a, -b, x], [b, a, y], [0, 0, 1.0]])


def _inverse(plane: Floats) -> Floats:
    return np.asarray(np.linalg.inv(plane))


def _corners(page: Sheet) -> Floats:
    w, h = page.info.width - 1.0, page.info.height - 1.0
    return np.array([[0, 0], [w, 0], [w, h], [0, h]])


def _before(plane: Floats, first: Sheet, second: Sheet) -> bool:
    """True where the second scan lies to the left of or above the first, and the first not of the second: then it must come first."""
    hangs = _overhang(projected(_inverse(plane), _corners(second)), first)
    would = _overhang(projected(plane, _corners(first)), second)
    return hangs > OVERHANG and would < hangs


def _overhang(corners: Floats, page: Sheet) -> float:
    """How far corners lie left of or above a page, as a share of its sides."""
    low = -corners.min(axis=0) / [page.info.width, page.info.height]
    return float(max(low.max(), 0.0))


def _canvas(plane: Floats, first: Sheet, second: Sheet) -> tuple[int, int, int, int]:
    """The picture's box in px of the first scan: it begins at the first scan's corner unless much of the second lies before it."""
    corners = projected(_inverse(plane), _corners(second))
    size = np.array([first.info.width, first.info.height])
    low = np.floor(corners.min(axis=0)).astype(int)
    low = np.where(-low > OVERHANG * size, np.minimum(low, 0), 0)
    high = np.maximum(np.ceil(corners.max(axis=0) - 0.01).astype(int) + 1, size)
    return int(low[0]), int(low[1]), int(high[0]), int(high[1])


def _same_depth(one: Pixels, two: Pixels) -> tuple[Pixels, Pixels]:
    """Both grey, or both in colour."""
    if one.ndim == two.ndim:
        return one, two
    grow = lambda p: p if p.ndim == 3 else np.repeat(p[..., None], 3, axis=2)  # noqa: E731
    return grow(one), grow(two)


def _laid(page: Pixels, plane: Floats, box: tuple[int, int, int, int]) -> tuple[Pixels, npt.NDArray[np.bool_]]:
    """The second scan on the picture's pixels, and where it shows paper."""
    x0, y0, x1, y1 = box
    shrink = float(np.hypot(plane[0, 0], plane[1, 0]))
    if shrink > 1.2:
        page = np.asarray(cv2.GaussianBlur(page, (0, 0), 0.5 * np.sqrt(shrink**2 - 1)), dtype=np.uint8)
    to = plane @ np.array([[1, 0, x0], [0, 1, y0], [0, 0, 1.0]])
    x, y = np.arange(x1 - x0, dtype=np.float64), np.arange(y1 - y0, dtype=np.float64)[:, None]
    u = (to[0, 0] * x + to[0, 1] * y + to[0, 2]).astype(np.float32)
    v = (to[1, 0] * x + to[1, 1] * y + to[1, 2]).astype(np.float32)
    height, width = page.shape[:2]
    valid = (u >= 0) & (v >= 0) & (u <= width - 1) & (v <= height - 1)
    laid = cv2.remap(page, u, v, cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE)
    return np.asarray(laid, dtype=np.uint8), np.asarray(valid)
