"""Model the printed lines and take them out of the ink without cutting the curves that cross them."""

import cv2
import numpy as np
import numpy.typing as npt

from .lines import PrintedLine

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float64]

DARK = 0.45
"""From this model strength on a printed line hides what lies under it: the pixel is bridged, not divided out."""
BLOCK_PX = 64


def remove_lines(ink: Bytes, lines: tuple[list[PrintedLine], list[PrintedLine]], unit: float) -> tuple[Bytes, Bytes, list[PrintedLine]]:
    """Ink without printed lines, the modelled ink of those lines (both 0..255), and the lines with contrast and width filled in."""
    printed = np.zeros_like(ink)
    measured: list[PrintedLine] = []
    flipped, drawn = np.ascontiguousarray(ink.T), np.zeros(ink.shape[::-1], np.uint8)
    for family, page, into in ((lines[0], ink, printed), (lines[1], flipped, drawn)):
        for line in family:
            found = _draw(page, into, line, unit)
            if found is not None:
                measured.append(found)
    printed = np.ascontiguousarray(np.maximum(printed, drawn.T))
    return _subtract(ink, printed, unit), printed, measured


def _draw(page: Bytes, into: Bytes, line: PrintedLine, unit: float) -> PrintedLine | None:
    """Write one near-horizontal line's modelled ink into ``into``; None when there is no line to see."""
    height, width = page.shape
    half = max(4, round(5 * unit))
    x = np.arange(int(line.along[0]), int(line.along[-1]) + 1)
    y = np.interp(x, line.along, line.across)
    offsets = np.arange(-half, half + 0.01, 0.5)
    stride = max(1, min(4, len(x) // 200))
    thin = slice(0, len(x), stride)
    maps = (np.repeat(x[thin][None, :].astype(np.float32), len(offsets), 0), (y[thin][None, :] + offsets[:, None]).astype(np.float32))
    top, low = int(max(y.min() - half - 2, 0)), int(min(y.max() + half + 3, height))
    band = cv2.remap(page[top:low].astype(np.float32), maps[0], maps[1] - top, cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    band = np.asarray(band, dtype=np.float32) * np.float32(1 / 255)
    # The 60th percentile sees a dashed line with half its length inked; curves that cross are rare along one line.
    profile = np.percentile(band, 60, axis=1)
    base = float(np.median(np.r_[profile[: len(offsets) // 5], profile[-(len(offsets) // 5) :]]))
    profile = np.maximum(profile - base, 0.0)
    middle = np.abs(offsets) <= 2.0 * max(unit, 0.7)
    peak = float(profile[middle].max())
    if peak < 0.03:
        return None
    centre = int(np.argmax(np.where(middle, profile, 0)))
    above = profile > 0.5 * peak
    left = centre - int(np.argmin(above[: centre + 1][::-1])) + 1 if not above[: centre + 1].all() else 0
    right = centre + int(np.argmin(above[centre:])) - 1 if not above[centre:].all() else len(offsets) - 1
    full = 0.5 * (right - left + 1)
    reach = full / 2 + 2.0 * max(unit, 0.6)
    taper = np.clip(reach + 0.5 - np.abs(offsets - offsets[centre]), 0, 1)
    profile = profile * taper
    amplitude = _amplitude(band, base, profile, peak, len(x), stride)
    rows = np.rint(y).astype(int)[None, :] + np.arange(-half, half + 1)[:, None]
    model = np.interp(rows - y[None, :], offsets, profile, left=0.0, right=0.0) * amplitude[None, :]
    inside = (rows >= 0) & (rows < height) & (model > 0.004)
    at = (rows[inside], np.broadcast_to(x[None, :], rows.shape)[inside])
    into[at] = np.maximum(into[at], np.minimum(np.rint(255 * model[inside]), 255).astype(np.uint8))
    return PrintedLine(line.horizontal, line.along, line.across, peak, full, line.sigma_px)


def _amplitude(band: npt.NDArray[np.float32], base: float, profile: Floats, peak: float, count: int, stride: int) -> Floats:
    """Strength of the line along itself, relative to its profile: block medians, filtered so that a curve lying on it does not count."""
    core = profile > 0.6 * peak
    level = (band[core].mean(axis=0) - base) / max(float(profile[core].mean()), 1e-6)
    block = max(BLOCK_PX // stride, 4)
    edges = np.arange(0, len(level), block)
    medians = np.array([np.percentile(level[e : e + block], 55) for e in edges])
    if len(medians) >= 3:
        padded = np.r_[medians[:1], medians, medians[-1:]]
        medians = np.median(np.stack([padded[:-2], padded[1:-1], padded[2:]]), axis=0)
    middle = (edges + block / 2) * stride
    return np.clip(np.interp(np.arange(count), middle, medians), 0.0, 1.6)


def _subtract(ink: Bytes, printed: Bytes, unit: float) -> Bytes:
    """Inks multiply what they let through: 1 - ink = (1 - line)(1 - rest). Under a dark line the rest is bridged by closing."""
    line = printed.astype(np.float32) / 255.0
    rest = 255.0 - (255.0 - ink) / (1.0 - np.minimum(line, DARK))
    dark = line > DARK
    rest[dark] = 0.0
    clean = np.clip(np.rint(rest), 0, 255).astype(np.uint8)
    size = 2 * max(2, round(3 * unit)) + 1
    bridged = cv2.morphologyEx(clean, cv2.MORPH_CLOSE, np.ones((size, size), np.uint8))
    near = cv2.dilate(dark.astype(np.uint8), np.ones((3, 3), np.uint8)) > 0
    clean[near] = np.minimum(bridged[near], np.maximum(ink[near], clean[near]))
    return clean
