"""Hydraulic power, shaft power and efficiency, and how well three traced curves close."""

import numpy as np
import numpy.typing as npt

from ..errors import LawError
from ..units import GRAVITY_MS2, WATER_DENSITY_KGM3

Array = npt.NDArray[np.float64]
_W_PER_M3H_M = GRAVITY_MS2 / 3600.0


def hydraulic_power_kw(
    flow_m3h: npt.ArrayLike, head_m: npt.ArrayLike, *, density_kgm3: float = WATER_DENSITY_KGM3, gravity_ms2: float = GRAVITY_MS2
) -> Array:
    """Power given to the liquid: Ph = rho g Q H.

    Parameters
    ----------
    flow_m3h : array_like
        Flow [m3/h].
    head_m : array_like
        Head [m] of the whole pump.
    density_kgm3 : float
        Density [kg/m3].
    gravity_ms2 : float
        Gravity [m/s2].

    Returns
    -------
    ndarray
        Hydraulic power [kW].

    Raises
    ------
    LawError
        A density that is not above zero.

    Examples
    --------
    >>> round(float(hydraulic_power_kw(100.0, 32.0)), 9)
    8.701331582
    """
    if not density_kgm3 > 0:
        raise LawError(f"Density must be above zero, not {density_kgm3} kg/m³.")
    q, h = np.asarray(flow_m3h, dtype=np.float64), np.asarray(head_m, dtype=np.float64)
    return density_kgm3 * gravity_ms2 * q * h / 3.6e6


def efficiency_of(
    flow_m3h: npt.ArrayLike, head_m: npt.ArrayLike, power_kw: npt.ArrayLike, *, density_kgm3: float = WATER_DENSITY_KGM3
) -> Array:
    """Pump efficiency from flow, head and shaft power: eta = rho g Q H / P.

    Parameters
    ----------
    flow_m3h, head_m, power_kw : array_like
        Flow [m3/h], head [m], shaft power [kW] (above zero).
    density_kgm3 : float
        Density [kg/m3].

    Returns
    -------
    ndarray
        Efficiency as a fraction [-].

    Raises
    ------
    LawError
        Power or density that is not above zero.

    Examples
    --------
    >>> round(float(efficiency_of(100.0, 32.0, 11.155553311)), 9)
    0.78
    """
    p = np.asarray(power_kw, dtype=np.float64)
    if np.any(~(p > 0)):
        raise LawError("Shaft power must be above zero to give an efficiency.")
    return hydraulic_power_kw(flow_m3h, head_m, density_kgm3=density_kgm3) / p


def shaft_power_kw(
    flow_m3h: npt.ArrayLike, head_m: npt.ArrayLike, efficiency: npt.ArrayLike, *, density_kgm3: float = WATER_DENSITY_KGM3
) -> Array:
    """Shaft power from flow, head and efficiency: P = rho g Q H / eta.

    Parameters
    ----------
    flow_m3h, head_m : array_like
        Flow [m3/h] and head [m].
    efficiency : array_like
        Efficiency as a fraction [-], above zero. At zero flow, where eta is zero too, use `shut_off_power_kw`.
    density_kgm3 : float
        Density [kg/m3].

    Returns
    -------
    ndarray
        Shaft power [kW].

    Raises
    ------
    LawError
        Efficiency that is not above zero.

    Examples
    --------
    >>> round(float(shaft_power_kw(100.0, 32.0, 0.78)), 9)
    11.155553311
    """
    e = np.asarray(efficiency, dtype=np.float64)
    if np.any(~(e > 0)):
        raise LawError("Efficiency must be above zero to give a shaft power. At zero flow use shut_off_power_kw.")
    return hydraulic_power_kw(flow_m3h, head_m, density_kgm3=density_kgm3) / e


def shut_off_power_kw(shut_off_head_m: float, efficiency_slope_per_m3h: float, *, density_kgm3: float = WATER_DENSITY_KGM3) -> float:
    """Limit of rho g Q H / eta for Q -> 0 where eta = s Q near zero: rho g H0 / s.

    Parameters
    ----------
    shut_off_head_m : float
        Head at zero flow [m].
    efficiency_slope_per_m3h : float
        Slope of efficiency at zero flow [1/(m3/h)], above zero.
    density_kgm3 : float
        Density [kg/m3].

    Returns
    -------
    float
        Shaft power at zero flow [kW].

    Raises
    ------
    LawError
        A slope that is not above zero.

    Examples
    --------
    >>> round(shut_off_power_kw(50.0, 0.0156), 6)
    8.715276
    """
    if not efficiency_slope_per_m3h > 0:
        raise LawError(f"The slope of efficiency at zero flow must be above zero, not {efficiency_slope_per_m3h}.")
    return density_kgm3 * _W_PER_M3H_M * shut_off_head_m / efficiency_slope_per_m3h / 1000.0


def closure(
    flow_m3h: npt.ArrayLike,
    head_m: npt.ArrayLike,
    power_kw: npt.ArrayLike,
    efficiency: npt.ArrayLike,
    *,
    density_kgm3: float = WATER_DENSITY_KGM3,
) -> Array:
    """Ratio of traced to computed power, P eta / (rho g Q H); 1 where the three curves agree.

    Parameters
    ----------
    flow_m3h, head_m, power_kw, efficiency : array_like
        Flow [m3/h] and head [m] above zero, shaft power [kW], efficiency [-].
    density_kgm3 : float
        Density the power scale was drawn for [kg/m3].

    Returns
    -------
    ndarray
        Ratio [-].

    Raises
    ------
    LawError
        Flow or head that is not above zero.

    Notes
    -----
    To first order its relative standard uncertainty is the root sum of squares of the relative uncertainties of Q, H, P and eta
    (JCGM 100, eq. 12).

    Examples
    --------
    >>> round(float(closure(100.0, 32.0, 11.155553311, 0.78)), 9)
    1.0
    """
    ph = hydraulic_power_kw(flow_m3h, head_m, density_kgm3=density_kgm3)
    if np.any(~(ph > 0)):
        raise LawError("The power balance needs flow and head above zero.")
    return np.asarray(power_kw, dtype=np.float64) * np.asarray(efficiency, dtype=np.float64) / ph
