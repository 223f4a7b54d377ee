"""The middle of printed lines, measured anew inside the panel: the track found on the sheet is only a guide.

Each pixel near the guide keeps its own place; nothing is resampled. In a stretch along the line the middle is the centroid of the ink
under a Gaussian window that follows it: for ink gathered over whole pixels that is free of bias whatever the line's profile, where a
profile fitted to a line narrower than two pixels is drawn towards whole pixels. A curve or a label that crosses a stretch differs from the
median along it and is left out.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..records import FloatArray

PLACES = 20
ALONG_PX = 10
"""A stretch reaches this many pixels to either side."""
ACROSS_PX = 5
ROUNDS = 6
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
    half_rows = int(np.ceil(max(ACROSS_PX, reach_px + 1.2 * min(max(widths_px), 12.0) + 1.0)))
    across = np.arange(-half_rows, half_rows + 1)
    row = np.rint(y)[..., None] + across
    column = np.broadcast_to(x[..., None], row.shape)
    known = (row >= 0) & (row < height) & (column >= 0) & (column < width)
    at = (np.clip(row, 0, height - 1).astype(np.intp), np.clip(column, 0, width - 1).astype(np.intp))
    lean = 1.0 / np.hypot(1.0, slope)
    d: FloatArray = ((row - y[..., None]) * lean[..., None]).astype(np.float32)  # type: ignore[assignment]  # half the memory to move
    if hidden is not None:
        known &= ~hidden[at]
    shift, sigma, level = _centred(d, page[at].astype(np.float32), known, widths_px, reach_px)
    out = []
    for k in range(len(guides)):
        good = np.isfinite(sigma[k]) & (np.abs(shift[k]) < reach_px)
        if good.any():
            good &= (level[k] > 0.35 * np.median(level[k][good])) & (level[k] < 2.5 * np.median(level[k][good]) + 5)
        if good.sum() < max(LEAST_SHARE * places, 1):
            out.append(NOTHING)
            continue
        middle_at = slice(middle_of, middle_of + 1)
        normal = np.stack([-slope[k, :, 0], np.ones(places)], -1) * lean[k, :, 0, None]
        points = np.stack([x[k, :, middle_at][:, 0], y[k, :, middle_at][:, 0]], -1) + shift[k][:, None] * normal
        out.append(Measured(points[good], sigma[k][good], float(np.median(level[k][good]))))
    return out


def _centred(
    d: FloatArray, value: FloatArray, known: npt.NDArray[np.bool_], widths_px: list[float], reach_px: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Shift, its sigma (inf where nothing is seen) and height of each stretch [lines, places]; ``d`` [lines, places, along, across]."""
    spread2 = (np.clip(np.array(widths_px), 1.0, 12.0) ** 2 / 12 + 0.45)[:, None]
    window2 = 1.7 * spread2 + 0.4
    place = np.median(d, axis=2)
    profile = np.median(value, axis=2)
    noise = np.maximum(1.4826 * np.median(np.abs(value - profile[:, :, None]), axis=(2, 3)), 1.0)
    base = np.percentile(profile, 25, axis=2)
    wide = np.pad(profile, ((0, 0), (0, 0), (2, 2)), mode="edge")
    rows = profile.shape[2]
    smooth = wide[..., 2 : 2 + rows] + sum(k * wide[..., 2 + j : 2 + j + rows] for j, k in ((-2, 0.25), (-1, 0.7), (1, 0.7), (2, 0.25)))
    best = np.argmax(np.where(np.abs(place) <= reach_px + 0.5, smooth, -np.inf), axis=2)[..., None]
    shift = np.take_along_axis(place, best, 2)[..., 0]
    height = np.maximum(np.max(np.where(np.abs(place - shift[..., None]) <= 1.6, profile, -np.inf), axis=2) - base, 0.5)
    strange = np.abs(value - profile[:, :, None]) > (0.6 * height + 4 * noise)[..., None, None]
    weight = (known & ~strange).astype(np.float64)
    enough = weight.mean(axis=(2, 3)) > 0.5
    ink = weight * (value - base[..., None, None])
    gain = 1.0 + spread2 / window2
    for _ in range(ROUNDS):
        q = d - shift[..., None, None]
        g = np.exp(-0.5 * q * q / window2[..., None, None])
        mass = (ink * g).sum(axis=(2, 3))
        moment = (ink * g * q).sum(axis=(2, 3))
        step = gain * moment / np.maximum(mass, 1e-6)
        shift = np.clip(shift + np.clip(step, -0.8, 0.8), -reach_px - 0.5, reach_px + 0.5)
    n = np.maximum(weight.sum(axis=(2, 3)), 1.0)
    significance = mass / (noise * np.sqrt(READINGS_A_STRETCH * np.maximum((weight * g * g).sum(axis=(2, 3)), 1e-9)))
    scatter = noise * np.sqrt(READINGS_A_STRETCH * (weight * (g * q) ** 2).sum(axis=(2, 3)))
    sigma = gain * scatter / np.maximum(mass, 1e-6)
    seen = enough & (significance > LEAST_SIGNIFICANCE) & (height > 3.0) & (n > 20)
    return shift, np.where(seen, sigma, np.inf), height
