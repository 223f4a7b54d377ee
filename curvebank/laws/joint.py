"""One dimensionless shape fitted jointly to all curves of a family.

Curve i is V = V0 exp(h_i) f(Q / (Q0 exp(q_i))). The shape f is a polynomial shared by all curves; (q_i, h_i) are the log scales of
flow and value relative to one reference curve. What the scales say about diameters and speeds is judged in `curvebank.laws.labels`.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..errors import LawError
from ..records import FloatArray, frozen

POINTS_PER_CURVE = 32
READINGS_PER_CURVE = 8
"""Independent readings a curve: neighbouring pixels of one drawn line are one reading of the draughtsman's hand."""
_WEAK_PRIOR_SD = 0.5  # keeps the scales finite where a shape is nearly a power law; far wider than any published exponent allows
_HUBER = 2.0


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
    coefficients in t = 2 u / u_max - 1 with u = Q / (Q0 exp q).
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

    def curve_value(self, flow: npt.ArrayLike, q: float, h: float) -> FloatArray:
        """Value of the common shape at ``flow`` for log scales (q, h)."""
        u = np.asarray(flow, dtype=np.float64) / (self.flow_unit * np.exp(q))
        return self.value_unit * np.exp(h) * np.polynomial.legendre.legval(2 * u / self.u_max - 1, self.shape)


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
    curves: Sequence[FamilyCurve], start_flow: npt.ArrayLike, start_value: npt.ArrayLike, *, order: int = 5, robust: bool = True
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
        Weigh down stretches that leave the common shape, such as tails where two traces run into one line (Huber weights).

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
    thinned = [thin(c.flow, c.value) for c in curves]
    if any(v.max() <= 0 for _, v in thinned):
        raise LawError("A curve has no value above zero; its scale cannot be compared.")
    problem = _Problem(curves, thinned, order)
    starts = [np.concatenate([np.asarray(start_flow, dtype=np.float64), np.asarray(start_value, dtype=np.float64)]), problem.guess()]
    solved = [problem.solve(s - s[problem.reference_columns], robust) for s in starts]
    return problem.result(min(solved, key=lambda one: one[2]))


class _Problem:
    """Rows of the nonlinear least-squares problem; the reference is curve 0."""

    def __init__(self, curves: Sequence[FamilyCurve], thinned: list[tuple[FloatArray, FloatArray]], order: int):
        self.curves = tuple(curves)
        self.n = len(curves)
        self.which = np.concatenate([np.full(q.size, i) for i, (q, _) in enumerate(thinned)])
        self.q0 = float(thinned[0][0].max())
        self.v0 = float(np.abs(thinned[0][1]).max())
        self.q = np.concatenate([q for q, _ in thinned]) / self.q0
        self.v = np.concatenate([v for _, v in thinned]) / self.v0
        self.thinned = thinned
        sigma = np.array([c.sigma for c in curves]) / self.v0
        # a floor of 1e-4 of the largest value: no drawn line is better, and exact input must not divide by zero
        self.sigma = np.maximum(sigma, 1e-4)[self.which]
        self.order = order
        self.u_max = 1.0
        self.reference_columns = np.repeat([0, self.n], self.n)

    def guess(self) -> FloatArray:
        """Scales read off the curves alone: the value where each begins, the flow where it ends."""
        start = [v[np.argmin(q)] if v[np.argmin(q)] > 0 else v.max() for q, v in self.thinned]
        end = [q.max() for q, _ in self.thinned]
        return np.concatenate([np.log(np.array(end) / end[0]), np.log(np.array(start) / start[0])])

    def basis(self, u: FloatArray) -> FloatArray:
        return np.asarray(np.polynomial.legendre.legvander(2 * u / self.u_max - 1, self.order), dtype=np.float64)

    def rows(self, s: FloatArray, c: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Residuals / sigma and the Jacobian of the model over (q_1.., h_1.., c), each divided by sigma."""
        n, i = self.n, self.which
        u = self.q * np.exp(-s[:n][i])
        gain = np.exp(s[n:][i])
        f = self.basis(u)
        slope = np.polynomial.legendre.legval(2 * u / self.u_max - 1, np.polynomial.legendre.legder(c)) * 2 / self.u_max
        model = gain * (f @ c)
        jac = np.zeros((i.size, 2 * n + c.size))
        jac[np.arange(i.size), i] = -gain * u * slope
        jac[np.arange(i.size), n + i] = model
        jac[:, 2 * n :] = gain[:, None] * f
        return (self.v - model) / self.sigma, jac / self.sigma[:, None]

    def shape_for(self, s: FloatArray, w: FloatArray) -> FloatArray:
        i = self.which
        a = np.exp(s[self.n :][i])[:, None] * self.basis(self.q * np.exp(-s[: self.n][i])) / self.sigma[:, None]
        root = np.sqrt(w)
        return np.asarray(np.linalg.lstsq(a * root[:, None], self.v / self.sigma * root, rcond=None)[0], dtype=np.float64)

    def solve(self, s: FloatArray, robust: bool) -> tuple[FloatArray, FloatArray, float, FloatArray, FloatArray]:
        n = self.n
        # the polynomial's interval is fixed by the start, with room, so that the basis does not move under the iteration
        self.u_max = 1.1 * float((self.q * np.exp(-s[:n][self.which])).max())
        free = np.array([k for k in range(2 * n + self.order + 1) if k not in (0, n)])
        weak = np.zeros(2 * n + self.order + 1)
        weak[: 2 * n] = 1 / _WEAK_PRIOR_SD**2
        start = s.copy()
        w = np.ones(self.q.size)
        c = self.shape_for(s, w)

        def cost(s: FloatArray, r: FloatArray) -> float:
            return float(np.sum(w * r**2) + np.sum((s - start) ** 2) / _WEAK_PRIOR_SD**2)

        r, jac = self.rows(s, c)
        for step in range(40):
            if robust and step % 3 == 2:
                scale = max(1.0, 1.4826 * float(np.median(np.abs(r))))
                w = np.minimum(1.0, _HUBER * scale / np.maximum(np.abs(r), 1e-12))
            before = cost(s, r)
            g = jac.T @ (w * r)
            g[: 2 * n] -= (s - start) / _WEAK_PRIOR_SD**2
            hess = jac.T @ (w[:, None] * jac) + np.diag(weak)
            move = np.zeros(hess.shape[0])
            move[free] = np.linalg.lstsq(hess[np.ix_(free, free)], g[free], rcond=None)[0]
            size = 1.0
            while size > 1e-4:
                s2 = s + np.clip(size * move[: 2 * n], -0.3, 0.3)
                c2 = self.shape_for(s2, w)
                r2, jac2 = self.rows(s2, c2)
                if cost(s2, r2) <= before:
                    break
                size /= 2
            else:
                break
            moved = float(np.abs(s2 - s).max())
            s, c, r, jac = s2, c2, r2, jac2
            if moved < 1e-7 and step > 3:
                break
        return s, c, float(np.sum(np.minimum(r**2, (3 * _HUBER) ** 2))), w, np.array([self.u_max])

    def result(self, solved: tuple[FloatArray, FloatArray, float, FloatArray, FloatArray]) -> Scales:
        s, c, _, w, u_max = solved
        n = self.n
        self.u_max = float(u_max[0])
        r, jac = self.rows(s, c)
        free = np.array([k for k in range(2 * n + c.size) if k not in (0, n)])
        hess = jac.T @ (w[:, None] * jac)
        hess[np.arange(2 * n), np.arange(2 * n)] += 1e-12 + 1 / _WEAK_PRIOR_SD**2
        inverse = np.linalg.pinv(hess[np.ix_(free, free)], hermitian=True)
        dof = max(1.0, float(w.sum()) - free.size)
        inflation = max(1.0, float(np.sqrt(np.sum(w * r**2) / dof)))
        per_reading = self.q.size / (READINGS_PER_CURVE * n)
        covariance = np.zeros((2 * n, 2 * n))
        scales = free < 2 * n
        covariance[np.ix_(free[scales], free[scales])] = inverse[np.ix_(scales, scales)] * inflation**2 * max(1.0, per_reading)
        misfit = np.array([np.sqrt(np.mean(r[self.which == i] ** 2)) for i in range(n)])
        return Scales(
            curves=self.curves,
            reference=0,
            flow=frozen(s[:n]),
            value=frozen(s[n:]),
            covariance=frozen(covariance),
            misfit=frozen(misfit),
            inflation=inflation,
            shape=frozen(c),
            u_max=self.u_max,
            flow_unit=self.q0,
            value_unit=self.v0,
        )
