"""From pixels to the uncertainty of a value at equal flow, with shared parts kept shared (JCGM 100:2008, eq. 13 and 5.2.2).

A point of a trace moves with the calibration in flow and in value; on a curve with slope s what counts at equal flow is
``d value - s d flow``. The calibration part is common to all points of a panel, so it is carried as a pair (J, V):
J [n, p] derivative of the n values by p shared parameters, V [p, p] their covariance; the full covariance J V J' is never formed.
"""

from collections.abc import Sequence
from typing import Any

import numpy as np
from scipy.linalg import block_diag

from ..errors import FitError
from ..records import FloatArray

Shared = tuple[FloatArray, FloatArray]

DRAWING_SHARE_OF_LINE = 0.5
"""The draughtsman's and printer's part: half a line width unless stated (common practice, no source)."""


def slopes(points: Any, reach: int = 5) -> FloatArray:
    """d value / d flow [n] along a trace, from chords over ``reach`` neighbours each side; infinite where flow stands still."""
    p = np.asarray(points, dtype=np.float64).reshape(-1, 2)
    i = np.arange(len(p))
    chord = p[np.minimum(i + reach, len(p) - 1)] - p[np.maximum(i - reach, 0)]
    with np.errstate(divide="ignore", invalid="ignore"):
        return chord[:, 1] / chord[:, 0]


def reading_sigma(pixels: Any, sigma_px: Any, pixel_size: Any, reach: int = 5) -> FloatArray:
    """Standard uncertainty of the value at equal flow [n] from that of the line across itself.

    Parameters
    ----------
    pixels : [n, 2]
        The trace.
    sigma_px : [n] or float
        Across the line [px].
    pixel_size : [n, 2, 2]
        d (flow, value) / d (x, y), from `PanelMap.pixel_size`.

    Notes
    -----
    A shift e of the line along its normal moves the value at equal flow by e det(A) / (A t)_flow, t the unit tangent.
    """
    p = np.asarray(pixels, dtype=np.float64).reshape(-1, 2)
    a = np.asarray(pixel_size, dtype=np.float64)
    i = np.arange(len(p))
    t = p[np.minimum(i + reach, len(p) - 1)] - p[np.maximum(i - reach, 0)]
    length = np.hypot(t[:, 0], t[:, 1])
    t = t / np.where(length > 0, length, 1.0)[:, None]
    flow_rate = np.abs(np.einsum("nk,nk->n", a[:, 0], t))
    det = np.abs(a[:, 0, 0] * a[:, 1, 1] - a[:, 0, 1] * a[:, 1, 0])
    # A line that stands upright on the panel has no value at equal flow: cap at fifty pixels of value per pixel of normal.
    floor = np.hypot(a[:, 0, 0], a[:, 0, 1]) / 50.0
    return np.asarray(sigma_px, dtype=np.float64) * det / np.maximum(flow_rate, floor)


def calibration_part(basis: Any, parameter_covariance: Any, slope: Any) -> Shared:
    """The shared part of the values at equal flow: J = J_value - slope J_flow [n, p], and V.

    ``basis`` [n, 2, p] is `PanelMap.shared_basis` for (flow axis, value axis).
    """
    j = np.asarray(basis, dtype=np.float64)
    s = np.asarray(slope, dtype=np.float64)
    limit = 50.0 * np.abs(j[:, 1]).max() / max(float(np.abs(j[:, 0]).max()), 1e-300)
    return j[:, 1] - np.clip(s, -limit, limit)[:, None] * j[:, 0], np.asarray(parameter_covariance, dtype=np.float64)


def common_shift(per_px: Any, sigma_px: float) -> Shared:
    """A part that shifts the whole line across itself by one unknown amount (drawing, overprint register) [sigma_px]."""
    return np.asarray(per_px, dtype=np.float64).reshape(-1, 1), np.array([[float(sigma_px) ** 2]])


def stack(*parts: Shared) -> Shared:
    """Several independent shared parts as one."""
    used = [p for p in parts if p is not None]
    return np.concatenate([j for j, _ in used], axis=1), block_diag(*[v for _, v in used])


def shared_sigma(shared: Shared) -> FloatArray:
    """Standard uncertainty of each point from a shared part [n]."""
    j, v = shared
    return np.sqrt(np.maximum(np.einsum("ni,ij,nj->n", j, v, j), 0.0))


def as_shared(shared: Any, n: int) -> Shared | None:
    """Accept None, a pair (J, V), or a full covariance [n, n] (turned into a pair by its eigenvectors)."""
    if shared is None:
        return None
    if isinstance(shared, tuple | list) and len(shared) == 2:
        j, v = (np.asarray(x, dtype=np.float64) for x in shared)
    else:
        full = np.asarray(shared, dtype=np.float64)
        if full.shape != (n, n):
            raise FitError(f"The shared covariance has shape {full.shape}; {n} points need a pair (J, V) or ({n}, {n}).", code="shape")
        values, vectors = np.linalg.eigh((full + full.T) / 2)
        keep = values > 1e-12 * max(float(values[-1]), 1e-300)
        j, v = vectors[:, keep], np.diag(values[keep])
    if j.ndim != 2 or j.shape[0] != n or v.shape != (j.shape[1], j.shape[1]):
        raise FitError(f"The shared part has shapes {j.shape} and {v.shape}; {n} points need J [{n}, p] and V [p, p].", code="shape")
    if not (np.all(np.isfinite(j)) and np.all(np.isfinite(v))):
        raise FitError("The shared covariance holds a number that is not finite.", code="not-a-number")
    return j, v


def spread(reading: Sequence[float] | FloatArray, calibration: FloatArray, drawing: FloatArray, fit: FloatArray) -> dict[str, float]:
    """The typical size of each part over a curve, root mean square, in the curve's unit."""
    parts = {"calibration": calibration, "reading": reading, "drawing": drawing, "fit": fit}
    return {k: float(np.sqrt(np.mean(np.square(np.asarray(v, dtype=np.float64))))) for k, v in parts.items()}
