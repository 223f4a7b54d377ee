"""The bend of one direction from its valued lines: weighted least squares, robust over points and over whole lines.

A printed line is off its true place as a whole (drawn at whole pixels, or by hand), and its points scatter about it; both are estimated
from the lines themselves. So a long line is not taken for many independent readings, and the covariance stays honest (a mixed model;
the two variances by moments). How far the paper may bend is chosen by leaving lines out.
"""

from dataclasses import dataclass

import numpy as np

from ..records import FloatArray
from .solve import CLICK_SIGMA_PX
from .warp import REACH, Basis, powers

WORST_RMS_PX = 0.6
FEWEST_LINES = 3
CHOICES: tuple[tuple[Basis, float], ...] = (
    (Basis(1), 0.0),
    (Basis(2), 0.0),
    (Basis(3), 0.0),
    (Basis(0, 5), 0.3),
    (Basis(0, 8), 0.2),
    (Basis(0, 8), 1.0),
)
"""Bends tried, stiff to soft; for a net the expected second difference from field to field [px]."""
LEAST_GAIN = 0.85
"""A softer bend must bring left-out lines closer by this factor, and by `LEAST_GAIN_PX`."""
LEAST_GAIN_PX = 0.01
LEAST_LOOSE_PX = 0.12
"""Lines off by five times this may still be good ones: few lines fit one another too well to judge by."""
GOOD_PX = 0.06
"""Lines foretold this well need no softer bend."""
LINE_SIGMA_PX = 0.035
"""First guess of how far lines are off as a whole, worth `LINE_DOF` lines."""
LINE_DOF = 1.0
BEND_PX = 8.0
FEWEST_FOR_A_NET = 5
BOW_PX = 0.05
WAVY = 3.0
"""Points that scatter so many times their own sigma about a line say that it is not as straight as the bend makes it."""
ROUNDS = 5
FOLDS = 12


@dataclass(frozen=True, slots=True, eq=False)
class Line:
    """A printed line or tick of one direction.

    ``uv`` [n, 2] its points on the base plane with their ``sigma_px`` [n], ``c`` where it meets the marks, ``target`` the coordinate of
    the value it stands for, ``tick`` for a short one beside the axis, ``height`` its ink (0..255).
    """

    uv: FloatArray
    sigma_px: FloatArray
    c: float
    target: float = np.nan
    tick: bool = False
    height: float = 0.0


@dataclass(frozen=True, slots=True, eq=False)
class Bend:
    """The bend of one direction: ``coefficients`` and ``covariance`` in the terms of ``basis``; misses of the lines kept [px]."""

    basis: Basis
    coefficients: FloatArray
    covariance: FloatArray
    centre: FloatArray
    half: FloatArray
    lines: tuple[Line, ...]
    rms_px: float
    worst_px: float
    left_out_px: float
    line_sigma_px: float
    px: float

    def at(self, uv: FloatArray) -> FloatArray:
        return self.basis.terms(np.clip((uv - self.centre) / self.half, -REACH, REACH)) @ self.coefficients

    def sigma_at(self, uv: FloatArray) -> FloatArray:
        """Standard uncertainty [px]."""
        rows = self.basis.terms(np.clip((uv - self.centre) / self.half, -REACH, REACH))
        return np.sqrt(np.maximum(np.einsum("ni,ij,nj->n", rows, self.covariance, rows), 0.0)) * self.px


def fit(
    d: int,
    lines: list[Line],
    marks: tuple[FloatArray, FloatArray],
    centre: FloatArray,
    half: FloatArray,
    px: float,
    choices: tuple[tuple[Basis, float], ...] = CHOICES,
) -> Bend | None:
    """The bend that does best on lines it has not seen; None where the lines do not agree with each other.

    Parameters
    ----------
    d : int
        Direction, 0 flow or 1 values.
    marks : ([k, 2], [k])
        Places of the trusted marks on the base plane and the coordinates their values stand for.
    px : float
        Pixels of one unit of the coordinate.
    """
    best: tuple[float, _System] | None = None
    whole = sum(not line.tick for line in lines)
    for basis, soft in choices:
        need = FEWEST_FOR_A_NET if basis.cells else basis.degree + 2
        if best is not None and (len(lines) < need or (whole < need and basis.degree != 1)):
            continue
        system = _System(d, lines, marks, centre, half, px, basis, soft)
        score = system.left_out()
        if best is None or (score < LEAST_GAIN * best[0] and score < best[0] - LEAST_GAIN_PX):
            best = (score, system)
        if (best[0] < GOOD_PX or basis.degree == 3) and not best[1].structured():
            break
    if best is None:
        return None
    system = best[1]
    kept = system.line_weight > 0.3
    used = tuple(line for line, keep in zip(lines, kept, strict=True) if keep)
    if len(used) < max(2, 0.7 * len(lines)):
        return None
    miss = system.line_miss_px[kept]
    rms = float(np.sqrt(np.mean(miss**2)))
    if rms > WORST_RMS_PX:
        return None
    covariance = np.linalg.inv(system.information) / px**2
    worst = float(miss.max())
    return Bend(system.basis, system.coefficients / px, covariance, centre, half, used, rms, worst, best[0], system.line_sigma, px)


class _System:
    """The equations of all lines for one bend. Points stand in arrays [lines, places] padded to one length; units are px.

    With weights w of the points of a line, its points' information is S = sum w x x'; the common offset of variance L takes
    W^2 L / (1 + W L) m m' away (W = sum w, m the weighted mean row).
    """

    def __init__(
        self,
        d: int,
        lines: list[Line],
        marks: tuple[FloatArray, FloatArray],
        centre: FloatArray,
        half: FloatArray,
        px: float,
        basis: Basis,
        soft_px: float,
    ):
        self.basis, self.px = basis, px
        count = np.array([len(line.uv) for line in lines])
        self.there = np.arange(count.max()) < count[:, None]
        uv = np.zeros((*self.there.shape, 2)) + centre
        uv[self.there] = np.concatenate([line.uv for line in lines])
        sigma = np.ones(self.there.shape)
        sigma[self.there] = np.concatenate([line.sigma_px for line in lines])
        self.base_weight = self.there / np.maximum(sigma, 0.01) ** 2
        st = np.clip((uv - centre) / half, -REACH, REACH)
        self.rows = basis.terms(st.reshape(-1, 2)).reshape(*self.there.shape, -1)
        self.miss = (np.array([line.target for line in lines])[:, None] - uv[..., d]) * px
        self.target = np.array([line.target for line in lines])
        self.tick = np.array([line.tick for line in lines])
        if basis.cells:
            self.prior = basis.penalty() / soft_px**2
        else:
            # Ticks along one edge say nothing about the far side: bends of many pixels are not expected there.
            self.prior = np.diag([(i + j > 1) / BEND_PX**2 for i, j in powers(basis.degree)])
        self.mark_rows = basis.terms(np.clip((marks[0] - centre) / half, -REACH, REACH))
        self.mark_miss = (marks[1] - marks[0][:, d]) * px
        self.line_weight = np.ones(len(lines))
        self.point_weight = self.there.astype(np.float64)
        self.scale2, self.line_sigma = 1.0, LINE_SIGMA_PX
        self.coefficients = np.zeros(basis.size)
        mark_weight = np.full(len(self.mark_miss), CLICK_SIGMA_PX**-2)
        for turn in range(ROUNDS):
            self._gather(mark_weight)
            self.coefficients = np.linalg.solve(self.information, self.right)
            self._reweigh(turn)
            off = np.abs(self.mark_miss - self.mark_rows @ self.coefficients)
            mark_weight = np.minimum(1.0, 3 * CLICK_SIGMA_PX / np.maximum(off, 1e-9)) / CLICK_SIGMA_PX**2
        self._gather(mark_weight)

    def _gather(self, mark_weight: FloatArray) -> None:
        """Information and right side of each line, and their sums with marks and prior."""
        w = self.base_weight * self.point_weight / self.scale2
        total = w.sum(axis=1)
        wr = self.rows * w[..., None]
        s = np.swapaxes(wr, 1, 2) @ self.rows
        b = (wr * self.miss[..., None]).sum(axis=1)
        first, zero = wr.sum(axis=1), (w * self.miss).sum(axis=1)
        take = self.line_sigma**2 / (1 + total * self.line_sigma**2)
        trust = self.line_weight
        self.each = (s - take[:, None, None] * first[:, :, None] * first[:, None, :]) * trust[:, None, None]
        self.each_right = (b - (take * zero)[:, None] * first) * trust[:, None]
        self.common = self.prior + (self.mark_rows * mark_weight[:, None]).T @ self.mark_rows + 1e-9 * np.eye(self.basis.size)
        self.common_right = self.mark_rows.T @ (mark_weight * self.mark_miss)
        self.information = self.each.sum(axis=0) + self.common
        self.right = self.each_right.sum(axis=0) + self.common_right

    def _reweigh(self, turn: int) -> None:
        off = (self.miss - self.rows @ self.coefficients) * self.there
        w = self.base_weight * self.point_weight
        total = np.maximum(w.sum(axis=1), 1e-12)
        middle = _medians(off, self.there)
        about = (off - middle[:, None]) * self.there
        relative = np.abs(about) * np.sqrt(self.base_weight)
        # Scatter of points about their line against their own sigma, and how much neighbours along a line share.
        scale = max(1.4826 * float(np.median(relative[self.there])), 0.5)
        pair = self.there[:, 1:] & (relative[:, 1:] < 4 * scale) & (relative[:, :-1] < 4 * scale)
        z = about * np.sqrt(self.base_weight)
        r = float((z[:, 1:] * z[:, :-1])[pair].sum() / max(float((z[:, :-1] ** 2)[pair].sum()), 1e-12)) if pair.any() else 0.0
        r = float(np.clip(r, 0.0, 0.9))
        self.scale2 = scale**2 * (1 + r) / (1 - r)
        point = np.maximum(1 - (relative / (5 * scale)) ** 2, 0.0) ** 2 * self.there
        self.point_weight = np.where(point.sum(axis=1, keepdims=True) > 0, point, self.there)
        w = self.base_weight * self.point_weight
        total = np.maximum(w.sum(axis=1), 1e-12)
        mean = (w * off).sum(axis=1) / total
        self.line_miss_px = np.sqrt((w * off**2).sum(axis=1) / total)
        loose = max(1.4826 * float(np.median(np.abs(mean))), LEAST_LOOSE_PX)
        use = self.line_weight > 0.3
        inside = np.maximum(1 - (mean / (5 * loose)) ** 2, 0.0) ** 2
        self.line_weight = np.maximum(inside, 1e-3)
        if turn:
            kept = use & (self.line_weight > 0.3)
            freedom = max(kept.sum() - self._freedom(kept), 0.0)
            seen = float((mean[kept] ** 2 - self.scale2 / total[kept]).sum())
            self.line_sigma = min(float(np.sqrt((max(seen, 0.0) + LINE_DOF * LINE_SIGMA_PX**2) / (freedom + LINE_DOF))), WORST_RMS_PX)

    def _freedom(self, kept: np.ndarray) -> float:
        """Degrees of freedom that the line offsets lose to the bend: trace of the hat matrix over line means."""
        inverse = np.linalg.inv(self.information)
        return float(np.clip(np.einsum("ij,lji->l", inverse, self.each)[kept], 0, 1).sum())

    def structured(self) -> bool:
        """Whether what is left has a shape: neighbouring lines off the same way, or lines bowed along themselves."""
        if self.scale2 > WAVY**2 and float(np.median(self.line_miss_px)) > 0.5 * BOW_PX:
            return True
        w = self.base_weight * self.point_weight
        off = (self.miss - self.rows @ self.coefficients) * self.there
        mean = (w * off).sum(axis=1) / np.maximum(w.sum(axis=1), 1e-12)
        keep = np.flatnonzero((self.line_weight > 0.3) & ~self.tick)
        if len(keep) < 3:
            return False
        order = keep[np.argsort(self.target[keep], kind="stable")]
        m = mean[order]
        pairs = float((m[1:] * m[:-1]).sum() / max(float((m**2).sum()), 1e-12))
        n = self.there.sum(axis=1)
        bows = []
        for a, b in ((0.0, 0.34), (0.33, 0.67), (0.66, 1.0)):
            i = np.arange(self.there.shape[1])
            part = w * ((i >= a * n[:, None]) & (i < b * n[:, None]))
            bows.append((part * off).sum(axis=1) / np.maximum(part.sum(axis=1), 1e-12) - mean)
        bow = float(np.sqrt(np.mean(np.array(bows)[:, keep] ** 2)))
        return pairs > 0.3 or bow > BOW_PX

    def left_out(self) -> float:
        """Miss of lines left out in turn [px rms]. The worst tenth is not counted: a line that is none must not decide."""
        n = len(self.line_weight)
        fold = np.arange(n) % min(n, FOLDS)
        misses = np.zeros(n)
        w = self.base_weight * self.point_weight
        for k in range(fold.max() + 1):
            out = fold == k
            information, right = self.information - self.each[out].sum(axis=0), self.right - self.each_right[out].sum(axis=0)
            off = self.miss[out] - self.rows[out] @ np.linalg.solve(information, right)
            misses[out] = np.sqrt((off**2 * w[out]).sum(axis=1) / np.maximum(w[out].sum(axis=1), 1e-12))
        return float(np.sqrt(np.mean(np.sort(misses)[: max(n - n // 10, 1)] ** 2)))


def _medians(values: FloatArray, there: np.ndarray) -> FloatArray:
    """Median of each row's present values [lines]."""
    order = np.sort(np.where(there, values, np.inf), axis=1)
    n, i = there.sum(axis=1), np.arange(len(values))
    return 0.5 * (order[i, (n - 1) // 2] + order[i, n // 2])
