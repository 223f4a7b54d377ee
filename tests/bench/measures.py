"""Measures of a trace against the true line, and of values against true values. Pixel figures; the definitions stand at each function."""

from typing import Any

import numpy as np
from scipy.spatial import cKDTree

SWITCH_PX, COVER_PX, OVER_PX = 6.0, 2.0, 8.0


def resample(points: np.ndarray, step: float) -> np.ndarray:
    """A polyline with vertices about ``step`` px apart."""
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(points, axis=0).T))]
    at = np.linspace(0.0, s[-1], max(2, int(s[-1] / step) + 1))
    return np.stack([np.interp(at, s, points[:, k]) for k in (0, 1)], axis=1)


def distance(points: np.ndarray, line: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Distance of points to a dense polyline and the index of its nearest vertex."""
    nearest = cKDTree(line).query(points)[1]
    best = np.full(len(points), np.inf)
    for a in (np.clip(nearest - 1, 0, len(line) - 2), np.clip(nearest, 0, len(line) - 2)):
        edge = line[a + 1] - line[a]
        t = np.clip(((points - line[a]) * edge).sum(1) / np.maximum((edge**2).sum(1), 1e-12), 0, 1)
        best = np.minimum(best, np.hypot(*(points - line[a] - t[:, None] * edge).T))
    return best, nearest


def score(true_line: np.ndarray, closed: bool, pixels: np.ndarray) -> dict[str, Any]:
    """RMS and 95th percentile of the distance [px], coverage (true line within 2 px), overrun past an end [px], misses at the ends [px],
    and the share ``off`` of the trace that is more than 6 px off.

    Failed: more than 3 % of the line over 6 px off in one run, coverage under 0.97, or more than 8 px past an end. Points past a true
    end are left out of the RMS.
    """
    line = np.asarray(true_line, float)[:, :2]
    if len(pixels) < 2:
        return {"rms": None, "p95": None, "off": 1.0, "coverage": 0.0, "switched": False, "over": 0.0, "ends": None, "failed": True}
    fine, even = resample(pixels, 0.5), resample(pixels, 1.0)
    d, i = distance(even, line)
    beyond = np.zeros(len(d), bool)
    if not closed:
        last = len(line) - 1
        beyond = ((i == 0) & ((even - line[0]) @ (line[1] - line[0]) < 0)) | ((i == last) & ((even - line[-1]) @ (line[-1] - line[-2]) > 0))
    over = float(d[beyond].max()) if beyond.any() else 0.0
    d = d[~beyond] if not beyond.all() else d
    coverage = float((cKDTree(fine).query(resample(line, 0.8))[0] <= COVER_PX).mean())
    edge = np.flatnonzero(np.diff(np.r_[0, (d > SWITCH_PX).astype(int), 0])).reshape(-1, 2)
    length = np.hypot(*np.diff(line, axis=0).T).sum()
    switched = bool((edge[:, 1] - edge[:, 0] > 0.03 * length).any())
    ends = None if closed else [float(np.hypot(*(pixels[k] - line[k]))) for k in (0, -1)]
    failed = switched or coverage < 0.97 or over > OVER_PX
    return {
        "rms": float(np.sqrt((d**2).mean())), "p95": float(np.percentile(d, 95)), "coverage": coverage,
        "switched": switched, "over": over, "ends": ends, "failed": failed,
        "off": float((d > SWITCH_PX).mean()),
    }  # fmt: skip


def signed_over_sigma(true_line: np.ndarray, pixels: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Distance across the true line over the stated sigma at each pixel (ends and far-off parts left out): 68 % should be within 1."""
    line = np.asarray(true_line, float)[:, :2]
    d, i = distance(pixels, line)
    keep = (i > 3) & (i < len(line) - 4) & (d < 3.0)
    return (d / np.maximum(sigma, 1e-9))[keep]


def value_error_pct(true_line: np.ndarray, flow: np.ndarray, value: np.ndarray, span: float) -> float | None:
    """RMS difference at equal flow, in % of the axis range; None where flow does not rise along the line."""
    line = np.asarray(true_line, float)
    if len(flow) < 2 or not np.all(np.diff(line[:, 2]) > 0):
        return None
    k = (flow >= line[0, 2]) & (flow <= line[-1, 2])
    if not k.any():
        return None
    return float(100 * np.sqrt(np.mean((value[k] - np.interp(flow[k], line[:, 2], line[:, 3])) ** 2)) / span)
