"""Polynomial bases: scaled to t = (flow - mid) / half, optionally held to zero at zero flow, and exact plain powers."""

from fractions import Fraction

import numpy as np

from ..records import FloatArray


def scaling(flow: FloatArray) -> tuple[float, float]:
    """``mid`` and ``half`` [m3/h] that carry the flows to [-1, 1]: condition numbers of raw powers never arise."""
    lo, hi = float(np.min(flow)), float(np.max(flow))
    return (lo + hi) / 2, (hi - lo) / 2


def design(t: FloatArray, order: int, zero_at: float | None = None) -> FloatArray:
    """Columns of the basis at t. With ``zero_at`` = t of zero flow the columns are t^k - zero_at^k, k = 1..order."""
    powers = np.vander(np.asarray(t, dtype=np.float64), order + 1, increasing=True)
    return powers if zero_at is None else powers[:, 1:] - zero_at ** np.arange(1, order + 1)


def expand(coefficients: FloatArray, zero_at: float | None) -> FloatArray:
    """Coefficients of 1, t, t^2, ... from those of `design`."""
    if zero_at is None:
        return coefficients
    k = np.arange(1, len(coefficients) + 1)
    return np.concatenate([[-float(np.sum(coefficients * zero_at**k))], coefficients])


def expansion(order: int, zero_at: float | None) -> FloatArray:
    """The matrix of `expand`, for covariances."""
    if zero_at is None:
        return np.eye(order + 1)
    return np.concatenate([-(zero_at ** np.arange(1, order + 1))[None], np.eye(order)])


def plain_powers(scaled: FloatArray, mid: float, half: float, *, through_zero: bool = False) -> FloatArray:
    """Coefficients of flow^k, lowest first, of sum scaled_k ((flow - mid) / half)^k.

    Worked in rational arithmetic (every float is a rational), so each coefficient is the nearest float to the exact one;
    the binomial expansion itself loses nothing. With ``through_zero`` the constant, zero but for rounding, is set to 0.
    """
    a, b = Fraction(1) / Fraction(half), -Fraction(mid) / Fraction(half)
    out: list[Fraction] = [Fraction(0)]
    for c in reversed([Fraction(float(c)) for c in scaled]):
        longer = [Fraction(0)] * (len(out) + 1)
        for k, value in enumerate(out):
            longer[k] += value * b
            longer[k + 1] += value * a
        longer[0] += c
        out = longer
    plain = np.array([float(c) for c in out[: len(scaled)]])
    if through_zero:
        plain[0] = 0.0
    return plain


def plain_loss(scaled: FloatArray, plain: FloatArray, mid: float, half: float) -> float:
    """Largest difference between plain and scaled form over the domain, relative to the largest value."""
    t = np.linspace(-1, 1, 201)
    a = np.polynomial.polynomial.polyval(t, scaled)
    b = np.polynomial.polynomial.polyval(mid + half * t, plain)
    return float(np.abs(a - b).max() / max(float(np.abs(a).max()), 1e-300))
