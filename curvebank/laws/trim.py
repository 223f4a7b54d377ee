"""Trim rules: the ratio of diameters that a rule asks for, and what it does to a point."""

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq

from ..errors import LawError


def ratio_for_duty(
    coefficients: npt.ArrayLike,
    flow_m3h: float,
    head_m: float,
    *,
    flow_exponent: float = 1.0,
    head_exponent: float = 2.0,
    lowest: float = 0.5,
    highest: float = 1.0,
) -> float:
    """Ratio r of diameters at which r^b H(Q / r^a) meets a duty.

    Parameters
    ----------
    coefficients : array_like [order + 1]
        Head curve at the full diameter, plain powers of flow, lowest first [m / (m3/h)^k].
    flow_m3h, head_m : float
        The duty [m3/h], [m]; both above zero.
    flow_exponent, head_exponent : float
        a and b [-]; 1 and 2 are the simple law.
    lowest, highest : float
        Bracket for r [-]. The largest ratio inside it that meets the duty is returned.

    Returns
    -------
    float
        r = trimmed / full diameter [-].

    Raises
    ------
    LawError
        A duty that is not positive, or that no ratio in the bracket meets.

    Notes
    -----
    The answer is what the rule says, not what to cut to: published rules disagree by several per cent of head.

    Examples
    --------
    >>> round(350 * ratio_for_duty([50.0, -0.05, -0.0015], 70.0, 30.0), 9)
    315.0
    """
    h = np.asarray(coefficients, dtype=np.float64)
    if not (flow_m3h > 0 and head_m > 0):
        raise LawError(f"A duty needs flow and head above zero, not {flow_m3h} m³/h and {head_m} m.")

    def excess(r: npt.ArrayLike) -> npt.NDArray[np.float64]:
        r = np.asarray(r, dtype=np.float64)
        return r**head_exponent * np.polynomial.polynomial.polyval(flow_m3h / r**flow_exponent, h) - head_m

    grid = np.linspace(lowest, highest, 201)
    e = excess(grid)
    if e[-1] == 0.0:
        return float(highest)
    change = np.flatnonzero(e[:-1] * e[1:] <= 0)
    if change.size == 0:
        raise LawError(
            f"No diameter from {lowest:.0%} to {highest:.0%} of full meets {flow_m3h:g} m³/h at {head_m:g} m. "
            "Check the duty against the curve."
        )
    i = int(change[-1])
    return float(brentq(excess, grid[i], grid[i + 1], xtol=1e-15, rtol=1e-14))


def iso_trim_ratio(full_mm: npt.ArrayLike, trimmed_mm: npt.ArrayLike, inlet_mm: npt.ArrayLike) -> npt.NDArray[np.float64]:
    """Ratio R of the blade-inlet form of the trim rule: Q' = R Q, H' = R^2 H.

    R = sqrt((Dr^2 - D1^2) / (Dt^2 - D1^2)).

    Parameters
    ----------
    full_mm, trimmed_mm : array_like
        Impeller diameter before (Dt) and after (Dr) the trim [mm].
    inlet_mm : array_like
        Mean diameter of the blade's leading edge D1 [mm], below both.

    Returns
    -------
    ndarray
        R [-].

    Raises
    ------
    LawError
        An inlet diameter that is not below both outer diameters.

    Examples
    --------
    >>> round(float(iso_trim_ratio(350.0, 335.0, 175.0)), 9)
    0.942424143

    References
    ----------
    .. [1] ISO 9906, informative annex on the reduction of impeller diameter (from memory).
    """
    t, r, d = (np.asarray(x, dtype=np.float64) for x in (full_mm, trimmed_mm, inlet_mm))
    if not (np.all(d >= 0) and np.all(d < r) and np.all(d < t)):
        raise LawError("The blade-inlet diameter must be below both impeller diameters. Check the three diameters.")
    return np.sqrt((r**2 - d**2) / (t**2 - d**2))
