"""Numbers that compare pumps of any size: specific speed and the head coefficient at shut-off."""

import math

import numpy as np
import numpy.typing as npt

from ..errors import LawError
from ..units import FOOT_M, GALLON_US_M3, GRAVITY_MS2

Array = npt.NDArray[np.float64]

US_PER_METRIC = math.sqrt(60.0 / GALLON_US_M3) / (1 / FOOT_M) ** 0.75
"""Ns (1/min, US gal/min, ft) for nq = 1 (1/min, m3/s, m); 51.645..., exact from the units."""

METRIC_PER_TYPE_NUMBER = 60.0 / (2.0 * math.pi) * GRAVITY_MS2**0.75
"""nq for type number K = 1; 52.919... with standard gravity."""


def specific_speed(
    flow_m3h: npt.ArrayLike, head_m: npt.ArrayLike, speed_rpm: npt.ArrayLike, *, stages: int = 1, form: str = "metric"
) -> Array:
    """Specific speed at the best-efficiency point of the largest diameter.

    Parameters
    ----------
    flow_m3h : array_like
        Flow [m3/h] (of the whole pump; a double inlet is not halved here).
    head_m : array_like
        Head [m] of the whole pump; divided by ``stages``.
    speed_rpm : array_like
        Speed [1/min].
    stages : int
        Number of stages.
    form : str
        ``metric`` nq = n sqrt(Q [m3/s]) / H^0.75; ``us`` Ns with US gal/min and ft; ``type`` the dimensionless type number
        K = 2 pi n / 60 sqrt(Q) / (g H)^0.75.

    Returns
    -------
    ndarray
        Specific speed in the form asked for.

    Raises
    ------
    LawError
        Flow, head, speed or stages not above zero, or an unknown form.

    Examples
    --------
    >>> round(float(specific_speed(0.05 * 3600, 32.0, 1450.0)), 9)
    24.098528283
    >>> round(float(specific_speed(100.0, 32.0, 1450.0, form="type")), 9)
    0.339423869

    References
    ----------
    .. [1] ANSI/HI 1.3 (metric and US form, as cited by the fluids library).
    .. [2] ISO 9906 (type number, from memory).
    """
    q, h, n = (np.asarray(x, dtype=np.float64) for x in (flow_m3h, head_m, speed_rpm))
    if np.any(~(q > 0)) or np.any(~(h > 0)) or np.any(~(n > 0)) or stages < 1:
        raise LawError("Specific speed needs flow, head and speed above zero and at least one stage.")
    nq = n * np.sqrt(q / 3600.0) / (h / stages) ** 0.75
    if form == "metric":
        return nq
    if form == "us":
        return nq * US_PER_METRIC
    if form == "type":
        return nq / METRIC_PER_TYPE_NUMBER
    raise LawError(f"{form!r} is not a form of specific speed. Known: metric, us, type.")


def tip_speed_ms(diameter_mm: npt.ArrayLike, speed_rpm: npt.ArrayLike) -> Array:
    """Speed of the impeller's rim: pi D n / 60.

    Parameters
    ----------
    diameter_mm, speed_rpm : array_like
        Impeller diameter [mm] and speed [1/min].

    Returns
    -------
    ndarray
        Tip speed [m/s].

    Examples
    --------
    >>> round(float(tip_speed_ms(320.0, 1450.0)), 6)
    24.294983
    """
    return np.pi * np.asarray(diameter_mm, dtype=np.float64) / 1000.0 * np.asarray(speed_rpm, dtype=np.float64) / 60.0


def head_coefficient(head_m: npt.ArrayLike, diameter_mm: npt.ArrayLike, speed_rpm: npt.ArrayLike, *, stages: int = 1) -> Array:
    """Head coefficient psi = g H / (pi D n / 60)^2 per stage.

    Parameters
    ----------
    head_m : array_like
        Head [m] of the whole pump, at shut-off for the check of units.
    diameter_mm : array_like
        Impeller diameter [mm], above zero.
    speed_rpm : array_like
        Speed [1/min], above zero.
    stages : int
        Number of stages.

    Returns
    -------
    ndarray
        psi [-].

    Raises
    ------
    LawError
        Diameter, speed or stages not above zero.

    Notes
    -----
    At shut-off radial wheels lie at about 0.5 to 0.7 (common practice, no source). A constant factor on all heads leaves every
    affinity exponent unchanged, so this number sees a wrong unit, speed or stage count where a family check cannot.

    Examples
    --------
    >>> round(float(head_coefficient(36.0, 320.0, 1450.0)), 6)
    0.598122
    """
    u = tip_speed_ms(diameter_mm, speed_rpm)
    if np.any(~(u > 0)) or stages < 1:
        raise LawError("The head coefficient needs diameter and speed above zero and at least one stage.")
    return GRAVITY_MS2 * np.asarray(head_m, dtype=np.float64) / stages / u**2
