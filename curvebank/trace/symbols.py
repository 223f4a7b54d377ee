"""Test points: each click is moved to the middle of the symbol it is on.

A symbol is described by the signed distance to its outline (or to its strokes), softened by the blur of the print, and fitted to the ink
around the click by robust least squares: other ink (a curve or grid line through it, a neighbour that touches) counts little, ink that is
missing counts fully. A series is printed with one symbol, so what most clicks agree on helps those where it is hard to see.
"""

from collections import Counter
from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt
from scipy.optimize import least_squares
from scipy.special import ndtr

from ..errors import TraceError
from ..records import FloatArray, Notice, Trace, frozen
from ..sheet import Prepared
from .clicks import ordinal

SHAPES = ("circle", "square", "diamond", "triangle", "triangle down", "cross", "plus")
STROKED = ("cross", "plus")
FITS = 0.16
"""Largest robust misfit (share of full ink, root mean square) of a symbol that is believed to be one."""
SIZES_PX = np.array([2.8, 3.7, 4.9, 6.4, 8.4, 11.0, 14.4, 18.8])
"""Half heights tried."""
WINDOW_PX = 42
FLOOR_PX = 0.03
"""What sampling and blur leave even of a perfect symbol."""


@dataclass(frozen=True, slots=True)
class Kind:
    """A drawn symbol: its shape, and full or hollow."""

    shape: str
    full: bool


KINDS = tuple(Kind(s, f) for s in SHAPES for f in (True, False) if f or s not in STROKED)


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A symbol fitted: ``at`` px, half ``size`` px, ``stroke`` px, robust ``miss`` (share of full ink) and ``sigma`` of its place [px]."""

    kind: Kind
    at: FloatArray
    size: float
    stroke: float
    miss: float
    sigma: float


def points_on_symbols(prepared: Prepared, points: FloatArray) -> Trace:
    """The middles of the symbols clicked at, with their uncertainties. Raises TraceError naming the first click without a symbol."""
    # The sheet's line width misleads where it holds little but symbols.
    unit = float(np.clip(prepared.unit, 0.8, 2.0))
    found = [_best(prepared, at, unit, KINDS, None) for at in points]
    sure = [f for f in found if f is not None and f.miss < 0.6 * FITS]
    if len(sure) >= 2:
        kind, count = Counter(f.kind for f in sure).most_common(1)[0]
        if count >= 0.5 * len(sure):
            size = float(np.median([f.size for f in sure if f.kind == kind]))
            for i, f in enumerate(found):
                if f is None or f.kind != kind or abs(np.log(f.size / size)) > 0.15:
                    again = _best(prepared, points[i], unit, (kind,), size)
                    # The series' own symbol wins unless another one fits much better there.
                    if again is not None and (f is None or again.miss < 1.5 * f.miss + 0.02):
                        found[i] = again
    notices = []
    for i, (start, f) in enumerate(zip(points, found, strict=True)):
        if f is None:
            x, y = start
            raise TraceError(f"The {ordinal(i)} click ({x:.0f}, {y:.0f}) has no symbol near it. Move it onto the symbol.", code="off-ink")
        if f.miss > 0.6 * FITS:
            x, y = f.at
            text = f"The symbol of the {ordinal(i)} click ({x:.0f}, {y:.0f}) is hard to make out. Look whether its middle is right."
            notices.append(Notice(code="unclear-symbol", message=text, stretch=(i, i)))
    places = np.array([f.at for f in found if f is not None])
    for i in range(1, len(places)):
        near = np.hypot(*(places[:i] - places[i]).T)
        if near.min() < 1.0 * unit:
            j = int(np.argmin(near))
            text = f"The {ordinal(j)} and {ordinal(i)} click are on one symbol. Take one of them away or move it."
            notices.append(Notice(code="same-symbol", message=text, stretch=(i, i)))
    return Trace(
        pixels=frozen(places),
        sigma_px=frozen([f.sigma for f in found if f is not None]),
        confidence=0.95 if not notices else 0.75,
        flagged=bool(notices),
        warnings=tuple(notices),
        source="points",
    )


def distance(kind: Kind, dx: FloatArray, dy: FloatArray, size: float, stroke: float) -> FloatArray:
    """Signed distance [px] of points from the ink's edge, below zero in the ink; the origin is the centroid of the symbol's area.

    ``size`` is half its height (circle: the radius), to the middle of the stroke where it is hollow or of strokes.
    """
    x, y = np.abs(dx), np.abs(dy)
    if kind.shape == "plus" or kind.shape == "cross":
        if kind.shape == "cross":
            x, y = np.abs(dx + dy) / np.sqrt(2), np.abs(dx - dy) / np.sqrt(2)
        bars = [np.maximum(a - size, b - 0.5 * stroke) for a, b in ((x, y), (y, x))]
        return np.minimum(*bars)
    if kind.shape == "circle":
        d = np.hypot(dx, dy) - size
    elif kind.shape == "square":
        d = np.maximum(x, y) - size
    elif kind.shape == "diamond":
        d = (x + y - size) / np.sqrt(2)
    else:
        # Equal-sided, its centroid a third of the height above the base; ``size`` is half the height.
        up = dy if kind.shape == "triangle" else -dy
        d = np.maximum(up - 2 * size / 3, (np.sqrt(3) * x - up - 4 * size / 3) / 2)
    return d if kind.full else np.abs(d) - 0.5 * stroke


def drawn(kind: Kind, dx: FloatArray, dy: FloatArray, size: float, stroke: float, blur: float) -> FloatArray:
    """Ink 0..1 of a symbol."""
    return ndtr(-distance(kind, dx, dy, size, stroke) / blur).astype(np.float64)


def _window(image: npt.NDArray[np.uint8], at: FloatArray, reach: int) -> tuple[int, int, FloatArray]:
    height, width = image.shape
    x0, x1 = max(int(round(at[0])) - reach, 0), min(int(round(at[0])) + reach + 1, width)
    y0, y1 = max(int(round(at[1])) - reach, 0), min(int(round(at[1])) + reach + 1, height)
    return x0, y0, image[y0:y1, x0:x1] / 255.0


def _best(prepared: Prepared, click: FloatArray, unit: float, kinds: tuple[Kind, ...], size: float | None) -> Found | None:
    """The best symbol within reach of a click, or None. With ``size`` only symbols of about that size are tried."""
    x0, y0, ink = _window(prepared.clean, click, WINDOW_PX)
    if ink.size == 0 or ink.max() < 0.2:
        return None
    page = ink.astype(np.float32)
    rough: list[tuple[float, Kind, FloatArray, float, float]] = []
    sizes = np.array([size]) if size is not None else SIZES_PX
    for kind in kinds:
        for s in sizes:
            for w in (0.22 * s, 0.4 * s) if not kind.full or kind.shape in STROKED else (0.3 * s,):
                w = max(w, 1.2)
                half = int(np.ceil(1.45 * s + w + 2))
                if 2 * half + 1 > min(page.shape):
                    continue
                g = np.arange(-half, half + 1.0)
                model = drawn(kind, g[None, :] + 0 * g[:, None], g[:, None] + 0 * g[None, :], float(s), float(w), 0.9)
                fit = cv2.matchTemplate(page, model.astype(np.float32), cv2.TM_CCOEFF_NORMED)
                rows, columns = np.mgrid[0 : fit.shape[0], 0 : fit.shape[1]] + half
                away = np.hypot(columns + x0 - click[0], rows + y0 - click[1])
                # A click is on its symbol: the farther, the less likely.
                fit = np.where(away < 0.8 * s + 5 * unit, fit - 0.02 * away / unit, -1.0)
                k = int(np.argmax(fit))
                r, c = divmod(k, fit.shape[1])
                if fit[r, c] > 0.35:
                    rough.append((float(fit[r, c]), kind, np.array([c + half + x0, r + half + y0], float), float(s), float(w)))
    rough.sort(key=lambda f: -f[0])
    tried: list[Found] = []
    seen: Counter[Kind] = Counter()
    for _, kind, at, s, w in rough:
        if seen[kind] >= 2 or sum(seen.values()) >= 4:
            continue
        seen[kind] += 1
        got = _refined(prepared, kind, at, s, w, unit, size)
        if got is not None and np.hypot(*(got.at - click)) < got.size + 6 * unit:
            tried.append(got)
    tried = [f for f in tried if f.miss < (FITS if size is None else 1.5 * FITS)]
    return min(tried, key=lambda f: f.miss, default=None)


def _refined(prepared: Prepared, kind: Kind, at: FloatArray, size: float, stroke: float, unit: float, fixed: float | None) -> Found | None:
    """A symbol fitted to the ink; what else is inked there counts little, what is not inked counts in full."""
    reach = int(np.ceil(1.45 * size + stroke + 3.0 * unit))
    x0, y0, ink = _window(prepared.clean, at, reach)
    hidden = _window(prepared.printed, at, reach)[2] if prepared.printed.size else np.zeros_like(ink)
    trust = 1.0 / (1.0 + (hidden / 0.15) ** 2)
    rows, columns = np.mgrid[0 : ink.shape[0], 0 : ink.shape[1]].astype(float)
    full = max(float(np.percentile(ink, 98)), 0.1)

    def model(p: FloatArray) -> FloatArray:
        return p[4] * drawn(kind, columns + x0 - p[0], rows + y0 - p[1], abs(p[2]), abs(p[3]), max(abs(p[5]), 0.3))

    p = np.array([at[0], at[1], size, stroke, full, 0.9])
    weight = trust
    rough = 0.25 * full
    for turn in range(4):

        def off(q: FloatArray, w: FloatArray = weight) -> FloatArray:
            pull = np.array([0.3 * (q[5] - 0.9), 0.2 * (q[4] - full), 0.02 * (q[3] - stroke)])
            if fixed is not None:
                pull = np.r_[pull, 4.0 * np.log(max(abs(q[2]), 0.1) / fixed)]
            return np.r_[(np.sqrt(w) * (ink - model(q))).ravel(), pull]

        got = least_squares(off, p, method="lm", max_nfev=24)
        p = got.x
        if not (0.4 * size < abs(p[2]) < 2.2 * size) or np.hypot(*(p[:2] - at)) > 0.8 * size + 2 * unit:
            return None
        miss = ink - model(p)
        # Foreign ink (too much) is cut off early, missing ink late.
        rough = max(0.12 * full * (0.65**turn), 0.05 * full)
        weight = trust * np.where(miss > 0, np.maximum(1 - (miss / (4 * rough)) ** 2, 0) ** 2, 1.0)
    inside = model(p) > 0.5 * p[4]
    if inside.sum() < 6 or p[4] < 0.15:
        return None
    lacking = np.maximum(-miss, 0.0) / p[4]
    near = distance(kind, columns + x0 - p[0], rows + y0 - p[1], abs(p[2]), abs(p[3])) < 2.0
    foreign = np.minimum(np.maximum(miss, 0.0) / p[4], 0.3)
    # What the symbol should show and does not, and what is there beside it (letters, a mere stroke of a curve).
    score = float(np.sqrt((trust * (lacking**2 + 0.25 * foreign**2))[near].sum() / max(trust[near].sum(), 1e-9)))
    jacobian = got.jac[: ink.size, :]
    spare = float((weight * miss**2).sum() / max(weight.sum() - len(p), 1.0))
    covariance = np.linalg.pinv(jacobian.T @ jacobian) * spare
    sigma = float(
        np.sqrt(0.5 * (covariance[0, 0] + covariance[1, 1]) * 2.0 + (FLOOR_PX * unit) ** 2 + (0.25 * max(score - 0.04, 0.0) * unit) ** 2)
    )
    return Found(kind, p[:2].copy(), float(abs(p[2])), float(abs(p[3])), score, sigma)
