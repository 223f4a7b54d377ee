"""The Gaussian model of a family's scales under a set of labels: priors on exponents, marginal likelihood, exponents measured."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..records import FloatArray
from .joint import Scales


@dataclass(frozen=True, kw_only=True, slots=True)
class Prior:
    """What is known of exponents before the chart is seen: mean and standard deviation, drift with ln of the ratio, discrepancy a curve."""

    flow: float
    flow_sd: float
    value: float
    value_sd: float
    flow_drift_sd: float = 0.0
    value_drift_sd: float = 0.0
    flow_discrepancy: float = 0.005
    value_discrepancy: float = 0.004


TRIM_PRIOR = {
    "head": Prior(flow=1.2, flow_sd=0.25, value=2.15, value_sd=0.16, flow_drift_sd=0.5, value_drift_sd=0.5),
    "power": Prior(flow=1.2, flow_sd=0.25, value=3.3, value_sd=0.35, flow_drift_sd=0.5, value_drift_sd=0.7, value_discrepancy=0.008),
    "efficiency": Prior(flow=1.2, flow_sd=0.3, value=0.2, value_sd=0.2, flow_drift_sd=0.5, value_drift_sd=0.5, value_discrepancy=0.01),
    "npshr": Prior(
        flow=0.5, flow_sd=0.6, value=0.2, value_sd=0.6, flow_drift_sd=1.0, value_drift_sd=1.0, flow_discrepancy=0.03, value_discrepancy=0.03
    ),
}
"""What trims are known to do: published rules spread the head factor of r = 0.857 over 0.63 to 0.735.

Means and widths were tried on simulated families."""

SPEED_PRIOR = {
    "head": Prior(flow=1.0, flow_sd=0.02, value=2.0, value_sd=0.03, flow_discrepancy=0.008, value_discrepancy=0.008),
    "power": Prior(flow=1.0, flow_sd=0.02, value=3.0, value_sd=0.06, flow_discrepancy=0.008, value_discrepancy=0.01),
    "efficiency": Prior(flow=1.0, flow_sd=0.01, value=0.03, value_sd=0.05, flow_discrepancy=0.006, value_discrepancy=0.01),
    "npshr": Prior(flow=1.0, flow_sd=0.02, value=1.7, value_sd=0.25, flow_discrepancy=0.02, value_discrepancy=0.02),
}
"""Speed: exponents are known (White ch. 11; ISO 9906 for NPSHr 1.3 to 2)."""

_BEND_REACH = 0.35
"""Exponents drift no further than over this log ratio, so that a label typed ten times too large is not excused by drift."""


class LabelModel:
    """Gaussian model of the scales under a set of labels."""

    def __init__(self, scales: Scales, trim: Prior | None, speed: Prior | None):
        self.n = n = len(scales.curves)
        self.keep = np.array([k for k in range(2 * n) if k not in (0, n)])
        self.value = scales.value
        self.data = np.concatenate([scales.flow, scales.value])[self.keep]
        difference = np.eye(2 * n)
        difference[:n, 0] -= 1
        difference[n:, n] -= 1
        self.difference = difference[self.keep]
        self.fit_covariance = scales.covariance[np.ix_(self.keep, self.keep)]
        self.priors = [p for p in (trim, speed) if p is not None]
        d = np.concatenate(
            [
                np.full(n, np.sqrt(np.mean([p.flow_discrepancy**2 for p in self.priors]))),
                np.full(n, np.sqrt(np.mean([p.value_discrepancy**2 for p in self.priors]))),
            ]
        )
        self.base = self.fit_covariance + self.difference @ np.diag(d**2) @ self.difference.T

    def moments(self, labels: Sequence[FloatArray]) -> tuple[FloatArray, FloatArray]:
        """Mean [..., m] and covariance [..., m, m] of the relative scales under log labels [..., n], one array for each prior."""
        shape, n = labels[0].shape[:-1], self.n
        mean, cov = np.zeros((*shape, 2 * n)), np.zeros((*shape, 2 * n, 2 * n))
        for p, x in zip(self.priors, labels, strict=True):
            none = np.zeros_like(x)
            f, v = np.concatenate([x, none], axis=-1), np.concatenate([none, x], axis=-1)
            middle = x - np.median(x, axis=-1, keepdims=True)
            bend = middle * np.clip(middle, -_BEND_REACH, _BEND_REACH)
            fb, vb = np.concatenate([bend, none], axis=-1), np.concatenate([none, bend], axis=-1)
            mean += p.flow * f + p.value * v
            for column, sd in ((f, p.flow_sd), (v, p.value_sd), (fb, p.flow_drift_sd), (vb, p.value_drift_sd)):
                cov += sd**2 * column[..., :, None] * column[..., None, :]
        return mean @ self.difference.T, self.base + self.difference @ cov @ self.difference.T

    def score(self, labels: Sequence[FloatArray]) -> FloatArray:
        """Log likelihood up to a constant, for every leading index of the labels."""
        mean, cov = self.moments(labels)
        factor = np.linalg.cholesky(cov)
        z = np.linalg.solve(factor, (self.data - mean)[..., None])[..., 0]
        return -0.5 * np.sum(z**2, axis=-1) - np.log(np.diagonal(factor, axis1=-2, axis2=-1)).sum(axis=-1)

    def distance(self, labels: Sequence[FloatArray], displaced: tuple[int, float] | None = None) -> float:
        """Mahalanobis distance squared of the data under these labels."""
        mean, cov = self.moments(labels)
        r = self.data - mean
        if displaced is not None:
            r = r - self.difference[:, displaced[0]] * displaced[1]
        return float(r @ np.linalg.solve(cov, r))

    def displacement(self, labels: Sequence[FloatArray], column: int) -> tuple[float, float, float]:
        """Best shift of one scale (column of q, h stacked), its standard deviation and the log likelihood gained; closed form."""
        mean, cov = self.moments(labels)
        j = self.difference[:, column]
        weight = np.linalg.solve(cov, j)
        information = float(j @ weight)
        pull = float(weight @ (self.data - mean))
        return pull / information, information**-0.5, 0.5 * pull**2 / information

    def information(self, labels: Sequence[FloatArray], which: int, curve: int) -> float:
        """Fisher information on a log error of one label."""
        _, cov = self.moments(labels)
        p = self.priors[which]
        j = p.flow * self.difference[:, curve] + p.value * self.difference[:, self.n + curve]
        return float(j @ np.linalg.solve(cov, j))

    def exponents(self, labels: Sequence[FloatArray]) -> list[tuple[float, float, float, float]]:
        """Flow and value exponent with standard deviations by generalised least squares, priors left out."""
        n, columns = self.n, []
        for x in labels:
            columns += [np.concatenate([x, np.zeros(n)]), np.concatenate([np.zeros(n), x])]
        a = self.difference @ np.array(columns).T
        white = np.linalg.cholesky(self.base)
        aw, yw = np.linalg.solve(white, a), np.linalg.solve(white, self.data)
        cov = np.linalg.pinv(aw.T @ aw, hermitian=True)
        e, s = cov @ aw.T @ yw, np.sqrt(np.diag(cov))
        return [(float(e[k]), float(s[k]), float(e[k + 1]), float(s[k + 1])) for k in range(0, len(columns), 2)]
