"""The middle of printed lines, measured anew inside the panel: the track found on the sheet is only a guide.

Each pixel near the guide keeps its own place; nothing is resampled. In a stretch along the line a Gaussian cross profile of the line's
width is moved, scaled and lifted until it fits (Gauss-Newton with robust weights, all stretches of all lines at once), so a curve or a
label that crosses the stretch counts little and each stretch has its own uncertainty.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..records import FloatArray

PLACES = 20
ALONG_PX = 10
"""A stretch reaches this many pixels to either side."""
ACROSS_PX = 5
ROUNDS = 5
LEAST_SIGNIFICANCE = 3.0
"""Height of a stretch's line over its uncertainty below which it is not believed."""
LEAST_SHARE = 0.4
READINGS_A_STRETCH = 2.0
"""Ink a pixel away repeats itself (blur, compression): so many pixels count as one reading."""


@dataclass(frozen=True, slots=True, eq=False)
class Measured:
    """Points on the middle of one line: ``at`` [k, 2] px, ``sigma`` [k] px across it, ``height`` the median ink of the line, 0..255."""

    at: FloatArray
    sigma: FloatArray
    height: float


NOTHING = Measured(np.empty((0, 2)), np.empty(0), 0.0)


def measure(
    guides: list[FloatArray],
    widths_px: list[float],
    ink: np.ndarray,
    masked: np.ndarray | None = None,
    *,
    places: int = PLACES,
    reach_px: float = 2.5,
    along_px: int = ALONG_PX,
) -> list[Measured]:
    """Measure lines that run near-horizontally or near-vertically along ``guides``; `NOTHING` where there is no line.

    Parameters
    ----------
    guides : list of [m, 2]
        Points on each line in order, good to ``reach_px``, ends inside the panel.
    widths_px : list of float
        Full width of each line.
    ink : [h, w]
        0 paper to 255 full ink.
    masked : bool [h, w], optional
        Pixels nothing is known about.
    """
    out: list[Measured] = [NOTHING] * len(guides)
    for upright in (False, True):
        mine = [k for k, g in enumerate(guides) if len(g) >= 2 and (np.ptp(g[:, 1]) > np.ptp(g[:, 0])) == upright]
        page, hidden = (ink.T, None if masked is None else masked.T) if upright else (ink, masked)
        for start in range(0, len(mine), 64):
            some = mine[start : start + 64]
            lying = [guides[k][:, ::-1] if upright else guides[k] for k in some]
            found = _measure_lying(lying, [widths_px[k] for k in some], page, hidden, places, reach_px, along_px)
            for k, m in zip(some, found, strict=True):
                out[k] = Measured(m.at[:, ::-1], m.sigma, m.height) if upright else m
    return out


def _measure_lying(
    guides: list[FloatArray],
    widths_px: list[float],
    page: np.ndarray,
    hidden: np.ndarray | None,
    places: int,
    reach_px: float,
    along_px: int,
) -> list[Measured]:
    """Lines that run along x."""
    if not guides:
        return []
    height, width = page.shape
    offsets = np.arange(-along_px, along_px + 1, 2 if along_px > 5 else 1)
    middle_of = len(offsets) // 2
    x, y, slope = (np.empty((len(guides), places, len(offsets))) for _ in range(3))
    for k, g in enumerate(guides):
        g = g[np.argsort(g[:, 0])]
        first, last = g[0, 0] + along_px, g[-1, 0] - along_px
        middle = np.rint(np.linspace(first, max(last, first), places))
        x[k] = middle[:, None] + offsets
        y[k] = np.interp(x[k], g[:, 0], g[:, 1])
        slope[k] = (g[-1, 1] - g[0, 1]) / max(g[-1, 0] - g[0, 0], 1.0)
    across = np.arange(-ACROSS_PX, ACROSS_PX + 1)
    row = np.rint(y)[..., None] + across
    column = np.broadcast_to(x[..., None], row.shape)
    known = (row >= 0) & (row < height) & (column >= 0) & (column < width)
    at = (np.clip(row, 0, height - 1).astype(np.intp), np.clip(column, 0, width - 1).astype(np.intp))
    lean = 1.0 / np.hypot(1.0, slope)[..., None]
    d = ((row - y[..., None]) * lean).reshape(len(guides), places, -1)
    if hidden is not None:
        known &= ~hidden[at]
    shift, sigma, level = _fitted(d, page[at].reshape(d.shape).astype(np.float64), known.reshape(d.shape), widths_px, reach_px)
    out = []
    for k in range(len(guides)):
        good = np.isfinite(sigma[k]) & (np.abs(shift[k]) < reach_px)
        if good.any():
            good &= (level[k] > 0.35 * np.median(level[k][good])) & (level[k] < 2.5 * np.median(level[k][good]) + 5)
        if good.sum() < max(LEAST_SHARE * places, 1):
            out.append(NOTHING)
            continue
        middle_at = slice(middle_of, middle_of + 1)
        normal = np.stack([-slope[k, :, 0], np.ones(places)], -1) * lean[k, :, 0]
        points = np.stack([x[k, :, middle_at][:, 0], y[k, :, middle_at][:, 0]], -1) + shift[k][:, None] * normal
        out.append(Measured(points[good], sigma[k][good], float(np.median(level[k][good]))))
    return out


def _fitted(
    d: FloatArray, value: FloatArray, known: npt.NDArray[np.bool_], widths_px: list[float], reach_px: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Shift, its sigma (inf where nothing is seen) and height of each stretch [lines, places]."""
    spread = np.sqrt(np.clip(np.array(widths_px), 1.0, 12.0) ** 2 / 12 + 0.45)[:, None]
    n = d.shape[:2]
    near = known & (np.abs(d) <= reach_px + 2.2 * spread[..., None] + 1.0)
    weight = near.astype(np.float64)
    enough = weight.sum(-1) >= 0.6 * np.maximum((np.abs(d) <= reach_px + 1.0).sum(-1), 1)
    shift, height, base = _first(d, value, weight, reach_px)
    # Pixels are few and the same ones throughout: only what can be reached takes part.
    robust, noise = weight, np.ones(n)
    information = np.zeros((*n, 3, 3))
    miss = value
    for turn in range(ROUNDS):
        q = (d - shift[..., None]) / spread[..., None]
        g = np.exp(-0.5 * q * q)
        miss = value - base[..., None] - height[..., None] * g
        if turn:
            noise = np.maximum(1.4826 * np.median(np.where(near, np.abs(miss), 0.0), axis=-1), 1.5)
            robust = weight * np.maximum(1 - (miss / (4.5 * noise[..., None])) ** 2, 0.0) ** 2
        rows = np.stack([np.ones_like(g), g, height[..., None] * g * q / spread[..., None]], -2)
        information = (rows * robust[..., None, :]) @ np.swapaxes(rows, -1, -2) + 1e-6 * np.eye(3)
        step = np.linalg.solve(information, (rows @ (robust * miss)[..., None]))[..., 0]
        base, height = base + step[..., 0], np.maximum(height + step[..., 1], 0.5)
        shift = np.clip(shift + np.clip(step[..., 2], -0.7, 0.7), -reach_px - 0.5, reach_px + 0.5)
    rms = np.sqrt((robust * miss**2).sum(-1) / np.maximum(robust.sum(-1) - 3, 1.0))
    covariance = np.linalg.inv(information) * (np.maximum(rms, 0.5 * noise) ** 2 * READINGS_A_STRETCH)[..., None, None]
    sigma = np.sqrt(covariance[..., 2, 2])
    seen = enough & (height > LEAST_SIGNIFICANCE * np.sqrt(covariance[..., 1, 1])) & (height > 3.0)
    return shift, np.where(seen, sigma, np.inf), height


def _first(d: FloatArray, value: FloatArray, weight: FloatArray, reach_px: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """First shift, height and base of each stretch: the highest place of its cross profile in half pixels."""
    n = d.shape[0] * d.shape[1]
    low = float(np.floor(d.min() * 2)) - 1
    bins = int(np.ceil(d.max() * 2) - low) + 2
    at = (np.rint(2 * d) - low).astype(np.intp).reshape(n, -1) + np.arange(n)[:, None] * bins
    count = np.bincount(at.ravel(), weight.ravel(), minlength=n * bins).reshape(n, bins)
    total = np.bincount(at.ravel(), (weight * value).ravel(), minlength=n * bins).reshape(n, bins)
    kernel = np.array([0.25, 0.5, 1.0, 0.5, 0.25])
    smooth = np.stack(
        [np.convolve(t, kernel, "same") / np.maximum(np.convolve(c, kernel, "same"), 0.3) for t, c in zip(total, count, strict=True)]
    )
    place = (np.arange(bins) + low) / 2
    inside = np.abs(place) <= reach_px
    best = np.argmax(np.where(inside, smooth, -np.inf), axis=1)
    base = np.percentile(smooth[:, np.abs(place) <= reach_px + 3], 25, axis=1)
    height = np.maximum(smooth[np.arange(n), best] - base, 1.0)
    shape = d.shape[:2]
    return place[best].reshape(shape), height.reshape(shape), base.reshape(shape)
