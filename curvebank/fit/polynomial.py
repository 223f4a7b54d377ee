"""The polynomial that stands for a traced curve, with its order, domain and uncertainty."""

from typing import Any, Literal

import numpy as np

from ..errors import FitError
from ..records import Fit, FloatArray, frozen
from . import basis
from .order import choose
from .robust import robust_weights
from .solver import least_squares
from .uncertainty import Shared, as_shared

MAX_ORDER = 8
PLAIN_LOSS_LIMIT = 1e-8
"""Plain powers must repeat the scaled form this well over the domain, relative to the largest value (the result format allows 1e-6)."""
BACKWARD_SHARE = 0.01
"""A line may run back in flow by this share of its range in all (a wavering pen); more, and flow has two values."""


def fit_curve(
    flow: Any,
    value: Any,
    sigma: Any = None,
    shared_cov: Any = None,
    *,
    order: int | Literal["auto"] = "auto",
    through_zero: bool = False,
    correlation_px: float = 1.0,
) -> Fit:
    """Fit a polynomial to the points of one traced curve.

    Parameters
    ----------
    flow, value : array_like [n]
        Points in order along the line, flow in m3/h, value in the curve's unit.
    sigma : array_like [n], float or None
        Standard uncertainty of each value at equal flow, the reading part alone. None: estimated from the residuals.
    shared_cov : (J [n, p], V [p, p]), [n, n] or None
        The part that all points share (calibration, drawing), see `curvebank.fit.uncertainty`.
    order : 1..8 or "auto"
        ``auto`` takes the order by an information criterion on effective readings, see `curvebank.fit.order`.
    through_zero : bool
        Hold the curve to 0 at zero flow (efficiency).
    correlation_px : float
        Neighbouring points that are one reading: n points count as n / correlation_px.

    Returns
    -------
    Fit
        ``covariance`` holds the reading part (inflated for correlated neighbours and, where the line misses the points by
        more than they claim, by that misfit) and the shared part; ``sigma`` the root mean square of it over the domain.

    Raises
    ------
    FitError
        ``not-a-number``, ``shape``, ``too-few-points``, ``order``, ``one-flow``, ``not-single-valued`` or ``plain-powers``.

    Notes
    -----
    V = M (C_reading + J V J') M' with M the pseudo-inverse of the weighted fit (JCGM 100 eq. 13).
    A few outlying points are weighted down (`curvebank.fit.robust`); ``max_miss`` is taken over all points nevertheless.
    """
    q, v, s, shared = _checked(flow, value, sigma, shared_cov, correlation_px)
    _check_single_valued(q)
    mid, half = basis.scaling(q)
    if half <= 0:
        raise FitError("All points have one flow. A curve needs a range of flows.", code="one-flow")
    if through_zero and q.min() < -1e-9 * half:
        raise FitError("The curve holds points at negative flow, so it cannot be held to zero at zero flow.", code="through-zero")
    t, zero_at = (q - mid) / half, -mid / half if through_zero else None
    effective = max(len(q) / max(correlation_px, 1.0), min(len(q), 3.0))
    most = _highest_order(len(q), effective, through_zero)
    if order == "auto":
        order = choose(
            t,
            v,
            s,
            sigma_known=sigma is not None,
            effective=effective,
            most=most,
            zero_at=zero_at,
            acceptable=lambda c: _plain(c, mid, half, through_zero)[1] <= PLAIN_LOSS_LIMIT,
        )
    elif isinstance(order, bool) or not isinstance(order, int) or not 1 <= order <= MAX_ORDER:
        raise FitError(f"The order must be a whole number from 1 to {MAX_ORDER}, or auto. It is {order!r}.", code="order")
    elif order > len(q) - (0 if through_zero else 1):
        raise FitError(f"{len(q)} points cannot carry order {order}. Lower the order or trace a longer line.", code="too-few-points")
    columns = basis.design(t, order, zero_at)
    weight = 1 / s * robust_weights(columns, v, s)
    found = least_squares(columns, v, weight)
    scaled = basis.expand(found.coefficients, zero_at)
    plain, loss = _plain(scaled, mid, half, through_zero)
    if loss > PLAIN_LOSS_LIMIT * 10:
        raise FitError(
            f"Order {order} over {q.min():g} to {q.max():g} m³/h cannot be written in powers of flow without loss. Choose a lower order.",
            code="plain-powers",
        )
    misfit = found.rss * (effective / len(q)) / max(effective - columns.shape[1], 1.0)
    # Points known by their uncertainty keep it unless the line misses them by more; unknown ones take what the line shows.
    inflation = misfit if sigma is None else max(1.0, misfit)
    covariance = found.unit_covariance * inflation * len(q) / effective
    if shared is not None:
        moved = found.pseudo_inverse @ shared[0]
        covariance = covariance + moved @ shared[1] @ moved.T
    turn = basis.expansion(order, zero_at)
    covariance = turn @ covariance @ turn.T
    grid = np.linspace(-1, 1, 101)
    phi = np.vander(grid, order + 1, increasing=True)
    miss = float(np.abs(found.residuals).max())
    return Fit(
        order=int(order),
        lo=float(q.min()),
        hi=float(q.max()),
        mid=mid,
        half=half,
        scaled=frozen(scaled),
        covariance=frozen((covariance + covariance.T) / 2),
        plain=frozen(plain),
        sigma=float(np.sqrt(np.mean(np.maximum(np.einsum("ni,ij,nj->n", phi, covariance, phi), 0.0)))),
        max_miss=miss,
        max_miss_pct=100 * miss / max(float(np.abs(v).max()), 1e-300),
        through_zero=bool(through_zero),
    )


def _checked(
    flow: Any, value: Any, sigma: Any, shared_cov: Any, correlation_px: float
) -> tuple[FloatArray, FloatArray, FloatArray, Shared | None]:
    q, v = np.asarray(flow, dtype=np.float64).ravel(), np.asarray(value, dtype=np.float64).ravel()
    if len(q) != len(v):
        raise FitError(f"There are {len(q)} flows and {len(v)} values. They must pair up.", code="shape")
    if len(q) < 2:
        raise FitError(f"A fit needs two or more points; there {'is one' if len(q) == 1 else 'are none'}.", code="too-few-points")
    if not (np.all(np.isfinite(q)) and np.all(np.isfinite(v))):
        raise FitError("A point is not a finite number. A fit takes no NaN: trace the curve again.", code="not-a-number")
    if not (np.isfinite(correlation_px) and correlation_px > 0):
        raise FitError(f"correlation_px must be above 0. It is {correlation_px!r}.", code="correlation")
    s = np.ones(len(q)) if sigma is None else np.broadcast_to(np.asarray(sigma, dtype=np.float64), q.shape).copy()
    if not np.all(np.isfinite(s)) or np.any(s < 0):
        raise FitError("A standard uncertainty is negative or not finite.", code="not-a-number")
    if not np.any(s > 0):
        s = np.ones(len(q))
    s = np.maximum(s, 1e-3 * float(np.median(s[s > 0])))
    return q, v, s, as_shared(shared_cov, len(q))


def _check_single_valued(q: FloatArray) -> None:
    step = np.diff(q)
    span = float(np.ptp(q))
    forward, backward = float(step[step > 0].sum()), float(-step[step < 0].sum())
    if len(q) < 3 or min(forward, backward) <= BACKWARD_SHARE * span:
        return
    if len(q) < 20 and not _looks_like_a_line(q):
        return
    turn = q[int(np.argmax(q))] if forward >= backward else q[int(np.argmin(q))]
    raise FitError(
        f"The line runs back in flow near {turn:.4g} m³/h, so a flow has two values and no polynomial stands for it. "
        "Trace the part on one side of the turn, or enter it as a contour.",
        code="not-single-valued",
    )


def _looks_like_a_line(q: FloatArray) -> bool:
    """Few points may be typed in any order (a test certificate); a run that turns once is a line that turns back."""
    return int(np.sum(np.diff(np.sign(np.diff(q))) != 0)) <= 1


def _highest_order(n: int, effective: float, through_zero: bool) -> int:
    """At least two effective readings a coefficient, and never more coefficients than points."""
    most = int(effective // 2) - (0 if through_zero else 1)
    return max(1, min(MAX_ORDER, most, n - (0 if through_zero else 1)))


def _plain(scaled: FloatArray, mid: float, half: float, through_zero: bool) -> tuple[FloatArray, float]:
    plain = basis.plain_powers(scaled, mid, half, through_zero=through_zero)
    return plain, basis.plain_loss(scaled, plain, mid, half)
