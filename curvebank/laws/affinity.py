"""Affinity: one operating point or curve carried to another speed or impeller diameter.

Every rule has the form Q' = Q r^a and V' = V r^b with r = new / old. What differs is the pair of exponents.
Domain checks are strict: a ratio that is not a positive number is a ``LawError``.
"""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ..errors import LawError

Array = npt.NDArray[np.float64]


class Exponents(NamedTuple):
    """Exponents of r = new / old for flow and for each quantity against flow."""

    flow: float
    head: float
    power: float
    efficiency: float
    npshr: float


SPEED = Exponents(1.0, 2.0, 3.0, 0.0, 2.0)
"""Speed at constant diameter (White, Fluid Mechanics, ch. 11; ISO 9906:2012 cl. 6 with NPSHr exponent 2 as first approximation)."""

TRIM = Exponents(1.0, 2.0, 3.0, 0.0, 0.0)
"""Diameter at constant speed, the simple law; NPSHr is taken unchanged at equal scaled flow (common practice, no source)."""

GEOMETRIC = Exponents(3.0, 2.0, 5.0, 0.0, 2.0)
"""All dimensions scaled together at constant speed: geometric similarity, not a trim (White, ch. 11)."""


def ratio_of(new: npt.ArrayLike, old: npt.ArrayLike, what: str = "diameter") -> Array:
    """new / old after both were checked to be positive and finite.

    Parameters
    ----------
    new, old : array_like
        Two diameters [mm] or two speeds [1/min].
    what : str
        Name used in the error.

    Returns
    -------
    ndarray
        Ratio [-].

    Raises
    ------
    LawError
        A value that is not a positive finite number.

    Examples
    --------
    >>> round(float(ratio_of(300.0, 350.0)), 9)
    0.857142857
    """
    a, b = np.asarray(new, dtype=np.float64), np.asarray(old, dtype=np.float64)
    for x in (a, b):
        if not np.all(np.isfinite(x) & (x > 0)):
            raise LawError(f"A {what} must be above zero, not {x.min() if x.size else 'empty'}. Give the {what} as a positive number.")
    return a / b


def carry(
    flow_m3h: npt.ArrayLike,
    value: npt.ArrayLike,
    ratio: npt.ArrayLike,
    *,
    flow_exponent: float = 1.0,
    value_exponent: float = 2.0,
) -> tuple[Array, Array]:
    """Carry points of a curve to another speed or diameter: Q' = Q r^a, V' = V r^b.

    Parameters
    ----------
    flow_m3h : array_like
        Flow [m3/h].
    value : array_like
        Head [m], power [kW], efficiency [-] or NPSHr [m] at that flow, same shape.
    ratio : array_like
        r = new / old speed or diameter [-], above zero.
    flow_exponent, value_exponent : float
        a and b [-]; 1 and 2 are head under the simple law.

    Returns
    -------
    tuple of ndarray
        Flow [m3/h] and value (unit of ``value``), broadcast shape.

    Raises
    ------
    LawError
        A ratio that is not a positive finite number.

    Notes
    -----
    For a trim the simple law is a first guess only: published rules spread the head factor of r = 0.857 over 0.63 to 0.735.

    Examples
    --------
    >>> q, h = carry(100.0, 50.0, 300 / 350)
    >>> round(float(q), 7), round(float(h), 7)
    (85.7142857, 36.7346939)

    References
    ----------
    .. [1] White, F. M. Fluid Mechanics, ch. 11 (from memory).
    .. [2] ISO 9906:2012, clause 6, translation of the test speed (from memory).
    """
    r = ratio_of(ratio, 1.0, "ratio")
    return np.asarray(flow_m3h, dtype=np.float64) * r**flow_exponent, np.asarray(value, dtype=np.float64) * r**value_exponent


def carry_quantity(
    quantity: str, flow_m3h: npt.ArrayLike, value: npt.ArrayLike, ratio: npt.ArrayLike, rule: Exponents = SPEED
) -> tuple[Array, Array]:
    """Carry a curve of a named quantity with the exponents of ``rule``.

    Parameters
    ----------
    quantity : str
        ``head``, ``power``, ``efficiency`` or ``npshr``.
    flow_m3h, value, ratio : array_like
        As in `carry`.
    rule : Exponents
        ``SPEED``, ``TRIM``, ``GEOMETRIC`` or one of your own.

    Returns
    -------
    tuple of ndarray
        Flow [m3/h] and value.

    Raises
    ------
    LawError
        A quantity no rule speaks of.

    Examples
    --------
    >>> q, p = carry_quantity("power", 400.0, 17.5, 1700 / 3500)
    >>> round(float(q), 6), round(float(p), 8)
    (194.285714, 2.00530612)
    """
    if quantity not in Exponents._fields[1:]:
        raise LawError(f"No affinity rule for {quantity!r}. Known: {', '.join(Exponents._fields[1:])}.")
    return carry(flow_m3h, value, ratio, flow_exponent=rule.flow, value_exponent=getattr(rule, quantity))


def carried_coefficients(coefficients: npt.ArrayLike, ratio: float, *, flow_exponent: float = 1.0, value_exponent: float = 2.0) -> Array:
    """Coefficients of a carried polynomial: h_k' = h_k r^(b - a k).

    Parameters
    ----------
    coefficients : array_like [order + 1]
        Plain powers of flow, lowest first [unit of value / (m3/h)^k].
    ratio : float
        r = new / old [-].
    flow_exponent, value_exponent : float
        a and b [-].

    Returns
    -------
    ndarray [order + 1]
        Coefficients after the change.

    Raises
    ------
    LawError
        A ratio that is not a positive finite number.

    Notes
    -----
    Follows from V'(Q) = r^b V(Q / r^a); under the simple law the coefficient of Q^2 of a head curve does not change.

    Examples
    --------
    >>> carried_coefficients([50.0, -0.05, -0.0015], 0.9).round(12).tolist()
    [40.5, -0.045, -0.0015]
    """
    h = np.asarray(coefficients, dtype=np.float64)
    r = float(ratio_of(ratio, 1.0, "ratio"))
    return h * r ** (value_exponent - flow_exponent * np.arange(h.size))


def homologous_head(
    flow_m3h: npt.ArrayLike, through_flow_m3h: float, through_head_m: float, *, flow_exponent: float = 1.0, head_exponent: float = 2.0
) -> Array:
    """Head along the path of homologous points through one point: H = H0 (Q / Q0)^(b / a).

    Parameters
    ----------
    flow_m3h : array_like
        Flow where the path is wanted [m3/h], not negative.
    through_flow_m3h, through_head_m : float
        The point (Q0 [m3/h], H0 [m]) on the path; Q0 above zero.
    flow_exponent, head_exponent : float
        a and b [-]. 1 and 2 give the affinity parabola, a = b a straight line through the origin.

    Returns
    -------
    ndarray
        Head [m].

    Raises
    ------
    LawError
        Q0 not above zero, or a negative flow.

    Examples
    --------
    >>> float(homologous_head(50.0, 100.0, 40.0))
    10.0
    """
    q = np.asarray(flow_m3h, dtype=np.float64)
    if not through_flow_m3h > 0:
        raise LawError(f"A homologous path needs a point with flow above zero, not {through_flow_m3h} m³/h.")
    if np.any(q < 0):
        raise LawError(f"Flow must not be negative; the lowest given is {q.min()} m³/h.")
    return through_head_m * (q / through_flow_m3h) ** (head_exponent / flow_exponent)
