"""Where a head curve meets a system curve H = Hs + k Q^m."""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq

from ..errors import LawError


class Meeting(NamedTuple):
    """One intersection: flow [m3/h], head [m], and whether it is stable (the system curve is the steeper one there)."""

    flow_m3h: float
    head_m: float
    stable: bool


def meetings(
    coefficients: npt.ArrayLike,
    domain_m3h: tuple[float, float],
    static_head_m: float,
    friction_m_per_m3h: float,
    *,
    exponent: float = 2.0,
    scan: int = 400,
) -> list[Meeting]:
    """All intersections of a polynomial head curve with a system curve inside the curve's domain, by rising flow.

    Parameters
    ----------
    coefficients : array_like [order + 1]
        Head curve in plain powers of flow, lowest first [m / (m3/h)^k].
    domain_m3h : tuple of float
        Lowest and highest flow of the curve [m3/h].
    static_head_m : float
        Hs [m].
    friction_m_per_m3h : float
        k [m / (m3/h)^exponent], not negative.
    exponent : float
        m [-], above zero.
    scan : int
        Number of steps in which sign changes are looked for; two meetings closer than one step may be missed.

    Returns
    -------
    list of Meeting
        Empty where the two never meet; that is an answer, not an error.

    Raises
    ------
    LawError
        A domain that is empty or negative, negative friction, or an exponent not above zero.

    Examples
    --------
    >>> [round(m.flow_m3h, 6) for m in meetings([50.0, 0.0, -10000 / 3600**2], (0.0, 240.0), 20.0, 5000 / 3600**2)]
    [160.996894]
    """
    lo, hi = domain_m3h
    if not 0 <= lo < hi:
        raise LawError(f"The domain {lo} to {hi} m³/h is empty or negative.")
    if friction_m_per_m3h < 0 or not exponent > 0:
        raise LawError("Friction must not be negative and its exponent must be above zero.")
    h = np.asarray(coefficients, dtype=np.float64)

    def gap(q: npt.ArrayLike) -> npt.NDArray[np.float64]:
        q = np.asarray(q, dtype=np.float64)
        return np.polynomial.polynomial.polyval(q, h) - static_head_m - friction_m_per_m3h * q**exponent

    grid = np.linspace(lo, hi, scan + 1)
    g = gap(grid)
    found: list[float] = [float(q) for q in grid[g == 0.0]]
    for i in np.flatnonzero(g[:-1] * g[1:] < 0):
        found.append(float(brentq(gap, grid[i], grid[i + 1], xtol=1e-13, rtol=1e-14)))
    slope = np.polynomial.polynomial.polyder(h) if h.size > 1 else np.zeros(1)
    out = []
    for q in sorted(found):
        system = friction_m_per_m3h * exponent * q ** (exponent - 1) if q > 0 else 0.0
        pump = float(np.polynomial.polynomial.polyval(q, slope))
        out.append(Meeting(q, float(static_head_m + friction_m_per_m3h * q**exponent), pump < system))
    return out
