"""Penalised splines with smoothness chosen by restricted maximum likelihood, robust weights, and a covariance that covers.

A cubic B-spline basis on even knots with a penalty on third differences (P. H. C. Eilers and B. D. Marx, Statist. Sci. 11 (1996)
89, doi:10.1214/ss/1038425655), so parabolas pass free. The smoothness is the REML estimate of the equivalent mixed model (S. N. Wood,
J. R. Statist. Soc. B 73 (2011) 3, doi:10.1111/j.1467-9868.2010.00749.x), and the covariance is the Bayesian one, whose intervals cover
across the curve (D. Nychka, J. Am. Statist. Assoc. 83 (1988) 1134). Only four splines are not zero at any place, so the normal
equations are banded and are solved by banded Cholesky factors; those of a periodic spline are small and are solved whole.
"""

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.linalg import lapack

from ..records import FloatArray

LEAST, MOST = -6.0, 12.0
COARSE = (-6.0, -3.0, 0.0, 3.0, 6.0, 9.0, 12.0)
"""Decades of smoothness looked at first, against the scale at which penalty and data weigh the same."""
BAND = 4


def _four(t: FloatArray, pieces: int, periodic: bool, derivative: bool = False) -> tuple[npt.NDArray[np.intp], FloatArray]:
    """The four B-splines that are not zero at each ``t``: the column of the first [n] and their values [4, n]."""
    t = np.asarray(t, dtype=np.float64)
    u = np.mod(t, 1.0) * pieces if periodic else np.clip(t, 0.0, 1.0) * pieces
    cell = np.minimum(u.astype(np.intp), pieces - 1)
    f = u - cell
    g = 1 - f
    parts = np.empty((4, len(t)))
    if derivative:
        parts[0], parts[1] = -0.5 * g * g, (1.5 * f - 2) * f
        parts[2], parts[3] = (1 - 1.5 * f) * f + 0.5, 0.5 * f * f
        parts *= pieces
    else:
        ff, gg = f * f, g * g
        parts[0], parts[1] = gg * g / 6, (0.5 * f - 1) * ff + 2 / 3
        parts[2], parts[3] = (0.5 * g - 1) * gg + 2 / 3, ff * f / 6
    return cell, parts


def _sum(coefficients: FloatArray, cell: npt.NDArray[np.intp], parts: FloatArray, periodic: bool) -> FloatArray:
    """Splines [n, d] from their coefficients [k, d]."""
    wide = np.concatenate([coefficients, coefficients[:3]]) if periodic else coefficients
    out = parts[0][:, None] * wide[cell]
    for k in (1, 2, 3):
        out += parts[k][:, None] * wide[cell + k]
    return out


def middle(values: npt.NDArray[Any]) -> float:
    """The upper median: the middle value of what is not empty, without the many checks of a general one."""
    k = len(values) // 2
    return float(np.partition(values, k)[k])


def basis(t: FloatArray, pieces: int, periodic: bool) -> FloatArray:
    """Cubic B-splines on ``pieces`` even intervals of 0..1 at ``t``: [n, pieces + 3], or [n, pieces] when periodic."""
    cell, parts = _four(t, pieces, periodic)
    size = pieces if periodic else pieces + 3
    out = np.zeros((len(cell), size))
    rows = np.arange(len(cell))
    for k in range(4):
        out[rows, (cell + k) % size] += parts[k]
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
    system: "System"
    pieces: int
    periodic: bool
    scale: float
    spread: float
    weights: FloatArray
    robust: FloatArray
    decade: float

    def value(self, t: FloatArray) -> FloatArray:
        """The spline at ``t``: [n, d]."""
        return _sum(self.coefficients, *_four(t, self.pieces, self.periodic), self.periodic)

    def slope(self, t: FloatArray) -> FloatArray:
        """Derivative over ``t``: [n, d]."""
        return _sum(self.coefficients, *_four(t, self.pieces, self.periodic, derivative=True), self.periodic)

    @property
    def covariance(self) -> FloatArray:
        """Covariance of the coefficients [k, k], the same for each column of values."""
        return self.system.inverse() * self.spread

    @property
    def freedom(self) -> float:
        """Effective degrees of freedom: the trace of the matrix that gives fitted values from values."""
        return self.system.freedom()

    def sigma(self, t: FloatArray) -> FloatArray:
        """Standard uncertainty at ``t``: [n]."""
        covariance = self.covariance
        cell, parts = _four(t, self.pieces, self.periodic)
        size = len(covariance)
        out = np.zeros(len(cell))
        for i in range(4):
            for j in range(i, 4):
                out += (1 if i == j else 2) * parts[i] * parts[j] * covariance[(cell + i) % size, (cell + j) % size]
        return np.sqrt(np.maximum(out, 0.0))


PAIRS = [(i, j) for i in range(BAND) for j in range(i, BAND)]


class Design:
    """The splines at the readings: everything about a fit that its weights do not change."""

    def __init__(self, t: FloatArray, pieces: int, periodic: bool) -> None:
        self.cell, self.parts = _four(t, pieces, periodic)
        self.size, self.periodic = (pieces if periodic else pieces + 3), periodic
        self.products = np.stack([self.parts[i] * self.parts[j] for i, j in PAIRS])
        wide = self.size + 3
        # Each product of two splines is summed into its own place of the band, by one count over all of them.
        self.pair_bins = np.stack([self.cell + i + (j - i) * wide for i, j in PAIRS]).ravel()
        self.bins = (self.cell + np.arange(BAND)[:, None]).ravel()
        # What the penalty lets pass free (parabolas, on a ring constants): at the readings, and as coefficients.
        self.free = np.ones((len(t), 1 if periodic else 3))
        self.free_coefficients = np.ones((self.size, self.free.shape[1]))
        if not periodic:
            x = 2 * np.clip(t, 0.0, 1.0) - 1
            self.free[:, 1], self.free[:, 2] = x, x * x
            step = 2 / pieces
            at = step * np.arange(-1, pieces + 2) - 1
            self.free_coefficients[:, 1], self.free_coefficients[:, 2] = at, at * at - step**2 / 3

    def value(self, coefficients: FloatArray) -> FloatArray:
        """The spline at the readings [n, d]."""
        return _sum(coefficients, self.cell, self.parts, self.periodic)

    def system(self, y: FloatArray, w: FloatArray) -> "System":
        """Normal equations of readings [n, d] with weights [n]."""
        size, wide = self.size, self.size + 3
        counted = np.bincount(self.pair_bins, (self.products * w).ravel(), BAND * wide)
        band = counted.reshape(BAND, wide).astype(np.float64, copy=False)
        weighted = self.parts * w
        right: FloatArray = np.stack([np.bincount(self.bins, (weighted * column).ravel(), wide) for column in y.T], axis=1)
        if self.periodic:
            fine = penalty(size, True)
            gram = np.zeros((size, size))
            at = np.arange(wide)
            for k in range(BAND):
                np.add.at(gram, ((at + k) % size, at % size), band[k])
                if k:
                    np.add.at(gram, (at % size, (at + k) % size), band[k])
            right[:3] += right[size:]
            trace = float(np.trace(gram))
        else:
            fine, gram = _penalty_band(size), band[:, :size]
            trace = float(gram[0].sum())
        # A whisper of the penalty and of the identity keeps the factors sound where stretches hold no data.
        ridge = 1e-9 * max(trace / size, 1e-12)
        gram = gram + 1e3 * ridge * fine
        if self.periodic:
            gram[np.diag_indices(size)] += ridge
        else:
            gram[0] += ridge
        return System(gram, right[:size], fine, self.periodic)


@dataclass(slots=True, eq=False)
class System:
    """Normal equations of weighted readings, (gram + lambda penalty) c = right, and the factor of the last solution."""

    gram: FloatArray
    right: FloatArray
    fine: FloatArray
    periodic: bool
    lam: float = 0.0
    factor: FloatArray = field(default_factory=lambda: np.zeros((0, 0)))

    @property
    def balance(self) -> float:
        """The smoothness at which the penalty weighs about as much as the data."""
        if self.periodic:
            return float(np.trace(self.gram)) / float(np.trace(self.fine))
        return float(self.gram[0].sum()) / float(self.fine[0].sum())

    def solve(self, lam: float) -> tuple[FloatArray, float]:
        """Coefficients [k, d] and the logarithm of the determinant of gram + lambda penalty."""
        self.lam = lam
        lhs = self.gram + lam * self.fine
        if self.periodic:
            factor, _ = lapack.dpotrf(lhs, lower=1)
            coefficients, _ = lapack.dpotrs(factor, self.right, lower=1)
            diagonal = np.diag(factor)
        else:
            factor, _ = lapack.dpbtrf(lhs, lower=1)
            coefficients, _ = lapack.dpbtrs(factor, self.right, lower=1)
            diagonal = factor[0]
        self.factor = factor
        return coefficients, 2.0 * float(np.log(diagonal).sum())

    def inverse(self) -> FloatArray:
        """(gram + lambda penalty)^-1 at the last lambda solved for."""
        eye = np.eye(len(self.right))
        solve = lapack.dpotrs if self.periodic else lapack.dpbtrs
        out: FloatArray = solve(self.factor, eye, lower=1)[0]
        return out

    def freedom(self) -> float:
        """Trace of (gram + lambda penalty)^-1 gram."""
        inverse = self.inverse()
        if self.periodic:
            return float((inverse * self.gram).sum())
        total = float((np.diag(inverse) * self.gram[0]).sum())
        for k in range(1, BAND):
            total += 2.0 * float((np.diag(inverse, k) * self.gram[k, : len(inverse) - k]).sum())
        return total


def _penalty_band(size: int) -> FloatArray:
    """The lower band [4, size] of the penalty of an open spline."""
    row = np.array([-1.0, 3.0, -3.0, 1.0])
    out = np.zeros((BAND, size))
    for i in range(4):
        for j in range(i, 4):
            out[j - i, i : i + size - 3] += row[i] * row[j]
    return out


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
    start: Smooth | None = None,
) -> Smooth:
    """Fit ``values`` [n] or [n, d] at ``t`` [n] in 0..1.

    ``weights`` are 1 / variance up to a factor. ``cut`` is Tukey's constant (0 turns robustness off), ``correlation`` the number of
    readings that count as one, ``floor`` the least residual scale believed, ``start`` an earlier fit of the same
    readings to begin from.
    """
    y = np.asarray(values, dtype=np.float64)
    y = y[:, None] if y.ndim == 1 else y
    given = np.ones(len(t)) if weights is None else np.asarray(weights, dtype=np.float64)
    given = given / max(middle(given[given > 0]) if (given > 0).any() else 1.0, 1e-300)
    design = Design(t, pieces, periodic)
    robust = np.ones(len(t)) if start is None else start.robust
    decade: float = math.nan if start is None else start.decade
    for turn in range(max(rounds, 1)):
        coefficients, system, variance, decade = _solve(design, y, given * robust, correlation, decade)
        if not cut or turn == rounds - 1:
            break
        miss = np.sqrt(((y - design.value(coefficients)) ** 2).sum(axis=1) * given)
        live = miss[given > 0]
        scale = max(1.4826 * middle(live) / (1.0 if y.shape[1] == 1 else 1.2), floor, 1e-9)
        new = np.maximum(1 - (miss / (cut * scale)) ** 2, 0.0) ** 2
        if np.abs(new - robust).max() < 0.1:
            break
        robust = new
    return Smooth(coefficients, system, pieces, periodic, float(np.sqrt(variance)), variance * correlation, given * robust, robust, decade)


def _solve(design: Design, y: FloatArray, w: FloatArray, correlation: float, near: float) -> tuple[FloatArray, System, float, float]:
    """One weighted fit with its smoothness: coefficients, factored system, residual variance, and the decade of smoothness chosen.

    ``near`` is the decade that a fit of almost the same weights chose, or nan.
    """
    columns = y.shape[1]
    null = 1 if design.periodic else 3
    # What passes free is taken out first and put back exactly: neither page coordinates nor steep lines swamp the residuals.
    weighted = design.free * w[:, None]
    square = weighted.T @ design.free
    square[np.diag_indices(len(square))] += 1e-12 * max(float(square[0, 0]), 1e-300)
    plain = np.linalg.solve(square, weighted.T @ y)
    y = y - design.free @ plain
    system = design.system(y, w)
    rank = design.size - null
    total = float((w[:, None] * y**2).sum())
    n = max(float((w > 1e-6).sum()) / correlation, null + 1.0)
    freedom_n = max(columns * (n - null), 1.0)
    scale = system.balance
    kept: dict[float, tuple[float, FloatArray, float]] = {}

    def score(decade: float) -> float:
        if decade not in kept:
            lam = scale * 10.0**decade
            c, logdet = system.solve(lam)
            # What is not explained and what the penalty costs, together.
            rss = max(total - float(np.vdot(c, system.right)), 1e-12 * max(total, 1e-12)) / correlation
            kept[decade] = (freedom_n * math.log(rss / freedom_n) + columns * (logdet - rank * math.log(lam)), c, rss)
        return kept[decade][0]

    best = min(COARSE, key=score) if math.isnan(near) else near
    step = 2.0 if math.isnan(near) else 0.5
    while step >= 0.5:
        lower = [d for d in (best - step, best + step) if LEAST <= d <= MOST and score(d) < score(best)]
        if lower:
            best = min(lower, key=score)
        if not lower or math.isnan(near):
            step *= 0.5
    a, b, c = (score(min(max(best + d, LEAST), MOST)) for d in (-0.5, 0.0, 0.5))
    decade = best + (0.25 * (a - c) / (a - 2 * b + c) if a - 2 * b + c > 1e-9 and LEAST < best < MOST else 0.0)
    score(decade)
    _, coefficients, rss = kept[decade]
    if system.lam != scale * 10.0**decade:
        system.solve(scale * 10.0**decade)
    return coefficients + design.free_coefficients @ plain, system, rss / freedom_n, best
