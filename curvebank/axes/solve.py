"""Least squares for the panel plane: all marks of all axes at once, in pixels.

Gauss-Newton with step control on ``sum |pixel(u, v) - click|^2 / sigma^2`` over the plane, the scales of further axes and
the open coordinates, plus weak knowledge as extra rows: ties (a line of marks stands on a typed tick of the other axis) and
a heavy-tailed prior that printed axes are square to each other. The covariance is that of the whole system, so parts
that axes share stay shared (JCGM 100:2008, 5.2; JCGM 102).
"""

from dataclasses import dataclass

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray
from . import plane
from .layout import Layout

CLICK_SIGMA_PX = 0.87
"""Prior standard deviation of a click in x and in y: even within +-1.5 px gives 1.5 / sqrt(3)."""
CLICK_PRIOR_DOF = 6.0
"""How many degrees of freedom that prior is worth when the spread of the clicks themselves is looked at."""
SQUARE_SCALE_RAD = 1.2e-3
"""Scale of the (Cauchy) prior on the departure from square: scanners keep 0.1 degree or better; real shear overrules it."""
TIE_SIGMA_PX = 0.3
HUBER_SIGMAS = 3.5


@dataclass(frozen=True, slots=True)
class Tie:
    """Two coordinates that are one printed line: each is ("open", number) or (axis id, z)."""

    direction: int
    first: tuple[str, float]
    second: tuple[str, float]
    sigma_px: float = TIE_SIGMA_PX


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """``x`` = plane parameters, then scale pairs, then open coordinates; ``covariance`` likewise (unit click variance already applied)."""

    x: FloatArray
    covariance: FloatArray
    information: FloatArray
    chi2: float
    dof: float
    residuals_px: FloatArray
    sigma_px: float
    plane_size: int

    @property
    def theta(self) -> FloatArray:
        return self.x[: self.plane_size]


def coordinate(layout: Layout, x: FloatArray, plane_size: int, term: tuple[str, float]) -> tuple[float, dict[int, float]]:
    """Value of a coordinate term and its derivatives by parameter index."""
    name, z = term
    scales = sum(2 for s in layout.slots.values() if s.own is not None)
    if name == "open":
        k = plane_size + scales + int(z)
        return float(x[k]), {k: 1.0}
    own = layout.slots[name].own
    if own is None:
        return float(z), {}
    k = plane_size + own
    return float(x[k] + x[k + 1] * z), {k: 1.0, k + 1: float(z)}


def solve(
    layout: Layout,
    *,
    projective: bool = False,
    ties: tuple[Tie, ...] = (),
    start: FloatArray | None = None,
    square: float | None = SQUARE_SCALE_RAD,
    aspect: float = 1.0,
    tilt_sigma: float = 0.3,
    click_sigma_px: float = CLICK_SIGMA_PX,
) -> Solution:
    """Fit the plane to the marks.

    Parameters
    ----------
    projective : bool
        Eight parameters in place of six.
    square : float or None
        Scale [rad] of the Cauchy prior on the angle between the axes; None leaves it out.
    aspect : float
        Height of a pixel over its width, where known.
    """
    p = 8 if projective else 6
    x = layout.start.copy() if start is None else start.copy()
    if projective and len(x) == len(layout.start):
        x = np.concatenate([x[:6], [0.0, 0.0], x[6:]])
    terms = [[_term(layout, i, d) for d in (0, 1)] for i in range(len(layout.at))]
    at = (layout.at - layout.shift) / layout.size

    def system(x: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray, float]:
        uv, by_x = np.empty((len(at), 2)), np.zeros((len(at), 2, len(x)))
        for i, pair in enumerate(terms):
            for d in (0, 1):
                uv[i, d], slopes = coordinate(layout, x, p, pair[d])
                for k, s in slopes.items():
                    by_x[i, d, k] = s
        by_theta, by_uv = plane.pixel_derivatives(x[:p], uv)
        jac = np.einsum("nij,njk->nik", by_uv, by_x)
        jac[:, :, :p] += by_theta
        miss = (plane.pixels(x[:p], uv) - at) * layout.size / click_sigma_px
        jac = jac * layout.size / click_sigma_px
        size = np.hypot(miss[:, 0], miss[:, 1])
        weight = np.maximum(size / HUBER_SIGMAS, 1.0) ** -0.5
        excess = float(np.sum(np.where(size > HUBER_SIGMAS, HUBER_SIGMAS * (size - HUBER_SIGMAS), 0.0)))
        rows = [(miss * weight[:, None]).ravel()]
        jacs = [(jac * weight[:, None, None]).reshape(-1, len(x))]
        for tie in ties:
            a, da = coordinate(layout, x, p, tie.first)
            b, db = coordinate(layout, x, p, tie.second)
            scale = np.hypot(*x[2 + 2 * tie.direction : 4 + 2 * tie.direction]) * layout.size / tie.sigma_px
            row = np.zeros(len(x))
            for slopes, sign in ((da, 1.0), (db, -1.0)):
                for k, s in slopes.items():
                    row[k] += sign * s * scale
            rows.append(np.array([(a - b) * scale]))
            jacs.append(row[None])
        if square is not None:
            value, row = _square(x, square, aspect)
            rows.append(value)
            jacs.append(row)
        if projective:
            row = np.zeros((2, len(x)))
            row[0, 6] = row[1, 7] = 1 / tilt_sigma
            rows.append(x[6:8] / tilt_sigma)
            jacs.append(row)
        r = np.concatenate(rows)
        # Huber's loss is k (2 size - k); the weighted square is k size, the excess makes up the rest.
        return r, np.concatenate(jacs), miss * click_sigma_px, float(r @ r) + excess

    r, jac, miss, cost = system(x)
    damping = 1e-6
    for _ in range(60):
        norm = np.linalg.norm(jac, axis=0)
        norm[norm == 0] = 1.0
        augmented = np.concatenate([jac / norm, np.sqrt(damping) * np.eye(len(x))])
        step = -np.linalg.lstsq(augmented, np.concatenate([r, np.zeros(len(x))]), rcond=None)[0] / norm
        r2, jac2, miss2, cost2 = system(x + step)
        if cost2 <= cost * (1 + 1e-14):
            done = cost - cost2 <= 1e-12 * (1 + cost) and np.abs(step).max() < 1e-10
            x, r, jac, miss, cost, damping = x + step, r2, jac2, miss2, cost2, max(damping / 10, 1e-12)
            if done:
                break
        else:
            damping = max(damping * 10, 1e-9)
            if damping > 1e6:
                break
    if not np.all(np.isfinite(x)):
        raise CalibrationError("The marks do not place the axes. Spread them over the panel.", code="degenerate")
    information = jac.T @ jac
    dof = float(2 * len(at) + len(ties) + (1 if square is not None else 0) + (2 if projective else 0) - len(x))
    spread2 = (CLICK_PRIOR_DOF + cost) / (CLICK_PRIOR_DOF + max(dof, 0.0))
    norm = np.sqrt(np.maximum(np.diag(information), 1e-300))
    covariance = np.linalg.pinv(information / np.outer(norm, norm), rcond=1e-13, hermitian=True) / np.outer(norm, norm) * spread2
    return Solution(x, covariance, information, cost, dof, miss, float(click_sigma_px * np.sqrt(spread2)), p)


def _term(layout: Layout, i: int, d: int) -> tuple[str, float]:
    name = layout.axis[d][i]
    return (name, float(layout.z[i, d])) if name is not None else ("open", float(layout.open[i, d]))


def _square(x: FloatArray, scale: float, aspect: float) -> tuple[FloatArray, FloatArray]:
    """Cauchy prior on the cosine c between e1 and e2 as one row: sqrt(log(1 + (c / scale)^2)), so that its square is the loss."""
    stretch = np.array([1.0, aspect])
    a, b = x[2:4] * stretch, x[4:6] * stretch
    la, lb = np.hypot(*a), np.hypot(*b)
    c = float(a @ b / (la * lb))
    q = c / scale
    row = np.zeros((1, len(x)))
    row[0, 2:4] = (b / (la * lb) - c * a / la**2) * stretch
    row[0, 4:6] = (a / (la * lb) - c * b / lb**2) * stretch
    if abs(q) < 1e-4:
        return np.array([q]), row / scale
    value = np.sign(q) * np.sqrt(np.log1p(q * q))
    return np.array([value]), row / scale * (q / ((1 + q * q) * value))
