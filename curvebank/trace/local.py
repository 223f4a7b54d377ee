"""Local fits along a trace: how far it leaves a smooth local curve, and whether another line goes straight on where it turns.

The trace's points are even in arc length, so a least-squares fit over a window is one fixed matrix, applied everywhere at once.
"""

from dataclasses import dataclass

import cv2
import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from ..sheet import Prepared
from .axis import Axis
from .profile import Shape

KNOTS = 24
"""Points of the trace a window is made of."""


@dataclass(frozen=True, slots=True, eq=False)
class Windows:
    """Windows of ``reach`` px to either side of places at arc lengths ``s`` [n]: points [n, 2 KNOTS + 1, 2] px, even in arc length."""

    s: FloatArray
    reach: float
    points: FloatArray


def windows(axis: Axis, reach: float, step: float) -> Windows | None:
    """All windows that fit on the trace, ``step`` px apart; None where it is too short."""
    reach = min(reach, (0.1 if axis.closed else 0.3) * axis.length, 0.55 * _usual_radius(axis))
    if reach < 6.0:
        return None
    low, high = (0.0, axis.length) if axis.closed else (reach, axis.length - reach)
    s = np.linspace(low, high, max(int((high - low) / step), 1) + 1)
    u = np.linspace(-reach, reach, 2 * KNOTS + 1)
    xy, _ = axis.at((s[:, None] + u[None, :]).ravel())
    return Windows(s, reach, xy.reshape(len(s), len(u), 2))


def _usual_radius(axis: Axis) -> float:
    """Radius of curvature [px] of the tight parts of the line as a whole; a single corner does not count."""
    every = max(int(round(10.0 * (len(axis.s) - 1) / max(axis.length, 1e-9))), 1)
    some = axis.tangents[::every]
    if len(some) < 8:
        return float(axis.length)
    turn = np.abs(some[1:, 0] * some[:-1, 1] - some[1:, 1] * some[:-1, 0])
    return float(10.0 / max(float(np.percentile(turn, 88)), 1e-6))


def misfit(around: Windows, open_share: float = 0.2) -> FloatArray:
    """Largest distance [n] px between each window and a cubic through its two outer parts.

    A smooth curve is a cubic there; a step over to a neighbour or a turn at a crossing is not.
    """
    u = np.linspace(-1, 1, 2 * KNOTS + 1)
    outer = np.abs(u) >= open_share
    basis = np.polynomial.polynomial.polyvander(u, 3)
    projector = np.eye(len(u)) - basis @ np.linalg.pinv(basis[outer]) @ np.eye(len(u))[outer]
    off = np.einsum("ij,njk->nik", projector, around.points)
    return np.hypot(off[..., 0], off[..., 1]).max(axis=1)


def ink_at(image: npt.NDArray[np.uint8], xy: FloatArray) -> FloatArray:
    """Ink 0..1 at points [..., 2] px."""
    flat = xy.reshape(-1, 1, 2).astype(np.float32)
    out = np.empty(len(flat), np.float64)
    for first in range(0, len(flat), 30000):  # remap takes at most 32767 rows
        part = flat[first : first + 30000]
        out[first : first + 30000] = cv2.remap(image, part[..., 0], part[..., 1], cv2.INTER_LINEAR, borderValue=0)[:, 0]
    return out.reshape(xy.shape[:-1]) / 255.0


@dataclass(frozen=True, slots=True, eq=False)
class StraightOn:
    """For each window: how much of the way straight ahead (and straight back) is inked where it leaves the trace, 0..1."""

    ahead: FloatArray
    back: FloatArray


def straight_on(prepared: Prepared, around: Windows, shape: Shape, own: float, unit: float) -> StraightOn:
    """Look along the parabola of each half window where it runs beyond the middle and parts from the trace.

    ``own`` is the share of the trace's own rows that are inked (a dashed line's other branch is dashed too).
    """
    n = KNOTS
    u = np.linspace(-1, 1, 2 * n + 1)
    past, future = u <= 0.0, u > 0.0
    basis = np.polynomial.polynomial.polyvander(u, 2)
    carry = basis[future] @ np.linalg.pinv(basis[past])
    gone = shape.half_extent + 0.5 * shape.width + 1.0
    out = []
    for way in (1, -1):
        points = around.points[:, ::way]
        guess = np.einsum("ij,njk->nik", carry, points[:, past])
        real = points[:, future]
        along = np.gradient(real, axis=1)
        along /= np.maximum(np.hypot(along[..., 0], along[..., 1]), 1e-9)[..., None]
        off = guess - real
        across = off[..., 1] * along[..., 0] - off[..., 0] * along[..., 1]
        share = np.zeros(len(points))
        enough = 12.0 * unit * n / around.reach
        some = np.flatnonzero((np.abs(across) > gone).sum(axis=1) > enough)
        if len(some):
            heading = np.gradient(guess[some], axis=1)
            heading /= np.maximum(np.hypot(heading[..., 0], heading[..., 1]), 1e-9)[..., None]
            normal = np.stack([-heading[..., 1], heading[..., 0]], axis=-1)
            best = np.zeros(len(some))
            # The continuation may drift a little, but not back onto the trace: a fan of them, the best one counts.
            lever = np.linspace(0, 1, n)[None, :]
            for drift in (-3.0, -1.5, 0.0, 1.5, 3.0):
                apart = np.abs(across[some] + drift * unit * lever) > gone
                at = guess[some] + normal * (drift * unit * lever)[..., None]
                ink = ink_at(prepared.clean, at) > 0.5 * max(shape.height, 0.05)
                count = apart.sum(axis=1)
                best = np.maximum(best, np.where(count > enough, (ink & apart).sum(axis=1) / np.maximum(count, 1), 0.0))
            share[some] = np.minimum(best / max(own, 0.3), 1.0)
        out.append(share)
    return StraightOn(out[0], out[1])


def beyond(prepared: Prepared, axis: Axis, shape: Shape, unit: float, way: int, look: float = 30.0) -> float:
    """Share of inked places along the parabola beyond an end (``way`` 1: the last one), from just behind it."""
    reach = min(60.0 * unit, 0.3 * axis.length)
    if reach < 6.0:
        return 0.0
    u = np.linspace(-1, 0, KNOTS)
    ahead = np.linspace(4.0 * unit, look * unit, 20) / reach
    s = axis.length + u * reach if way > 0 else -u * reach
    xy, _ = axis.at(s)
    basis = np.polynomial.polynomial.polyvander(np.r_[u, ahead], 2)
    guess = basis[len(u) :] @ np.linalg.pinv(basis[: len(u)]) @ xy
    heading = np.gradient(guess, axis=0)
    heading /= np.maximum(np.hypot(*heading.T), 1e-9)[:, None]
    normal = np.stack([-heading[:, 1], heading[:, 0]], axis=1)
    best = 0.0
    for drift in (-2.0, -1.0, 0.0, 1.0, 2.0):
        at = guess + normal * (drift * unit * np.linspace(0.2, 1, len(ahead)))[:, None]
        best = max(best, float((ink_at(prepared.clean, at) > 0.5 * max(shape.height, 0.05)).mean()))
    return best
