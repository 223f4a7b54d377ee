"""Least squares for the panel plane: all marks of all axes at once, in pixels.

Levenberg-Marquardt on ``sum |pixel(u, v) - click|^2 / sigma^2`` over the plane, the scales of further axes and the open
coordinates, plus weak knowledge as extra rows: ties (a line of marks stands on a typed tick of the other axis) and a
heavy-tailed prior that printed axes are square to each other. The covariance is that of the whole system, so parts
that axes share stay shared (JCGM 102:2011).
"""

from dataclasses import dataclass

import numpy as np

from ..errors import CalibrationError
from ..records import FloatArray
from . import plane
from .layout import Layout, Term

CLICK_SIGMA_PX = 0.87
"""Prior standard deviation of a click in x and in y: even within +-1.5 px gives 1.5 / sqrt(3)."""
CLICK_PRIOR_DOF = 6.0
"""How many degrees of freedom that prior is worth when the spread of the clicks themselves is looked at."""
SQUARE_SCALE_RAD = 1.2e-3
"""Scale of the (Cauchy) prior on the departure from square: scanners keep 0.1 degree or better; real shear overrules it."""
TILT_SIGMA = 0.15
"""Expected size of the perspective terms of a hand-held photo: relative change of scale over half the marked range."""
TIE_SIGMA_PX = 0.3
HUBER_SIGMAS = 3.5
ALIGN_SIGMA_PX = 1.0
"""An axis line is drawn straight, but paper curls: its marks share its coordinate this well."""


@dataclass(frozen=True, slots=True)
class Tie:
    """Two coordinates of one direction that are one printed line."""

    direction: int
    first: Term
    second: Term
    sigma_px: float = TIE_SIGMA_PX


@dataclass(frozen=True, slots=True, eq=False)
class Solution:
    """``x`` = plane parameters, scale pairs, open coordinates; ``information`` [p, p] for a click variance of ``CLICK_SIGMA_PX`` squared.

    ``chi2`` is the minimum; ``misses_px`` [n, 2] the misses of the clicks; ``sigma_px`` the click scatter, prior and residuals together.
    """

    x: FloatArray
    information: FloatArray
    chi2: float
    dof: float
    misses_px: FloatArray
    sigma_px: float
    plane_size: int

    @property
    def theta(self) -> FloatArray:
        return self.x[: self.plane_size]

    @property
    def known_covariance(self) -> FloatArray:
        """Covariance of ``x`` with clicks of ``CLICK_SIGMA_PX``."""
        norm = np.sqrt(np.maximum(np.diag(self.information), 1e-300))
        return np.linalg.pinv(self.information / np.outer(norm, norm), rcond=1e-13, hermitian=True) / np.outer(norm, norm)

    @property
    def covariance(self) -> FloatArray:
        """Covariance of ``x`` with the click scatter seen."""
        return self.known_covariance * (self.sigma_px / CLICK_SIGMA_PX) ** 2


def solve(
    layout: Layout,
    *,
    projective: bool = False,
    ties: tuple[Tie, ...] = (),
    start: FloatArray | None = None,
    square: bool = True,
    robust: bool = True,
    aspect: float = 1.0,
) -> Solution:
    """Fit the plane to the marks.

    Parameters
    ----------
    projective : bool
        Eight parameters in place of six; the square prior is left out then.
    start : array, optional
        ``x`` of an earlier solution, affine or of the same kind.
    robust : bool
        Huber's loss on the clicks (one bad click bends little); False for plain least squares.
    aspect : float
        Height of a pixel over its width, where known.

    Raises
    ------
    CalibrationError
        ``degenerate``: the marks do not place the axes.
    """
    p = 8 if projective else 6
    x = layout.first_guess() if start is None else start.copy()
    if projective and len(x) == 6 + layout.scales + len(layout.open_direction):
        x = np.concatenate([x[:6], [0.0, 0.0], x[6:]])
    system = _System(layout, x, p, ties, square and not projective, robust, aspect)
    r, jac, misses, cost = system(x)
    damping = 1e-7
    for _ in range(80):
        norm = np.linalg.norm(jac, axis=0)
        norm[norm == 0] = 1.0
        augmented = np.concatenate([jac / norm, np.sqrt(damping) * np.eye(len(x))])
        step = -np.linalg.lstsq(augmented, np.concatenate([r, np.zeros(len(x))]), rcond=None)[0] / norm
        r2, jac2, misses2, cost2 = system(x + step)
        if cost2 <= cost * (1 + 1e-14):
            done = cost - cost2 <= 1e-11 * (1 + cost) and np.abs(step).max() < 1e-9
            x, r, jac, misses, cost, damping = x + step, r2, jac2, misses2, cost2, max(damping / 10, 1e-13)
            if done:
                break
        else:
            damping = max(damping * 10, 1e-9)
            if damping > 1e8:
                break
    if not np.all(np.isfinite(x)):
        raise CalibrationError("The marks do not place the axes. Spread them over the panel.", code="degenerate")
    dof = float(len(r) - len(x))
    spread2 = (CLICK_PRIOR_DOF + cost) / (CLICK_PRIOR_DOF + max(dof, 0.0))
    return Solution(x, jac.T @ jac, cost, dof, misses, float(CLICK_SIGMA_PX * np.sqrt(spread2)), p)


class _System:
    """Residuals, Jacobian, misses [px] and cost at given parameters. Coordinates are linear in scales and open coordinates."""

    def __init__(self, layout: Layout, x: FloatArray, p: int, ties: tuple[Tie, ...], square: bool, robust: bool, aspect: float):
        self.p, self.square, self.robust, self.aspect = p, square, robust, aspect
        self.at = (layout.at - layout.shift) / layout.size
        self.to_sigma = layout.size / CLICK_SIGMA_PX
        n = len(self.at)
        self.fixed, self.by_x = np.zeros((n, 2)), np.zeros((n, 2, len(x)))
        for i in range(n):
            for d in (0, 1):
                self.fixed[i, d], self.by_x[i, d] = layout.term_row(layout.terms[i][d], p, len(x))
        self.tie_fixed, self.tie_rows = np.zeros(len(ties)), np.zeros((len(ties), len(x)))
        self.tie_weight = np.array([layout.size / t.sigma_px for t in ties])
        self.tie_direction = np.array([t.direction for t in ties], dtype=int)
        for k, t in enumerate(ties):
            a, row_a = layout.term_row(t.first, p, len(x))
            b, row_b = layout.term_row(t.second, p, len(x))
            self.tie_fixed[k], self.tie_rows[k] = a - b, row_a - row_b
        # Clicks of one axis line; where their terms hold no unknown there is nothing to align.
        free = [(d, i, j) for d, i, j in layout.alignments if np.any(self.by_x[i, d] != self.by_x[j, d])]
        self.tie_fixed = np.concatenate([self.tie_fixed, [self.fixed[i, d] - self.fixed[j, d] for d, i, j in free]])
        self.tie_rows = np.concatenate([self.tie_rows, np.reshape([self.by_x[i, d] - self.by_x[j, d] for d, i, j in free], (-1, len(x)))])
        self.tie_weight = np.concatenate([self.tie_weight, np.full(len(free), layout.size / ALIGN_SIGMA_PX)])
        self.tie_direction = np.concatenate([self.tie_direction, np.array([d for d, _, _ in free], dtype=int)])

    def __call__(self, x: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray, float]:
        p = self.p
        uv = self.fixed + self.by_x @ x
        by_theta, by_uv = plane.pixel_derivatives(x[:p], uv)
        jac = by_uv @ self.by_x
        jac[:, :, :p] += by_theta
        miss = (plane.pixels(x[:p], uv) - self.at) * self.to_sigma
        jac *= self.to_sigma
        excess, weight = 0.0, np.ones(len(miss))
        if self.robust:
            size = np.hypot(miss[:, 0], miss[:, 1])
            weight = np.maximum(size / HUBER_SIGMAS, 1.0) ** -0.5
            # Huber's loss is k (2 size - k); the weighted square is k size, the excess makes up the rest.
            excess = float(np.sum(np.where(size > HUBER_SIGMAS, HUBER_SIGMAS * (size - HUBER_SIGMAS), 0.0)))
        rows = [(miss * weight[:, None]).ravel()]
        jacs = [(jac * weight[:, None, None]).reshape(-1, len(x))]
        if len(self.tie_fixed):
            step = np.array([np.hypot(*x[2:4]), np.hypot(*x[4:6])])
            scale = self.tie_weight * step[self.tie_direction]
            rows.append((self.tie_fixed + self.tie_rows @ x) * scale)
            jacs.append(self.tie_rows * scale[:, None])
        if self.square:
            value, row = _square_row(x, self.aspect)
            rows.append(value)
            jacs.append(row)
        if p == 8:
            row = np.zeros((2, len(x)))
            row[0, 6] = row[1, 7] = 1 / TILT_SIGMA
            rows.append(x[6:8] / TILT_SIGMA)
            jacs.append(row)
        r = np.concatenate(rows)
        return r, np.concatenate(jacs), miss * CLICK_SIGMA_PX, float(r @ r) + excess


def _square_row(x: FloatArray, aspect: float) -> tuple[FloatArray, FloatArray]:
    """Cauchy prior on the cosine c between e1 and e2 as one row: sqrt(log(1 + (c / scale)^2)), so that its square is the loss."""
    stretch = np.array([1.0, aspect])
    a, b = x[2:4] * stretch, x[4:6] * stretch
    la, lb = np.hypot(*a), np.hypot(*b)
    c = float(a @ b / (la * lb))
    q = c / SQUARE_SCALE_RAD
    row = np.zeros((1, len(x)))
    row[0, 2:4] = (b / (la * lb) - c * a / la**2) * stretch / SQUARE_SCALE_RAD
    row[0, 4:6] = (a / (la * lb) - c * b / lb**2) * stretch / SQUARE_SCALE_RAD
    if abs(q) < 1e-4:
        return np.array([q]), row
    value = np.sign(q) * np.sqrt(np.log1p(q * q))
    return np.array([value]), row * (q / ((1 + q * q) * value))
