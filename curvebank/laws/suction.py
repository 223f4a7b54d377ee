"""NPSH required at another speed."""

import numpy as np
import numpy.typing as npt

from ..errors import LawError

SPEEDING_UP = 2.0
SLOWING_DOWN = 1.3


def npshr_at_speed(npshr_m: npt.ArrayLike, ratio: npt.ArrayLike, *, exponent: float | None = None) -> npt.NDArray[np.float64]:
    """NPSHr carried to another speed at the carried flow Q r: NPSHr' = NPSHr r^x.

    Parameters
    ----------
    npshr_m : array_like
        NPSH required [m].
    ratio : array_like
        r = new / old speed [-], above zero.
    exponent : float, optional
        x [-], 1.3 to 2. Left out, the cautious end is taken: 2 speeding up and 1.3 slowing down, so that the higher value results.

    Returns
    -------
    ndarray
        NPSHr at the new speed [m].

    Raises
    ------
    LawError
        A ratio that is not above zero, or an exponent outside 1.3 to 2.

    Examples
    --------
    >>> float(npshr_at_speed(4.0, 0.5, exponent=2.0))
    1.0
    >>> round(float(npshr_at_speed(4.0, 0.5)), 6)
    1.624505

    References
    ----------
    .. [1] ISO 9906:2012, clause 6: x = 2 as a first approximation, 1.3 <= x <= 2 (from memory).
    """
    r = np.asarray(ratio, dtype=np.float64)
    if np.any(~(r > 0)) or not np.all(np.isfinite(r)):
        raise LawError("A ratio of speeds must be above zero.")
    if exponent is None:
        x = np.where(r >= 1.0, SPEEDING_UP, SLOWING_DOWN)
    elif SLOWING_DOWN <= exponent <= SPEEDING_UP:
        x = np.asarray(exponent)
    else:
        raise LawError(f"The NPSHr exponent must lie between {SLOWING_DOWN} and {SPEEDING_UP}, not {exponent}.")
    return np.asarray(npshr_m, dtype=np.float64) * r**x
