"""A smooth axis in the plane with arc length and normals: what bands are laid along."""

from dataclasses import dataclass, field

import numpy as np
from scipy.interpolate import CubicSpline

from ..records import FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Axis:
    """A curve sampled finely: ``points`` [n, 2] px at even arc lengths ``s`` [n], with unit tangents [n, 2].

    A closed one repeats its first point at the end.
    """

    points: FloatArray
    s: FloatArray
    tangents: FloatArray
    closed: bool
    table: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "table", np.concatenate([self.points, self.tangents], axis=1))

    @property
    def length(self) -> float:
        """Arc length [px]."""
        return float(self.s[-1])

    @property
    def normals(self) -> FloatArray:
        """Unit normals [n, 2]: the tangent turned so that a curve running right has its normal downwards (y grows down)."""
        return np.stack([-self.tangents[:, 1], self.tangents[:, 0]], axis=1)

    def at(self, s: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Points and unit normals at arc lengths ``s`` (wrapped when closed, continued straight when open)."""
        s = np.asarray(s, dtype=np.float64)
        t = np.mod(s, self.length) if self.closed else np.clip(s, 0.0, self.length)
        # Samples are even in arc length, so the cell is found by division.
        u = t * ((len(self.s) - 1) / self.length)
        cell = np.minimum(u.astype(np.int64), len(self.s) - 2)
        out = np.take(self.table, cell, axis=0)
        step = np.take(self.table, cell + 1, axis=0)
        step -= out
        step *= (u - cell)[:, None]
        out += step
        if not self.closed:
            beyond = s - t
            if beyond.any():
                out[:, :2] += beyond[:, None] * out[:, 2:]
        # Between neighbouring unit tangents the length is 1 to second order in their tiny angle.
        return out[:, :2], np.stack([-out[:, 3], out[:, 2]], axis=1)

    def curvature_at(self, s: FloatArray) -> FloatArray:
        """Signed curvature [1/px] at arc lengths ``s``, positive where the axis bends towards its normal."""
        a, b = self.tangents[:-1], self.tangents[1:]
        bend = (a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]) * ((len(self.s) - 1) / self.length)
        cell = (np.asarray(s) * ((len(self.s) - 1) / self.length)).astype(np.int64)
        return bend[np.clip(cell, 0, len(bend) - 1)]

    def arc_of(self, xy: FloatArray) -> FloatArray:
        """Arc length of the nearest axis sample to each point [n, 2]."""
        d = ((xy[:, None, :] - self.points[None, :, :]) ** 2).sum(axis=2)
        return self.s[d.argmin(axis=1)]

    def tightest_radius(self) -> float:
        """Smallest radius of curvature [px], smoothed over a few samples."""
        turn = np.hypot(*np.diff(self.tangents, axis=0).T)
        step = np.maximum(np.diff(self.s), 1e-9)
        bend = np.convolve(turn, np.ones(5), "same") / np.convolve(step, np.ones(5), "same")
        return float(1.0 / max(bend.max(initial=0.0), 1e-6))

    def turning(self) -> float:
        """Total turning [rad], to both sides alike."""
        step = np.diff(self.tangents[:: max(len(self.s) // 60, 1)], axis=0)
        return float(np.hypot(*step.T).sum())

    def unevenness(self, window: float) -> float:
        """How much the curvature changes along the curve, seen through a window [px]: rms of its derivative times length squared."""
        k = max(int(window / max(self.length / (len(self.s) - 1), 1e-9)), 1)
        angle = np.unwrap(np.arctan2(self.tangents[:, 1], self.tangents[:, 0]))
        if self.closed:
            angle = np.r_[angle, angle[1:] + (angle[-1] - angle[0])]
        if len(angle) < 6 * k:
            return 0.0
        mean = np.convolve(angle, np.ones(k) / k, "valid")
        bend = (mean[2 * k :] - mean[: -2 * k]) / (2 * k)
        change = (bend[k:] - bend[:-k]) / k
        return float(np.sqrt((change**2).mean()) * self.length**2)


def from_polyline(points: FloatArray, closed: bool, step: float = 1.0) -> Axis:
    """An axis through dense points, resampled about ``step`` px apart."""
    x, y = np.ascontiguousarray(points[:, 0]), np.ascontiguousarray(points[:, 1])
    s = np.zeros(len(x))
    np.cumsum(np.hypot(x[1:] - x[:-1], y[1:] - y[:-1]), out=s[1:])
    count = max(int(round(s[-1] / step)), 8)
    at = np.linspace(0.0, s[-1], count + 1)
    xy, tangents = np.empty((count + 1, 2)), np.empty((count + 1, 2))
    for k, values in enumerate((x, y)):
        xy[:, k] = even = np.interp(at, s, values)
        tangents[1:-1, k] = even[2:] - even[:-2]
        if closed:
            tangents[[0, -1], k] = even[1] - even[-2]
        else:
            tangents[0, k] = -3 * even[0] + 4 * even[1] - even[2]
            tangents[-1, k] = 3 * even[-1] - 4 * even[-2] + even[-3]
    tangents /= np.maximum(np.hypot(tangents[:, 0], tangents[:, 1]), 1e-12)[:, None]
    return Axis(xy, at, tangents, closed)


def through(points: FloatArray, closed: bool) -> tuple[Axis, FloatArray]:
    """The first axis: a cubic spline through the clicks over their chord length; periodic when closed. Also the clicks' arc lengths."""
    knots = np.vstack([points, points[:1]]) if closed else points
    chord = np.hypot(*np.diff(knots, axis=0).T)
    # A power a little below one (chord length) keeps unevenly spaced clicks from throwing loops.
    t = np.r_[0.0, np.cumsum(chord**0.8)]
    if len(knots) == 2:
        dense = knots[0] + np.linspace(0, 1, max(int(chord[0]), 8) + 1)[:, None] * (knots[1] - knots[0])
        axis = from_polyline(dense, False)
        return axis, np.array([0.0, axis.length])
    spline = CubicSpline(t, knots, bc_type="periodic" if closed else "not-a-knot" if len(knots) <= 4 else "natural")
    fine = np.unique(np.concatenate([np.linspace(a, b, max(int(c), 4) + 1) for a, b, c in zip(t[:-1], t[1:], chord, strict=True)]))
    dense = spline(fine)
    s = np.r_[0.0, np.cumsum(np.hypot(*np.diff(dense, axis=0).T))]
    axis = from_polyline(dense, closed)
    at = np.interp(t, fine, s) * axis.length / s[-1]
    return axis, at[:-1] if closed else at
