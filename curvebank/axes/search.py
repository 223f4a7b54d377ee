"""Lines and ticks that the sheet's own search missed: faint, thresholded away but for a few dots, or only as long as a tick.

Where the panel is known to a few pixels it is laid out straight: one coordinate across the picture, the other down. A line is then a
column, and the mean over its whole length shows it although no single stretch does. Ticks are columns of a narrow band beside the axis.
"""

from collections.abc import Callable

import cv2
import numpy as np

from ..records import FloatArray

FINE_PX = 0.5
GROUPS = 16
ROWS_A_GROUP = 14
SIGNIFICANT = 5.0
ToPixels = Callable[[FloatArray, FloatArray], FloatArray]
"""Pixels [n, 2] of own coordinate c [n] and the other coordinate e [n]."""


def straight(
    to_pixels: ToPixels, c: FloatArray, e: FloatArray, ink: np.ndarray, masked: np.ndarray | None
) -> tuple[FloatArray, FloatArray]:
    """Ink [len(e), len(c)] laid out straight, 0..255, and how much of each pixel is known, 0..1."""
    # Few corners suffice: between them the layout is smooth.
    cs, es = np.linspace(c[0], c[-1], 33), np.linspace(e[0], e[-1], 33)
    net = to_pixels(np.tile(cs, 33), np.repeat(es, 33)).reshape(33, 33, 2).astype(np.float32)
    x = (c - c[0]) / (c[-1] - c[0]) * 32
    y = (e - e[0]) / max(e[-1] - e[0], 1e-12) * 32
    gx, gy = np.meshgrid(x.astype(np.float32), y.astype(np.float32))
    at = cv2.remap(net, gx, gy, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    out = cv2.remap(ink, at[..., 0], at[..., 1], cv2.INTER_LINEAR, borderMode=cv2.BORDER_CONSTANT, borderValue=0)
    inside = (at[..., 0] >= 0) & (at[..., 1] >= 0) & (at[..., 0] <= ink.shape[1] - 1) & (at[..., 1] <= ink.shape[0] - 1)
    known = inside.astype(np.float64)
    if masked is not None:
        hidden = cv2.remap(masked.astype(np.uint8), at[..., 0], at[..., 1], cv2.INTER_NEAREST)
        known *= hidden == 0
    return np.asarray(out, dtype=np.float64), known


def find_lines(
    to_pixels: ToPixels,
    c: tuple[float, float],
    e: tuple[float, float],
    px: FloatArray,
    ink: np.ndarray,
    masked: np.ndarray | None,
    width_px: float,
) -> list[tuple[float, float]]:
    """(c, strength) of the columns that are lines over most of ``e``; ``px`` are the pixels of one unit of c and of e."""
    cs = np.arange(c[0], c[1], FINE_PX / px[0])
    length = GROUPS * max(int(min((e[1] - e[0]) * px[1] / GROUPS / 2, ROWS_A_GROUP)), 2)
    es = np.linspace(e[0] + 3 / px[1], e[1] - 3 / px[1], length)
    picture, known = straight(to_pixels, cs, es, ink, masked)
    ridges = _ridge(picture, width_px)
    groups = (ridges * known).reshape(GROUPS, -1, len(cs)).sum(axis=1) / np.maximum(known.reshape(GROUPS, -1, len(cs)).sum(axis=1), 1)
    # A line drifts by a pixel along itself where the layout is not quite straight.
    drift = round(1.0 / FINE_PX)
    wide = cv2.dilate(groups, np.ones((1, 2 * drift + 1), np.uint8))
    order = np.sort(wide, axis=0)
    strength = order[GROUPS // 4 : GROUPS - GROUPS // 4].mean(axis=0)
    return peaks(cs, strength, round(max(4.0, 1.5 * width_px) / FINE_PX))


def find_ticks(
    to_pixels: ToPixels,
    c: tuple[float, float],
    axis_e: float,
    px: FloatArray,
    ink: np.ndarray,
    masked: np.ndarray | None,
    width_px: float,
    unit: float,
) -> list[tuple[float, float, float]]:
    """(c, strength, side) of ticks that stand on the axis at ``axis_e``, on its +e side or its -e side."""
    out: list[tuple[float, float, float]] = []
    cs = np.arange(c[0], c[1], FINE_PX / px[0])
    for side in (-1.0, 1.0):
        first, last = width_px / 2 + 1.5, width_px / 2 + 1.5 + max(3.0, 4.0 * unit)
        offsets = np.linspace(first, last, 8)
        picture, known = straight(to_pixels, cs, axis_e + side * offsets / px[1], ink, masked)
        ridge = _ridge(picture, width_px)
        # A tick is ink all the way from the axis; a letter is not.
        strength = np.sort(np.where(known > 0, ridge, -50.0), axis=0)[1:4].mean(axis=0)
        out += [(at, s, side) for at, s in peaks(cs, strength, round(max(3.0, width_px) / FINE_PX))]
    return out


def _ridge(picture: FloatArray, width_px: float) -> FloatArray:
    """How much darker each column is than what lies a line width beside it."""
    spread = max(0.45 * width_px, 0.8) / FINE_PX
    smooth = cv2.GaussianBlur(picture, (0, 0), sigmaX=spread, sigmaY=1e-6)
    gap = round(max(1.6 * width_px, 2.5) / FINE_PX)
    left, right = np.roll(smooth, gap, axis=1), np.roll(smooth, -gap, axis=1)
    return np.asarray(smooth - np.maximum(left, right), dtype=np.float64)


def peaks(cs: FloatArray, strength: FloatArray, apart: int) -> list[tuple[float, float]]:
    middle = float(np.median(strength))
    # Where ticks stand close more than half of all columns are tick or flank; the quietest fifth still tells the noise.
    spread = np.abs(strength - middle)
    noise = max(min(1.4826 * float(np.median(spread)), float(np.percentile(spread, 20)) / 0.2533), 0.15)
    highest = cv2.dilate(strength[None, :], np.ones((1, 2 * apart + 1), np.uint8))[0]
    at = np.flatnonzero((strength >= highest) & (strength - middle > SIGNIFICANT * noise) & (strength > 0.8))
    out: list[tuple[float, float]] = []
    for k in at:
        # A broad line is a row of equal peaks: one is enough.
        if out and cs[k] - out[-1][0] < apart * (cs[1] - cs[0]):
            continue
        out.append((float(cs[k]), float(strength[k])))
    return out
