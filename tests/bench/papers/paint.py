"""The exact engine: every pixel is inked by its distance to the line, convolved in closed form with the blur. No raster, no resampling."""

import cv2
import numpy as np
from scipy.spatial import cKDTree
from scipy.special import ndtr

from . import letters
from .scene import Blank, Scene, Stroke, arc, resample


def render(scene: Scene) -> np.ndarray:
    """Transmission 0 (full ink) .. 1 (paper): float32 [h, w], or [h, w, 3] for a coloured scene. Ink of one colour saturates by maximum."""
    shape = (scene.height, scene.width)
    out = np.ones((*shape, 3) if scene.coloured else shape, np.float32)
    for item in scene.items:
        if isinstance(item, Blank):
            rows, cols, box = blank(item, scene.blur, shape)
            _over(out, rows, cols, box, (1.0, 1.0, 1.0))
        elif isinstance(item, Stroke):
            y, x, cover = stroke(item, scene.blur, shape)
            if out.ndim == 2:
                out[y, x] = np.minimum(out[y, x], 1 - item.level * cover)
            else:
                part = (item.level * cover)[:, None]
                out[y, x] = out[y, x] * (1 - part) + part * np.float32(item.colour)
        else:
            found = letters.patch(item, scene.blur, shape)
            if found is not None:
                _over(out, *found, item.colour)
    return out


def _over(out: np.ndarray, rows: slice, cols: slice, cover: np.ndarray, colour: tuple[float, float, float]) -> None:
    part = out[rows, cols]
    if out.ndim == 2:
        part += cover * (np.float32(np.mean(colour)) - part)
    else:
        part += cover[..., None] * (np.float32(colour) - part)


def blank(item: Blank, blur: float, shape: tuple[int, int]) -> tuple[slice, slice, np.ndarray]:
    """Rows, columns and cover 0..1 of a blanked box."""
    reach = int(np.hypot(*item.half) + 4 * blur) + 2
    x, y = (int(round(v)) for v in item.at)
    rows, cols = slice(max(y - reach, 0), min(y + reach + 1, shape[0])), slice(max(x - reach, 0), min(x + reach + 1, shape[1]))
    py, px = np.mgrid[rows, cols].astype(np.float32)
    a = np.radians(item.angle)
    u = (px - item.at[0]) * np.cos(a) + (py - item.at[1]) * np.sin(a)
    v = -(px - item.at[0]) * np.sin(a) + (py - item.at[1]) * np.cos(a)
    b = max(blur, 0.25)
    inside = ndtr((item.half[0] - np.abs(u)) / b) * ndtr((item.half[1] - np.abs(v)) / b)
    return rows, cols, inside.astype(np.float32)


def stroke(item: Stroke, blur: float, shape: tuple[int, int]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Pixels (y, x) near a stroke and their cover 0..1."""
    b = max(blur, 0.25)
    straight = _straight(item, b, shape)
    if straight is not None:
        return straight
    line = resample(item.line, 1.0) if len(item.line) < 0.7 * arc(item.line)[-1] else item.line
    length = arc(line)[-1]
    shift = 0.0
    if item.closed:
        tail, head = line[-12:-1], line[1:12]
        shift = arc(np.concatenate([tail, line[:1]]))[-1]
        line = np.concatenate([tail, line, head])
    reach = item.width / 2 + 4 * b + 1.5
    y, x = _near(line, reach, shape)
    if not len(x):
        return y, x, np.zeros(0, np.float32)
    dist, s = project(np.stack([x, y], 1).astype(float), line)
    cover = ndtr((item.width / 2 - dist) / b) - ndtr((-item.width / 2 - dist) / b)
    if item.intervals is not None:
        cover = cover * pattern(s - shift, item.intervals, b)
    elif not item.closed:
        cover = cover * ndtr(s / b) * ndtr((length - s) / b)
    return y, x, cover.astype(np.float32)


def _near(line: np.ndarray, reach: float, shape: tuple[int, int]) -> tuple[np.ndarray, np.ndarray]:
    """Pixels within ``reach`` of a polyline (a few more), found on a mask of its box."""
    pad = int(reach) + 3
    low = np.maximum(np.floor(line.min(0)).astype(int) - pad, 0)
    high = np.minimum(np.ceil(line.max(0)).astype(int) + pad + 1, (shape[1], shape[0]))
    if (high <= low).any():
        return np.zeros(0, int), np.zeros(0, int)
    mask = np.zeros((high[1] - low[1], high[0] - low[0]), np.uint8)
    cv2.polylines(mask, [np.rint(line - low).astype(np.int32).reshape(-1, 1, 2)], False, 1, 2 * int(np.ceil(reach)) + 1)
    y, x = np.nonzero(mask)
    return y + low[1], x + low[0]


def _straight(item: Stroke, b: float, shape: tuple[int, int]) -> tuple[np.ndarray, np.ndarray, np.ndarray] | None:
    """Long lines that run nearly along rows or columns (grids): distance from the offset in each column times the slope's cosine."""
    if item.intervals is not None or item.closed or len(item.line) > 400:
        return None
    e = np.diff(item.line, axis=0)
    for flip in (False, True):
        main, side = (e[:, 1], e[:, 0]) if flip else (e[:, 0], e[:, 1])
        if not ((main > 0).all() or (main < 0).all()) or np.abs(side / main).max() > 0.12:
            continue
        line = item.line if main[0] > 0 else item.line[::-1]
        if flip:
            line = line[:, ::-1]
        width, height = (shape[0], shape[1]) if flip else (shape[1], shape[0])
        margin = 4 * b + 1
        at = np.arange(max(int(line[0, 0] - margin), 0), min(int(line[-1, 0] + margin) + 2, width))
        if not len(at):
            return None
        v = np.interp(at, line[:, 0], line[:, 1])
        slope = np.gradient(line[:, 1], line[:, 0]) if len(line) > 2 else np.full(2, (line[1, 1] - line[0, 1]) / (line[1, 0] - line[0, 0]))
        cos = 1 / np.hypot(1.0, np.interp(at, line[:, 0], slope))
        half = int(np.ceil(item.width / 2 + margin)) + 1
        rows = np.rint(v).astype(int)[:, None] + np.arange(-half, half + 1)[None, :]
        d = (rows - v[:, None]) * cos[:, None]
        cover = ndtr((item.width / 2 - d) / b) - ndtr((-item.width / 2 - d) / b)
        cover = cover * (ndtr((at - line[0, 0]) / b) * ndtr((line[-1, 0] - at) / b))[:, None]
        keep = (rows >= 0) & (rows < height) & (cover > 1e-4)
        cols = np.broadcast_to(at[:, None], rows.shape)
        y, x = (cols[keep], rows[keep]) if flip else (rows[keep], cols[keep])
        return y, x, cover[keep].astype(np.float32)
    return None


def project(px: np.ndarray, line: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Distance of points to a dense polyline (endless at its ends) and arc length of the foot."""
    s = arc(line)
    _, i = cKDTree(line).query(px)
    best, foot = np.full(len(px), np.inf), np.zeros(len(px))
    for a in (np.clip(i - 1, 0, len(line) - 2), np.clip(i, 0, len(line) - 2)):
        e = line[a + 1] - line[a]
        n = np.maximum((e**2).sum(1), 1e-12)
        t = ((px - line[a]) * e).sum(1) / n
        inner = np.clip(t, np.where(a == 0, -np.inf, 0.0), np.where(a == len(line) - 2, np.inf, 1.0))
        d = np.hypot(*(px - line[a] - inner[:, None] * e).T)
        closer = d < best
        best = np.where(closer, d, best)
        foot = np.where(closer, s[a] + inner * np.sqrt(n), foot)
    return best, foot


def pattern(s: np.ndarray, intervals: np.ndarray, blur: float) -> np.ndarray:
    """Ink 0..1 at arc lengths ``s`` of a line that is inked in ``intervals``."""
    out = np.zeros_like(s)
    near = np.searchsorted(intervals[:, 0], s) - 1
    for shift in (-1, 0, 1):
        k = near + shift
        real = (k >= 0) & (k < len(intervals))
        a, b = intervals[np.clip(k, 0, len(intervals) - 1)].T
        out += np.where(real, ndtr((s - a) / blur) * ndtr((b - s) / blur), 0.0)
    return np.clip(out, 0, 1)
