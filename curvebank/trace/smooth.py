"""Penalised splines with smoothness chosen by restricted maximum likelihood, robust weights, and a covariance that covers.

A cubic B-spline basis on even knots with a penalty on third differences (P. H. C. Eilers and B. D. Marx, Statist. Sci. 11 (1996)
89, doi:10.1214/ss/1038425655), so parabolas pass free. The smoothness is the REML estimate of the equivalent mixed model (S. N. Wood,
J. R. Statist. Soc. B 73 (2011) 3, doi:10.1111/j.1467-9868.2010.00749.x), and the covariance is the Bayesian one, whose intervals cover
across the curve (D. Nychka, J. Am. Statist. Assoc. 83 (1988) 1134).
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.linalg import eigh

from ..records import FloatArray

LOG_LAMBDAS = np.arange(-6.0, 12.01, 0.5)


def _four(t: FloatArray, pieces: int, periodic: bool, derivative: bool = False) -> tuple[npt.NDArray[np.intp], FloatArray]:
    """The four B-splines that are not zero at each ``t``: their columns [n, 4] and values [n, 4]."""
    t = np.asarray(t, dtype=np.float64)
    u = np.mod(t, 1.0) * pieces if periodic else np.clip(t, 0.0, 1.0) * pieces
    cell = np.minimum(u.astype(np.intp), pieces - 1)
    f = u - cell
    g = 1 - f
    parts = np.empty((len(t), 4))
    if derivative:
        parts[:, 0], parts[:, 1] = -0.5 * g * g, (1.5 * f - 2) * f
        parts[:, 2], parts[:, 3] = (1 - 1.5 * f) * f + 0.5, 0.5 * f * f
        parts *= pieces
    else:
        ff, gg = f * f, g * g
        parts[:, 0], parts[:, 1] = gg * g / 6, (0.5 * f - 1) * ff + 2 / 3
        parts[:, 2], parts[:, 3] = (0.5 * g - 1) * gg + 2 / 3, ff * f / 6
    columns = cell[:, None] + np.arange(4)
    return (columns % pieces if periodic else columns), parts


def basis(t: FloatArray, pieces: int, periodic: bool) -> FloatArray:
    """Cubic B-splines on ``pieces`` even intervals of 0..1 at ``t``: [n, pieces + 3], or [n, pieces] when periodic."""
    columns, parts = _four(t, pieces, periodic)
    out = np.zeros((len(columns), pieces if periodic else pieces + 3))
    rows = np.arange(len(columns))
    for k in range(4):
        out[rows, columns[:, k]] += parts[:, k]
    return out


def penalty(size: int, periodic: bool) -> FloatArray:
    """D'D for third differences (circular when periodic)."""
    d = np.diff(np.eye(size), n=3, axis=0)
    if periodic:
        eye = np.eye(size)
        d = np.roll(eye, 3, 1) - 3 * np.roll(eye, 2, 1) + 3 * np.roll(eye, 1, 1) - eye
    return d.T @ d


@dataclass(frozen=True, slots=True, eq=False)
class Smooth:
    """A fitted spline over t in 0..1: coefficients [k, d], covariance [k, k] of each column, residual scale, robust weights [n]."""

    coefficients: FloatArray
    covariance: FloatArray
    pieces: int
    periodic: bool
    scale: float
    weights: FloatArray
    robust: FloatArray
    freedom: float

    def value(self, t: FloatArray) -> FloatArray:
        """The spline at ``t``: [n, d]."""
        return self._sum(*_four(t, self.pieces, self.periodic))

    def slope(self, t: FloatArray) -> FloatArray:
        """Derivative over ``t``: [n, d]."""
        return self._sum(*_four(t, self.pieces, self.periodic, derivative=True))

    def _sum(self, columns: npt.NDArray[np.intp], parts: FloatArray) -> FloatArray:
        out = parts[:, :1] * self.coefficients[columns[:, 0]]
        for k in (1, 2, 3):
            out += parts[:, k : k + 1] * self.coefficients[columns[:, k]]
        return out

    def sigma(self, t: FloatArray) -> FloatArray:
        """Standard uncertainty at ``t``: [n]."""
        b = basis(t, self.pieces, self.periodic)
        return np.sqrt(np.maximum(((b @ self.covariance) * b).sum(axis=1), 0.0))


def fit(
    t: FloatArray,
    values: FloatArray,
    weights: FloatArray | None = None,
    *,
    pieces: int,
    periodic: bool = False,
    rounds: int = 5,
    cut: float = 4.7,
    correlation: float = 1.0,
    floor: float = 0.0,
    start: FloatArray | None = None,
) -> Smooth:
    """Fit ``values`` [n] or [n, d] at ``t`` [n] in 0..1.

    ``weights`` are 1 / variance up to a factor. ``cut`` is Tukey's constant (0 turns robustness off), ``correlation`` the number of
    readings that count as one, ``floor`` the least residual scale believed, ``start`` robust weights of an earlier fit to begin from.
    """
    y = np.asarray(values, dtype=np.float64)
    y = y[:, None] if y.ndim == 1 else y
    given = np.ones(len(t)) if weights is None else np.asarray(weights, dtype=np.float64)
    given = given / max(float(np.median(given[given > 0])) if (given > 0).any() else 1.0, 1e-300)
    b = basis(t, pieces, periodic)
    p = penalty(b.shape[1], periodic)
    robust = np.ones(len(t)) if start is None else start
    result: tuple[FloatArray, FloatArray, float, float] | None = None
    for turn in range(max(rounds, 1)):
        result = _solve(b, p, y, given * robust, periodic, correlation, (given * robust > 1e-6).sum())
        if not cut or turn == rounds - 1:
            break
        miss = np.sqrt(((y - b @ result[0]) ** 2).sum(axis=1) * given)
        live = miss[given > 0]
        scale = max(1.4826 * float(np.median(live)) / (1.0 if y.shape[1] == 1 else 1.2), floor, 1e-9)
        new = np.maximum(1 - (miss / (cut * scale)) ** 2, 0.0) ** 2
        if np.abs(new - robust).max() < 0.02:
            break
        robust = new
    assert result is not None
    coefficients, covariance, variance, freedom = result
    return Smooth(coefficients, covariance, pieces, periodic, float(np.sqrt(variance)), given * robust, robust, freedom)


def _solve(
    b: FloatArray, p: FloatArray, y: FloatArray, w: FloatArray, periodic: bool, correlation: float, live: npt.NDArray[np.intp] | int
) -> tuple[FloatArray, FloatArray, float, float]:
    columns = y.shape[1]
    null = 1 if periodic else 3
    # Splines on even knots sum to one, so a constant can be put back exactly: it keeps page coordinates from swamping the residuals.
    middle = (w[:, None] * y).sum(axis=0) / max(float(w.sum()), 1e-300)
    y = y - middle
    gram = (b * w[:, None]).T @ b
    # A whisper of the penalty and of the identity keeps the decomposition sound where stretches hold no data.
    ridge = 1e-9 * max(float(np.trace(gram)) / len(gram), 1e-12)
    lhs = gram + ridge * (np.eye(len(gram)) + 1e3 * p)
    right = (b * w[:, None]).T @ y
    d, u = eigh(p, lhs)  # u' lhs u = 1, u' p u = d
    d = np.maximum(d, 0.0)
    rank = len(d) - null
    z = u.T @ right
    total = float((w[:, None] * y**2).sum())
    n = max(float(live) / correlation, null + 1.0)
    top = float(np.median(d[null:])) if rank > 0 else 1.0
    lambdas = 10.0**LOG_LAMBDAS / max(top, 1e-300)
    shrink = 1.0 / (1.0 + lambdas[:, None] * d[None, :])
    explained = (shrink[:, :, None] * z[None] ** 2).sum(axis=(1, 2))
    rss = np.maximum(total - explained, 1e-12 * max(total, 1e-12)) / correlation
    freedom_n = max(columns * (n - null), 1.0)
    score = freedom_n * np.log(rss / freedom_n) + columns * (np.log1p(lambdas[:, None] * d[None, :]).sum(axis=1) - rank * np.log(lambdas))
    best = int(np.argmin(score))
    coefficients = u @ (shrink[best][:, None] * z) + middle
    variance = float(rss[best] / freedom_n)
    covariance = (u * shrink[best]) @ u.T * variance * correlation
    return coefficients, covariance, variance, float(shrink[best].sum())
