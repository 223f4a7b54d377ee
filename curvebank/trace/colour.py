"""Ink of another colour than the curve's own fades before the curve is traced: it is treated as a printed line is.

The darkness of the channels has the same direction however much of a pixel an ink covers, so an ink is told by that direction. Compression
stores colour at half the size of the page: the direction comes from a smoothed picture and only weighs the ink, whose place stays the
page's own.
"""

from dataclasses import replace

import cv2
import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from ..sheet import Prepared

Bytes = npt.NDArray[np.uint8]
Floats32 = npt.NDArray[np.float32]
Places = npt.NDArray[np.intp]

BLUR_PX = 1.2
"""Smoothing of the channels: about the size of a colour sample of a compressed scan."""
SOLID = 0.45
"""Ink, in parts of the curve's own, from which a pixel tells its colour well."""
AGREE = 0.2
"""Two clicks on one ink differ in direction by less."""
APART = 0.22
"""Inks whose directions differ by less on the whole are left as they are."""
CLEAR = 2.0
"""How far two inks must lie apart, in their mean scatter."""
FURTHEST = 0.5
"""Inks further from the curve's own than this are all alike: several others must not hide the gap before the nearest."""
SHARE = 0.02
"""Least share of the solid ink near the curve that is of its own colour, and of another."""
KEEP, DROP = 0.4, 0.8
"""Way from the own colour to the others up to which ink is kept whole, and from which it is dropped."""
MARGIN = 0.45
"""Margin round the clicks, in parts of the longest way between two of them, within which a curve is looked for."""
FAINT = 0.2
"""What is left of another ink: the curve may lie under it, so it is still better than paper."""
WHOLE = 0.8
"""Part of the usual width of a line from which the curve is seen whole."""
REACH_PX = 8.0
"""Where the curve is seen whole, other ink goes within this distance (times the unit)."""
LEAST_INK = 8
"""Ink 0..255 below which a pixel is paper."""


def own_ink(prepared: Prepared, clicks: FloatArray) -> tuple[Prepared, Prepared]:
    """The sheet on which the curve through the clicks [n, 2] is to be searched for, and the sheet on which the path found is brought near.

    On the first all ink of clearly other colours is faint. On the second it goes only close to where the curve shows at its full width:
    where the curve lies under another, wholly or in part, the common stroke is the best evidence of its place. The last reading is
    for the whole page: colour tells which line it is, not where it lies.

    ``prepared`` itself is returned twice for a grey sheet, where the clicks lie on different colours, and where nothing of another
    colour is about.
    """
    if prepared.colour is None or len(clicks) < 2:
        return prepared, prepared
    x0, y0, x1, y1 = _about(prepared, clicks)
    clean = np.ascontiguousarray(prepared.clean[y0:y1, x0:x1])
    smooth = np.asarray(cv2.GaussianBlur(prepared.colour[y0:y1, x0:x1], (0, 0), BLUR_PX), dtype=np.uint8)
    own = _colour_of(prepared, smooth, clean, clicks - (x0, y0))
    if own is None:
        return prepared, prepared
    colour, level = own
    at = np.flatnonzero(clean > LEAST_INK)
    # Between unit vectors |a - b|^2 = 2 - 2 ab.
    away = np.sqrt(np.maximum(2.0 - 2.0 * (_directions(smooth.reshape(-1, 3)[at]) @ colour), np.float32(0.0)))
    ink = clean.reshape(-1)[at]
    limits = _parting(away[ink > SOLID * level])
    if limits is None:
        return prepared, prepared
    keep = np.clip((limits[1] - away) / (limits[1] - limits[0]), 0.0, 1.0)
    shown = np.zeros(clean.shape, np.uint8)
    shown.reshape(-1)[at[(keep > 0.5) & (ink > SOLID * level)]] = 1
    near = _beside_full_width(shown, prepared).reshape(-1)[at] > 0
    v, u = np.divmod(at, clean.shape[1])
    place = (v + y0) * prepared.shape[1] + u + x0
    return _faded(prepared, place, np.maximum(keep, np.float32(FAINT))), _faded(prepared, place[near], keep[near])


def _beside_full_width(shown: Bytes, prepared: Prepared) -> Bytes:
    """Which pixels lie close to where the curve's own ink ``shown`` is as wide as a line: 1, others 0."""
    core = max(int(round(WHOLE * prepared.width_px)), 1)
    reach = 2 * int(round(REACH_PX * prepared.unit)) + 1
    whole = cv2.morphologyEx(shown, cv2.MORPH_OPEN, cv2.getStructuringElement(cv2.MORPH_ELLIPSE, (core, core)))
    return np.asarray(cv2.dilate(whole, np.ones((reach, reach), np.uint8)), dtype=np.uint8)


def _about(prepared: Prepared, clicks: FloatArray) -> tuple[int, int, int, int]:
    """Left, top, right and bottom [px] of where the curve may lie."""
    low, high = clicks.min(axis=0), clicks.max(axis=0)
    pad = MARGIN * float(np.hypot(*np.diff(clicks, axis=0).T).max()) + 40.0 * prepared.unit
    height, width = prepared.shape
    left, top = np.maximum(np.floor(low - pad), 0).astype(int)
    right, bottom = np.minimum(np.ceil(high + pad).astype(int) + 1, (width, height))
    return int(left), int(top), int(right), int(bottom)


def _directions(channels: Bytes) -> Floats32:
    """Unit vectors [n, 3] of the channels' darkness."""
    values = channels.astype(np.float32)
    length = np.sqrt(np.einsum("ij,ij->i", values, values))
    return np.asarray(values / np.maximum(length, np.float32(1.0))[:, None], dtype=np.float32)


def _colour_of(prepared: Prepared, smooth: Bytes, clean: Bytes, clicks: FloatArray) -> tuple[Floats32, float] | None:
    """Direction [3] of the ink most clicks lie on and its usual ink 0..255, or None where they do not agree."""
    reach = int(round(4 * max(prepared.unit, 0.75)))
    found, tops = [], []
    for x, y in np.rint(clicks).astype(int):
        rows, columns = slice(max(y - reach, 0), y + reach + 1), slice(max(x - reach, 0), x + reach + 1)
        part = clean[rows, columns]
        top = int(part.max(initial=0))
        if top < 3 * LEAST_INK:
            continue
        v, u = np.nonzero(part > 0.7 * top)
        nearest = np.argsort(np.hypot(u + columns.start - x, v + rows.start - y), kind="stable")[:9]
        mean = smooth[rows, columns][v[nearest], u[nearest]].astype(np.float32).sum(axis=0)
        found.append(mean / max(float(np.sqrt(np.square(mean).sum())), 1e-6))
        tops.append(float(top))
    if len(found) < 2:
        return None
    each = np.array(found, dtype=np.float32)
    same = np.sqrt(np.square(each[:, None] - each[None]).sum(axis=2)) < AGREE
    best = same[int(same.sum(axis=1).argmax())]
    if best.sum() < 2 or 2 * best.sum() <= len(clicks):
        return None
    own = np.median(each[best], axis=0)
    return np.asarray(own / np.sqrt(np.square(own).sum()), dtype=np.float32), float(np.median(np.array(tops)[best]))


def _parting(away: Floats32) -> tuple[float, float] | None:
    """Distances from the own colour at which ink begins to be and is wholly another's, or None where there is no other.

    The split into two classes with the greatest variance between them (Otsu, IEEE Trans. SMC 9, 1979).
    """
    if len(away) < 100:
        return None
    steps = 60
    away = np.minimum(away, np.float32(FURTHEST))
    counts, edges = np.histogram(away, bins=steps, range=(0.0, 1.01 * FURTHEST))
    middles = 0.5 * (edges[1:] + edges[:-1])
    below, sum_below = np.cumsum(counts)[:-1], np.cumsum(counts * middles)[:-1]
    above, sum_above = len(away) - below, (counts * middles).sum() - sum_below
    first, second = sum_below / np.maximum(below, 1), sum_above / np.maximum(above, 1)
    cut = int((below * above * np.square(second - first)).argmax())
    if min(below[cut], above[cut]) < SHARE * len(away):
        return None
    near, far = away[away < edges[cut + 1]], away[away >= edges[cut + 1]]
    gap = float(far.mean()) - float(near.mean())
    if gap < APART or gap < CLEAR * 0.5 * (float(near.std()) + float(far.std())) or near.mean() > 0.5 * gap:
        return None
    return float(near.mean()) + KEEP * gap, float(near.mean()) + DROP * gap


def _faded(prepared: Prepared, place: Places, keep: Floats32) -> Prepared:
    """The sheet with the ink at ``place`` (indices into the flat page) kept by shares ``keep``; what goes counts as printed."""
    clean, printed = prepared.clean.copy(), prepared.printed.copy()
    less = keep < 1.0
    place, keep = place[less], keep[less]
    before = prepared.clean.reshape(-1)[place]
    left = np.asarray(np.rint(before * keep), dtype=np.uint8)
    clean.reshape(-1)[place] = left
    printed.reshape(-1)[place] = np.maximum(printed.reshape(-1)[place], before - left)
    return replace(prepared, clean=clean, printed=printed)
