"""One dimensionless shape fitted jointly to all curves of a family.

Curve i is V = V0 exp(h_i) f(Q / (Q0 exp(q_i))). The shape f is a polynomial shared by all curves; (q_i, h_i) are the log scales of
flow and value relative to one reference curve. What the scales say about diameters and speeds is judged in `curvebank.laws.labels`.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from ..errors import LawError
from ..records import FloatArray, frozen

POINTS_PER_CURVE = 32
READINGS_PER_CURVE = 4
"""Independent readings a curve: neighbouring pixels of one drawn line are one reading of the draughtsman's hand."""
_WEAK_PRIOR_SD = 0.5  # keeps the scales finite where a shape is nearly a power law; far wider than any published exponent allows
_HUBER = 2.0
_TUKEY = 6.0
_STEPS = 45


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class FamilyCurve:
    """One curve of a family: points [n] with one standard uncertainty ``sigma`` of a reading, leaving out what the whole sheet shares."""

    id: str
    flow: FloatArray
    value: FloatArray
    sigma: float
    diameter_mm: float | None = None
    speed_rpm: float | None = None


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Scales:
    """Log scales of n curves relative to curve ``reference``, whose own scales are zero.

    ``flow`` [n] and ``value`` [n] are q and h; ``covariance`` [2 n, 2 n] is of (q, h) stacked, with zero rows for the reference.
    ``misfit`` [n] is the root mean square distance of each curve from the common shape in units of its sigma, ``inflation`` the
    factor by which residuals exceed the declared sigma (never below 1; already in the covariance). ``shape`` are Legendre
    coefficients in t = 2 u / u_max - 1 with u = (Q - offset) / (Q0 exp q); ``offset`` is the common zero error of flow and value.
    """

    curves: tuple[FamilyCurve, ...]
    reference: int
    flow: FloatArray
    value: FloatArray
    covariance: FloatArray
    misfit: FloatArray
    inflation: float
    shape: FloatArray
    u_max: float
    flow_unit: float
    value_unit: float
    offset: tuple[float, float] = (0.0, 0.0)

    def curve_value(self, flow: npt.ArrayLike, q: float, h: float) -> FloatArray:
        """Value of the common shape at ``flow`` for log scales (q, h)."""
        u = (np.asarray(flow, dtype=np.float64) - self.offset[0]) / (self.flow_unit * np.exp(q))
        shape = np.polynomial.legendre.legval(2 * u / self.u_max - 1, self.shape)
        return np.asarray(self.offset[1] + self.value_unit * np.exp(h) * shape, dtype=np.float64)


def thin(flow: npt.ArrayLike, value: npt.ArrayLike, count: int = POINTS_PER_CURVE) -> tuple[FloatArray, FloatArray]:
    """``count`` points at equal steps of flow, each the mean of the trace around it, so that pixel noise averages out.

    Parameters
    ----------
    flow, value : array_like [n]
        Points of one curve, two or more.
    count : int
        Points wanted.

    Returns
    -------
    tuple of ndarray
        Flow and value, ``count`` or fewer points by rising flow.

    Raises
    ------
    LawError
        Fewer than two points, different lengths, or values that are not finite.

    Examples
    --------
    >>> q, v = thin([0, 1, 2, 3], [4.0, 3.0, 2.0, 1.0], 2)
    >>> q.tolist(), v.tolist()
    ([0.5, 2.5], [3.5, 1.5])
    """
    q, v = np.asarray(flow, dtype=np.float64), np.asarray(value, dtype=np.float64)
    if q.ndim != 1 or q.shape != v.shape or q.size < 2:
        raise LawError("A curve needs two or more points, with one value to each flow.")
    if not (np.all(np.isfinite(q)) and np.all(np.isfinite(v))):
        raise LawError("A curve holds a value that is not a finite number.")
    span = q.max() - q.min()
    if not span > 0:
        raise LawError("A curve whose points all have one flow has no shape to compare.")
    cell = np.minimum((count * (q - q.min()) / span).astype(int), count - 1)
    n = np.bincount(cell, minlength=count)
    full = n > 0
    return np.bincount(cell, q, count)[full] / n[full], np.bincount(cell, v, count)[full] / n[full]


def joint_scales(
    curves: Sequence[FamilyCurve],
    start_flow: npt.ArrayLike,
    start_value: npt.ArrayLike,
    *,
    order: int = 5,
    robust: bool = True,
    offset_sd: float = 0.003,
) -> Scales:
    """Fit one shape to all curves, with a flow and a value scale for each.

    Parameters
    ----------
    curves : sequence of FamilyCurve
        Two or more; the first is the reference. Values must be above zero on most of each curve.
    start_flow, start_value : array_like [n]
        Log scales to start from, those of the labels; a second start is taken from the curves themselves.
    order : int
        Degree of the common shape.
    robust : bool
        Weigh down stretches that leave the common shape, such as tails where two traces run into one line (Huber weights, then
        Tukey's biweight).
    offset_sd : float
        Standard uncertainty of the zero of both axes, as a share of the reference's largest flow and value. It is common to all
        curves, so it matters where small curves are compared with large ones.

    Returns
    -------
    Scales

    Raises
    ------
    LawError
        Fewer than two curves, or a curve with no value above zero.

    Notes
    -----
    Gauss-Newton with step halving on (scales, shape). Weights count ``READINGS_PER_CURVE`` independent readings a curve, not pixels;
    where residuals exceed the declared uncertainty the covariance grows with them (Birge ratio).

    Examples
    --------
    >>> q = np.linspace(10, 100, 40)
    >>> big = FamilyCurve(id="a", flow=q, value=50 - 0.002 * q**2, sigma=0.05)
    >>> small = FamilyCurve(id="b", flow=q * 0.9, value=0.81 * (50 - 0.002 * q**2), sigma=0.05)
    >>> s = joint_scales([big, small], [0, -0.1], [0, -0.2])
    >>> np.exp([s.flow[1], s.value[1]]).round(4).tolist()
    [0.9, 0.81]
    """
    if len(curves) < 2:
        raise LawError("A family needs two or more curves.")
    try:
        return _fit(_Problem(curves, order, offset_sd), start_flow, start_value, robust)
    except np.linalg.LinAlgError as e:
        raise LawError("The curves have no common shape that could be fitted. Look whether they are one quantity.") from e


def _fit(problem: "_Problem", start_flow: npt.ArrayLike, start_value: npt.ArrayLike, robust: bool) -> Scales:
    """The better of several starts: redescending weights can settle in the wrong place from a single one."""
    labels = np.concatenate([np.asarray(start_flow, dtype=np.float64), np.asarray(start_value, dtype=np.float64)])
    found = [problem.solve(labels, robust)]
    if robust:
        found.append(problem.solve(labels, robust, first=problem.body()))
    if min(s.cost for s in found) > 2 * problem.q.size:
        found.append(problem.solve(problem.guess(), robust))
    return problem.result(min(found, key=lambda one: one.cost))


class _Problem:
    """Rows of the nonlinear least-squares problem; the reference is curve 0.

    Parameters are p = (q_1..q_n, h_1..h_n, flow offset, value offset), in units of the reference's largest flow and value; the shape
    is linear given them. The offsets are what a misplaced zero of an axis adds to every curve of the sheet.
    """

    def __init__(self, curves: Sequence[FamilyCurve], order: int, offset_sd: float):
        thinned = [thin(c.flow, c.value) for c in curves]
        if any(v.max() <= 0 for _, v in thinned):
            raise LawError("A curve has no value above zero; its scale cannot be compared.")
        self.curves, self.thinned, self.order = tuple(curves), thinned, order
        self.n = n = len(curves)
        self.which = np.concatenate([np.full(q.size, i) for i, (q, _) in enumerate(thinned)])
        self.q0 = float(thinned[0][0].max())
        self.v0 = float(np.abs(thinned[0][1]).max())
        self.q = np.concatenate([q for q, _ in thinned]) / self.q0
        self.v = np.concatenate([v for _, v in thinned]) / self.v0
        # a floor of 1e-4 of the largest value: no drawn line is better, and exact input must not divide by zero
        self.sigma = np.maximum(np.array([c.sigma for c in curves]) / self.v0, 1e-4)[self.which]
        self.u_max = 1.0
        self.free = np.array([k for k in range(2 * n + 2) if k not in (0, n)])
        self.weight = np.concatenate([np.full(2 * n, _WEAK_PRIOR_SD**-2.0), np.full(2, offset_sd**-2.0)])

    def guess(self) -> FloatArray:
        """Scales read off the curves alone: the value where each begins, the flow where it ends."""
        start = [v[np.argmin(q)] if v[np.argmin(q)] > 0 else v.max() for q, v in self.thinned]
        end = [q.max() for q, _ in self.thinned]
        return np.concatenate([np.log(np.array(end) / end[0]), np.log(np.array(start) / start[0])])

    def body(self) -> FloatArray:
        """1 on the first four fifths of each curve, 0 on its tail, where merging lines run together."""
        return np.concatenate([(q <= q.min() + 0.8 * np.ptp(q)).astype(np.float64) for q, _ in self.thinned])

    def spread(self, p: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Dimensionless flow, gain and basis rows."""
        u = (self.q - p[-2]) * np.exp(-p[: self.n][self.which])
        f = np.polynomial.legendre.legvander(2 * u / self.u_max - 1, self.order)
        return u, np.exp(p[self.n : -2][self.which]), np.asarray(f, dtype=np.float64)

    def rows(self, p: FloatArray, c: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Residuals / sigma and the Jacobian of the model over (p, c), divided by sigma."""
        n, i = self.n, self.which
        u, gain, f = self.spread(p)
        slope = np.polynomial.legendre.legval(2 * u / self.u_max - 1, np.polynomial.legendre.legder(c)) * 2 / self.u_max
        shape = gain * (f @ c)
        jac = np.zeros((i.size, 2 * n + 2 + c.size))
        at = np.arange(i.size)
        jac[at, i] = -gain * u * slope
        jac[at, n + i] = shape
        jac[:, 2 * n] = -gain * slope * np.exp(-p[:n][i])
        jac[:, 2 * n + 1] = 1.0
        jac[:, 2 * n + 2 :] = gain[:, None] * f
        return (self.v - shape - p[-1]) / self.sigma, jac / self.sigma[:, None]

    def shape_for(self, p: FloatArray, w: FloatArray) -> FloatArray:
        """Best shape given the scales."""
        _, gain, f = self.spread(p)
        root = np.sqrt(w) / self.sigma
        c = np.linalg.lstsq(gain[:, None] * f * root[:, None], (self.v - p[-1]) * root, rcond=None)[0]
        return np.asarray(c, dtype=np.float64)

    def solve(self, start: FloatArray, robust: bool, first: FloatArray | None = None) -> "_Solution":
        """Gauss-Newton from log scales ``start`` [2 n]; ``first`` weighs the rows until the redescending weights take over."""
        n = self.n
        p0 = np.concatenate([start - np.repeat(start[[0, n]], n), [0.0, 0.0]])
        # the polynomial's interval is fixed by the start, with room, so that the basis does not move under the iteration
        self.u_max = 1.1 * float((self.q * np.exp(-p0[:n][self.which])).max())
        w = mask = np.ones(self.q.size) if first is None else first
        p, c = p0.copy(), self.shape_for(p0, w)
        free = np.concatenate([self.free, np.arange(2 * n + 2, 2 * n + 2 + c.size)])

        def cost(p: FloatArray, r: FloatArray) -> float:
            return float(np.sum(w * r**2) + np.sum(self.weight * (p - p0) ** 2))

        r, jac = self.rows(p, c)
        for step in range(_STEPS):
            if robust and step % 3 == 2:
                w = _weights(r, redescending=True) if step > 8 else mask * _weights(r[mask > 0], redescending=False, of=r)
            before = cost(p, r)
            g = jac.T @ (w * r)
            g[: p.size] -= self.weight * (p - p0)
            hess = jac.T @ (w[:, None] * jac)
            hess[np.arange(p.size), np.arange(p.size)] += self.weight
            move = np.zeros(g.size)
            move[free] = np.linalg.lstsq(hess[np.ix_(free, free)], g[free], rcond=None)[0]
            size = 1.0
            while size > 1e-4:
                p2 = p + np.clip(size * move[: p.size], -0.3, 0.3)
                c2 = self.shape_for(p2, w)
                r2, jac2 = self.rows(p2, c2)
                if cost(p2, r2) <= before:
                    break
                size /= 2
            else:
                if step > 12:
                    break
                continue
            moved = float(np.abs(p2 - p).max())
            p, c, r, jac = p2, c2, r2, jac2
            if moved < 1e-7 and step > (12 if robust else 3):
                break
        return _Solution(p, c, w, r, jac, self.u_max, float(np.sum(np.minimum(r**2, (3 * _HUBER) ** 2))))

    def result(self, solved: "_Solution") -> Scales:
        """Scales with covariance from a solution."""
        n, w, r = self.n, solved.w, solved.r
        size = solved.p.size + solved.c.size
        free = np.concatenate([self.free, np.arange(2 * n + 2, size)])
        used = max(1.0, float(w.sum()))
        inflation = max(1.0, float(np.sqrt(np.sum(w * r**2) / max(1.0, used - free.size))))
        # the information of the rows is that of independent readings, not of every thinned point, and no better than the residuals
        share = min(1.0, READINGS_PER_CURVE * n / self.q.size) / inflation**2
        hess = share * solved.jac.T @ (w[:, None] * solved.jac)
        hess[np.arange(2 * n + 2), np.arange(2 * n + 2)] += self.weight
        inverse = np.linalg.pinv(hess[np.ix_(free, free)], hermitian=True)
        scales = free < 2 * n
        covariance = np.zeros((2 * n, 2 * n))
        covariance[np.ix_(free[scales], free[scales])] = inverse[np.ix_(scales, scales)]
        misfit = np.array([np.sqrt(np.mean(r[self.which == i] ** 2)) for i in range(n)])
        return Scales(
            curves=self.curves,
            reference=0,
            flow=frozen(solved.p[:n]),
            value=frozen(solved.p[n : 2 * n]),
            covariance=frozen(covariance),
            misfit=frozen(misfit),
            inflation=inflation,
            shape=frozen(solved.c),
            u_max=solved.u_max,
            flow_unit=self.q0,
            value_unit=self.v0,
            offset=(float(solved.p[-2] * self.q0), float(solved.p[-1] * self.v0)),
        )


class _Solution(NamedTuple):
    p: FloatArray
    c: FloatArray
    w: FloatArray
    r: FloatArray
    jac: FloatArray
    u_max: float
    cost: float


def _weights(r: FloatArray, redescending: bool, of: FloatArray | None = None) -> FloatArray:
    """Huber weights, then Tukey's biweight, which gives stretches that follow another line no say at all.

    The scale is that of residuals ``r``; the weights are for ``of``, or for ``r`` itself.
    """
    scale = max(1.0, 1.4826 * float(np.median(np.abs(r))))
    x = r if of is None else of
    if redescending:
        return np.clip(1 - (x / (_TUKEY * scale)) ** 2, 0.0, None) ** 2
    return np.minimum(1.0, _HUBER * scale / np.maximum(np.abs(x), 1e-12))
