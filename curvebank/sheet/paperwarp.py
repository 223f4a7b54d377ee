"""How one scan of a paper lies on another: a plane (projective) and what the paper did in between (a smooth warp, tensor B-splines)."""

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.interpolate import BSpline

Floats = npt.NDArray[np.float64]

DEGREE = 3
PIECES = (0, 1, 2, 3, 5, 8)
"""Pieces a side of the warp that are tried; 0 is the plane alone."""
STIFFNESS = 1e-4
"""Weight of the second differences of the warp's coefficients, in parts of the mean information per coefficient."""
WORTH = 0.95
"""A freer warp must lower the error on blocks left out to this share."""


@dataclass(frozen=True, slots=True, eq=False)
class PaperWarp:
    """A map of points [n, 2] px from one scan to another.

    ``plane`` [3, 3] is projective; ``low`` and ``high`` [2] the box of the warp (held constant beyond
    it); ``pieces`` (across, down) of a cubic tensor spline with ``coefficients`` [m, 2] px, m = 0 for none.
    """

    plane: Floats
    low: Floats = field(default_factory=lambda: np.zeros(2))
    high: Floats = field(default_factory=lambda: np.ones(2))
    pieces: tuple[int, int] = (0, 0)
    coefficients: Floats = field(default_factory=lambda: np.zeros((0, 2)))

    def __call__(self, points: Any) -> Floats:
        """The points on the other scan."""
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        return projected(self.plane, xy) + self.bend(xy)

    def bend(self, points: Floats) -> Floats:
        """What the paper adds to the plane [n, 2]."""
        if not len(self.coefficients):
            return np.zeros((len(points), 2))
        return np.asarray(basis(points, self.low, self.high, self.pieces) @ self.coefficients)

    def jacobian(self, points: Any) -> Floats:
        """Derivatives [n, 2, 2] of the map by central differences over 2 px."""
        xy = np.asarray(points, dtype=np.float64).reshape(-1, 2)
        across = (self(xy + [1.0, 0.0]) - self(xy - [1.0, 0.0])) / 2
        down = (self(xy + [0.0, 1.0]) - self(xy - [0.0, 1.0])) / 2
        return np.stack([across, down], axis=2)

    def grid(self, width: int, height: int, step: int = 8) -> tuple[npt.NDArray[np.float32], npt.NDArray[np.float32]]:
        """The map at every pixel of a page as (x, y) arrays [h, w]: the plane exactly, the warp from every ``step``-th pixel."""
        import cv2

        x, y = np.arange(width, dtype=np.float64), np.arange(height, dtype=np.float64)[:, None]
        p = self.plane
        w = p[2, 0] * x + p[2, 1] * y + p[2, 2]
        out = [((p[i, 0] * x + p[i, 1] * y + p[i, 2]) / w).astype(np.float32) for i in (0, 1)]
        if len(self.coefficients):
            columns, rows = width // step + 2, height // step + 2
            coarse = np.stack(np.meshgrid(np.arange(columns) * step, np.arange(rows) * step), axis=-1).reshape(-1, 2).astype(np.float64)
            bent = self.bend(coarse).reshape(rows, columns, 2).astype(np.float32)
            affine = np.array([[1 / step, 0, 0], [0, 1 / step, 0]])
            flags = cv2.INTER_LINEAR | cv2.WARP_INVERSE_MAP
            fine = cv2.warpAffine(bent, affine, (width, height), flags=flags, borderMode=cv2.BORDER_REPLICATE)
            out = [o + fine[..., i] for i, o in enumerate(out)]
        return out[0], out[1]


def projected(plane: Floats, points: Floats) -> Floats:
    """Points [n, 2] under a projective map [3, 3]."""
    q = points @ plane[:, :2].T + plane[:, 2]
    return np.asarray(q[:, :2] / q[:, 2:])


def basis(points: Floats, low: Floats, high: Floats, pieces: tuple[int, int]) -> Floats:
    """Values [n, m] of the tensor B-splines; points beyond the box are taken at its edge."""
    sides = []
    for k in (0, 1):
        t = np.clip((points[:, k] - low[k]) / max(high[k] - low[k], 1e-9), 0.0, 1.0)
        knots = np.r_[np.zeros(DEGREE), np.linspace(0, 1, pieces[k] + 1), np.ones(DEGREE)]
        sides.append(BSpline.design_matrix(t, knots, DEGREE).toarray())
    return np.asarray((sides[0][:, :, None] * sides[1][:, None, :]).reshape(len(points), -1))


def _roughness(pieces: tuple[int, int]) -> Floats:
    """Second differences of the coefficients along both sides, as rows."""
    n = [p + DEGREE for p in pieces]
    rows = []
    for k in (0, 1):
        d = np.diff(np.eye(n[k]), 2, axis=0)
        rows.append(np.kron(d, np.eye(n[1])) if k == 0 else np.kron(np.eye(n[0]), d))
    return np.concatenate(rows)


def fit_plane(start: Floats, points: Floats, targets: Floats, white: Floats, weight: Floats, *, affine: bool = False) -> Floats:
    """Refine a projective (or affine) map by Gauss-Newton on whitened misses: ``white`` [n, 2, 2], ``weight`` [n]."""
    middle, size = points.mean(axis=0), max(float(np.ptp(points, axis=0).max()), 1.0)
    to = np.array([[1 / size, 0, -middle[0] / size], [0, 1 / size, -middle[1] / size], [0, 0, 1]])
    h = start @ np.linalg.inv(to)
    h = h / h[2, 2]
    u = np.c_[projected(to, points), np.ones(len(points))]
    free = 6 if affine else 8
    if affine:
        h[2] = [0, 0, 1]
    root = np.sqrt(weight)[:, None]
    for _ in range(6):
        q = u @ h.T
        at = q[:, :2] / q[:, 2:]
        rows = np.zeros((len(points), 2, 8))
        rows[:, 0, 0:3] = rows[:, 1, 3:6] = u / q[:, 2:]
        rows[:, :, 6:8] = -at[:, :, None] * (u[:, None, :2] / q[:, 2:, None])
        lhs = (np.einsum("nij,njk->nik", white, rows[:, :, :free]) * root[..., None]).reshape(-1, free)
        rhs = (np.einsum("nij,nj->ni", white, targets - at) * root).ravel()
        step = np.linalg.lstsq(lhs, rhs, rcond=1e-12)[0]
        h = h + np.r_[step, np.zeros(9 - free)].reshape(3, 3)
    return np.asarray(h @ to)


def fit_bend(
    plane: Floats, low: Floats, high: Floats, pieces: int, points: Floats, targets: Floats, white: Floats, weight: Floats
) -> PaperWarp:
    """The warp over a plane that is held: penalised least squares on whitened misses."""
    if pieces == 0:
        return PaperWarp(plane, low, high)
    ratio = float((high[0] - low[0]) / max(high[1] - low[1], 1e-9))
    sides = (max(round(pieces * min(ratio, 1.0)), 1), max(round(pieces * min(1 / ratio, 1.0)), 1))
    values = basis(points, low, high, sides)
    m = values.shape[1]
    root = np.sqrt(weight)[:, None]
    lhs = np.einsum("nij,nk->nikj", white * root[..., None], values).reshape(2 * len(points), 2 * m)
    rhs = (np.einsum("nij,nj->ni", white, targets - projected(plane, points)) * root).ravel()
    normal = lhs.T @ lhs
    rough = np.kron(_roughness(sides).T @ _roughness(sides), np.eye(2))
    normal += STIFFNESS * np.trace(normal) / (2 * m) * rough + 1e-9 * np.trace(normal) / (2 * m) * np.eye(2 * m)
    solved = np.linalg.solve(normal, lhs.T @ rhs)
    return PaperWarp(plane, low, high, sides, solved.reshape(m, 2))


def fit(
    start: Floats, low: Floats, high: Floats, points: Floats, targets: Floats, white: Floats, *, pieces: int | None = None, rounds: int = 4
) -> tuple[PaperWarp, Floats]:
    """Plane and warp by robust least squares (Tukey), the warp's freedom chosen by leaving every fourth block out, in four turns.

    ``white`` [n, 2, 2] whitens a miss in target pixels to units of its standard uncertainty. Returns the map and the robust weights [n].
    """
    weight = np.ones(len(points))
    plane = start
    for _ in range(rounds):
        plane = fit_plane(plane, points, targets, white, weight)
        weight = _tukey(_misses(PaperWarp(plane), points, targets, white), 8.0)
    if pieces is None:
        pieces = _chosen(plane, low, high, points, targets, white)
    warp = fit_bend(plane, low, high, pieces, points, targets, white, weight)
    for _ in range(rounds):
        weight = _tukey(_misses(warp, points, targets, white), 5.0)
        warp = fit_bend(plane, low, high, pieces, points, targets, white, weight)
    return warp, weight


def _misses(warp: PaperWarp, points: Floats, targets: Floats, white: Floats) -> Floats:
    """Whitened length [n] of each miss."""
    return np.asarray(np.hypot(*np.einsum("nij,nj->ni", white, targets - warp(points)).T))


def _tukey(miss: Floats, cut: float) -> Floats:
    scale = max(1.4826 * float(np.median(miss)) / 1.1774, 0.3)  # the median length of a pair of unit normals is 1.1774
    return np.asarray(np.maximum(1 - (miss / (cut * scale)) ** 2, 0.0) ** 2)


def _chosen(plane: Floats, low: Floats, high: Floats, points: Floats, targets: Floats, white: Floats) -> int:
    """Pieces of the warp with which blocks left out are met best, freer ones only where they are clearly worth it."""
    # Neighbours go out together: whole patches of the page, so that a free warp cannot cheat by following its neighbours' noise.
    cells = np.floor((points - low) / np.maximum(high - low, 1e-9) * 6).astype(int)
    turn = (cells[:, 0] + 2 * cells[:, 1]) % 4
    best, best_error = 0, np.inf
    for pieces in PIECES:
        if 2 * (pieces + DEGREE) ** 2 > len(points):
            break
        missed = []
        for k in range(4):
            out = turn == k
            if not out.any() or out.all():
                continue
            kept = ~out
            weight = np.ones(int(kept.sum()))
            warp = fit_bend(plane, low, high, pieces, points[kept], targets[kept], white[kept], weight)
            weight = _tukey(_misses(warp, points[kept], targets[kept], white[kept]), 5.0)
            warp = fit_bend(plane, low, high, pieces, points[kept], targets[kept], white[kept], weight)
            missed.append(_misses(warp, points[out], targets[out], white[out]))
        if not missed:
            continue
        # The median withstands blocks that matched something else; the upper part shows where a stiff warp does not reach.
        every = np.concatenate(missed)
        error = float(np.mean(np.percentile(every, [50, 70, 85])))
        if error < WORTH * best_error:
            best, best_error = pieces, error
    return best
