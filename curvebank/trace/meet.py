"""Where one traced line ends on another: both inks are one there, so the end is placed by geometry, not by ink."""

import numpy as np
from scipy.spatial import cKDTree

from ..records import FloatArray, Trace, frozen
from ..sheet.prepare import unit_of


def end_on_others(trace: Trace, others: list[Trace], clicks: FloatArray) -> Trace:
    """The trace with each end that runs into another trace's ink put where its own continuation meets that trace's middle.

    ``clicks`` [n, 2]: up to the outermost ones the line is vouched for, also where it lies on another.
    """
    points, sigma = trace.pixels, trace.sigma_px
    for flip in (True, False):
        if flip:
            points, sigma = points[::-1], sigma[::-1]
        for other in others:
            tail = _tail_to(points, trace, other, clicks)
            if tail is not None:
                keep, extra = tail
                points = np.vstack([points[:keep], extra])
                sigma = np.r_[sigma[:keep], np.full(len(extra), max(float(sigma[:keep][-1]), 0.1))]
                break
        if flip:
            points, sigma = points[::-1], sigma[::-1]
    if len(points) == len(trace.pixels) and np.array_equal(points, trace.pixels):
        return trace
    return Trace(pixels=frozen(points), sigma_px=frozen(sigma), closed=False, source=trace.source, line_width_px=trace.line_width_px)


def _tail_to(points: FloatArray, trace: Trace, other: Trace, clicks: FloatArray) -> tuple[int, FloatArray] | None:
    """How many points to keep and what to put behind them, or None where the last point is not in the other line's ink."""
    width = 0.5 * ((trace.line_width_px or 3.0) + (other.line_width_px or 3.0))
    unit = max(unit_of(trace.line_width_px or 3.0), 0.6)
    look = int(0.6 * len(points))
    if look < 20:
        return None
    # Most ends lie far from most lines: the end itself tells at once.
    if float(((other.pixels - points[-1]) ** 2).sum(axis=1).min()) >= (width + 4.0 * unit) ** 2:
        return None
    gap = cKDTree(other.pixels).query(points[-look:])[0]
    near = gap < width + 1.0 * unit
    rim = int(12 * unit)
    if not near[-1] and near[-rim:].any() and gap[-1] < width + 4.0 * unit:
        # It ran on a little behind the other line: that is still an end on it.
        near[len(near) - int(np.argmax(near[::-1])) :] = True
    if not near[-1] or near.all():
        return None
    inside = int(np.argmax(near[::-1] == 0))
    keep = len(points) - inside
    vouched = int(cKDTree(points).query(clicks)[1].max())
    # It may have run on along the other line after a meeting at a small angle: beyond the last click that ink is the other's.
    together = not other.closed and min(float(np.hypot(*(other.pixels[k] - points[-1]).T)) for k in (0, -1)) < 15 * unit
    together &= vouched - keep > 60 * unit
    runaway = not together and len(points) - vouched > 25 * unit and (inside > 70 * unit or vouched > keep + 20 * unit)
    if (vouched > keep + 20 * unit or inside > 70 * unit) and not runaway:
        return None
    reach = int(min(60 * unit, keep - 2))
    if reach < 15:
        return None
    u = np.arange(-reach + 1, 1) / reach
    basis = np.polynomial.polynomial.polyvander(u, 2)
    c = np.linalg.lstsq(basis, points[keep - reach : keep], rcond=None)[0]
    ahead = np.arange(0.0, min(inside, max(70 * unit, vouched - keep)) + 25 * unit, 0.25) / reach
    path = np.polynomial.polynomial.polyvander(ahead, 2) @ c + points[keep - 1] - c[0]
    hit = _first_crossing(path, other.pixels)
    if runaway:
        hit = _nearest_pass(path, other.pixels) if hit is None else hit
        if keep + 0.25 * hit < vouched:
            return vouched, points[vouched : vouched + 1]
    elif hit is None or abs(hit * 0.25 - inside) > 30 * unit:
        return None
    steps = np.linspace(0, hit, max(int(round(hit * 0.25)), 1) + 1)[1:]
    return keep, np.stack([np.interp(steps, np.arange(len(path)), path[:, k]) for k in (0, 1)], axis=1)


def _first_crossing(path: FloatArray, line: FloatArray) -> float | None:
    """Index (with fraction) at which ``path`` first changes sides of a dense polyline, near it."""
    gap, i = cKDTree(line).query(path)
    i = np.clip(i, 1, len(line) - 2)
    along = line[i + 1] - line[i - 1]
    off = path - line[i]
    side = along[:, 0] * off[:, 1] - along[:, 1] * off[:, 0]
    side = side / np.maximum(np.hypot(*along.T), 1e-9)
    change = np.flatnonzero((side[:-1] * side[1:] <= 0) & (gap[:-1] < 2.0))
    if not len(change):
        return None
    k = int(change[0])
    return k + float(abs(side[k]) / max(abs(side[k]) + abs(side[k + 1]), 1e-9))


def _nearest_pass(path: FloatArray, line: FloatArray) -> float:
    """Index at which ``path`` comes nearest to a dense polyline, at its first such place."""
    gap = cKDTree(line).query(path)[0]
    return float(np.argmax(gap <= float(gap.min()) + 0.25))
