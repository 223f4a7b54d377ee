"""Weighted linear least squares by QR: the one numerical core of every fit. Normal equations are never formed."""

from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_triangular

from ..errors import FitError
from ..records import FloatArray
from . import basis


@dataclass(frozen=True, slots=True, eq=False)
class LeastSquares:
    """``coefficients`` [k], ``unit_covariance`` [k, k] for unit weights, ``pseudo_inverse`` [k, n]
    (coefficients = pseudo_inverse @ y), ``residuals`` [n] unweighted, ``rss`` weighted."""

    coefficients: FloatArray
    unit_covariance: FloatArray
    pseudo_inverse: FloatArray
    residuals: FloatArray
    rss: float


def least_squares(columns: FloatArray, y: FloatArray, weight: FloatArray | None = None) -> LeastSquares:
    """Minimise sum (weight (y - columns c))^2.

    Parameters
    ----------
    columns : [n, k], y : [n], weight : [n] or None
        ``weight`` is one over the standard uncertainty of each y.

    Raises
    ------
    FitError
        The columns are linearly dependent at working precision.

    Notes
    -----
    Householder QR of the weighted columns scaled to unit length (Golub and Van Loan, *Matrix Computations*, 5.3), and
    one step of iterative refinement on the residual (Björck 1967, doi:10.1007/BF01939321), which costs nothing beside the QR.
    """
    w = np.ones(len(y)) if weight is None else weight
    length = np.sqrt(np.einsum("ij,ij->j", columns * w[:, None], columns * w[:, None]))
    if np.any(length == 0) or not np.all(np.isfinite(length)):
        raise FitError("The points do not carry this many coefficients. Lower the order.", code="rank")
    a = columns * w[:, None] / length
    q, r = np.linalg.qr(a)
    diagonal = np.abs(np.diag(r))
    if len(y) < columns.shape[1] or diagonal.min() < 1e-14 * diagonal.max():
        raise FitError("The points do not carry this many coefficients. Lower the order.", code="rank")
    b = y * w
    c = solve_triangular(r, q.T @ b)
    c = c + solve_triangular(r, q.T @ (b - a @ c))
    inverse = solve_triangular(r, np.eye(len(c)))
    coefficients = c / length
    residuals = y - columns @ coefficients
    scaled_inverse = inverse / length[:, None]
    return LeastSquares(
        coefficients,
        scaled_inverse @ scaled_inverse.T,
        scaled_inverse @ (q.T * w),
        residuals,
        float(np.sum((residuals * w) ** 2)),
    )


@dataclass(frozen=True, slots=True, eq=False)
class Polynomial:
    """A plain weighted polynomial fit: `coefficients` in powers of x, their standard errors and the residual standard deviation."""

    coefficients: FloatArray
    scaled: FloatArray
    covariance: FloatArray
    mid: float
    half: float
    rss: float
    residual_sd: float

    def value(self, x: FloatArray) -> np.ndarray:
        return np.polynomial.polynomial.polyval((np.asarray(x, dtype=np.float64) - self.mid) / self.half, self.scaled)


def polynomial(x: FloatArray, y: FloatArray, order: int, *, weight: FloatArray | None = None, through_zero: bool = False) -> Polynomial:
    """Least-squares polynomial of any order in scaled x, converted to plain powers exactly.

    Notes
    -----
    ``covariance`` is that of the plain coefficients, scaled by the residual variance with n - k degrees of freedom. The
    residual sum is found on the scaled form. Held against the NIST StRD linear sets in the tests.
    """
    x, y = np.asarray(x, dtype=np.float64), np.asarray(y, dtype=np.float64)
    mid, half = basis.scaling(x)
    if half <= 0:
        raise FitError("All points have one flow. A curve needs a range of flows.", code="one-flow")
    zero_at = -mid / half if through_zero else None
    found = least_squares(basis.design((x - mid) / half, order, zero_at), y, weight)
    scaled = basis.expand(found.coefficients, zero_at)
    freedom = len(y) - len(found.coefficients)
    sd = float(np.sqrt(found.rss / freedom)) if freedom > 0 else 0.0
    turn = basis.expansion(order, zero_at)
    to_plain = np.stack([basis.plain_powers(column, mid, half) for column in np.eye(order + 1)], axis=1)
    jac = to_plain @ turn
    covariance = jac @ found.unit_covariance @ jac.T * sd**2
    return Polynomial(basis.plain_powers(scaled, mid, half, through_zero=through_zero), scaled, covariance, mid, half, found.rss, sd)
