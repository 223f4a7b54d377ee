"""The bend of the panel plane: what curled, stretched or folded paper does beyond a flat sheet.

``c_d = base_d + terms(u, v) a_d`` for each bent direction d, with s, t = base coordinates scaled to [-1, 1] over the measured area. The
terms are either the monomials of s and t to a total degree, or products of cubic B-splines on a regular net (held smooth by a penalty on
their second differences: Eilers and Marx 1996, doi:10.1214/ss/1038425655). Beyond the area the bend stays as at the border.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from ..records import FloatArray

REACH = 1.05
FREE_DEGREE = 2


@dataclass(frozen=True, slots=True)
class Basis:
    """Monomials to ``degree``, or, where ``cells`` is not 0, tensor B-splines over ``cells`` x ``cells`` fields."""

    degree: int
    cells: int = 0

    @property
    def size(self) -> int:
        return (self.cells + 3) ** 2 if self.cells else (self.degree + 1) * (self.degree + 2) // 2

    @property
    def name(self) -> str:
        return f"a smooth net of {self.cells} x {self.cells} fields" if self.cells else f"degree {self.degree}"

    def terms(self, st: FloatArray) -> FloatArray:
        """[n, size]."""
        if not self.cells:
            return terms(st, self.degree)
        a, b = (_splines(st[:, k], self.cells)[0] for k in (0, 1))
        return (a[:, :, None] * b[:, None, :]).reshape(len(st), -1)

    def slopes(self, st: FloatArray) -> FloatArray:
        """d terms / d (s, t) [n, size, 2]."""
        out = np.zeros((len(st), self.size, 2))
        if self.cells:
            (a, da), (b, db) = (_splines(st[:, k], self.cells) for k in (0, 1))
            out[..., 0] = (da[:, :, None] * b[:, None, :]).reshape(len(st), -1)
            out[..., 1] = (a[:, :, None] * db[:, None, :]).reshape(len(st), -1)
            return out
        for k, (i, j) in enumerate(powers(self.degree)):
            if i:
                out[:, k, 0] = i * st[:, 0] ** (i - 1) * st[:, 1] ** j
            if j:
                out[:, k, 1] = j * st[:, 0] ** i * st[:, 1] ** (j - 1)
        return out

    def penalty(self) -> FloatArray:
        """Sum of the squared second differences of the net: zero for a parabola."""
        if not self.cells:
            return np.zeros((self.size, self.size))
        return _penalty(self)


@lru_cache(maxsize=8)
def _penalty(net: Basis) -> FloatArray:
    n = net.cells + 3
    first, second = np.diff(np.eye(n), axis=0), np.diff(np.eye(n), 2, axis=0)
    one, two, eye = first.T @ first, second.T @ second, np.eye(n)
    bending = np.kron(two, eye) + np.kron(eye, two) + 2 * np.kron(one, one)
    # What a parabola can say is free: the net has only to add what is local.
    side = np.linspace(-REACH, REACH, 4 * n)
    st = np.stack([np.repeat(side, 4 * n), np.tile(side, 4 * n)], -1)
    free = np.linalg.lstsq(net.terms(st), terms(st, FREE_DEGREE), rcond=None)[0]
    q = np.linalg.qr(free)[0]
    rest = np.eye(n * n) - q @ q.T
    return np.asarray(rest @ bending @ rest)


@dataclass(frozen=True, slots=True, eq=False)
class Warp:
    """Bend of one direction: coefficients are ``parameters[first : first + size]`` of the map."""

    basis: Basis
    first: int
    centre: FloatArray
    half: FloatArray

    @property
    def size(self) -> int:
        return self.basis.size

    def terms(self, uv: FloatArray) -> FloatArray:
        """[n, size]."""
        return self.basis.terms(self._scaled(uv)[0])

    def slopes(self, uv: FloatArray) -> FloatArray:
        """d terms / d (u, v) [n, size, 2]; zero beyond the measured area."""
        st, free = self._scaled(uv)
        return self.basis.slopes(st) * (free / self.half)[:, None, :]

    def _scaled(self, uv: FloatArray) -> tuple[FloatArray, np.ndarray]:
        st = (uv - self.centre) / self.half
        return np.clip(st, -REACH, REACH), np.abs(st) <= REACH


def _splines(s: FloatArray, cells: int) -> tuple[FloatArray, FloatArray]:
    """Uniform cubic B-splines over [-REACH, REACH] and their slopes, [n, cells + 3] each."""
    x = (s + REACH) / (2 * REACH) * cells
    cell = np.clip(np.floor(x), 0, cells - 1).astype(np.intp)
    f = (x - cell)[:, None]
    value = np.concatenate([(1 - f) ** 3, 3 * f**3 - 6 * f**2 + 4, -3 * f**3 + 3 * f**2 + 3 * f + 1, f**3], axis=1) / 6
    slope = np.concatenate([-((1 - f) ** 2), 3 * f**2 - 4 * f, -3 * f**2 + 2 * f + 1, f**2], axis=1) / 2 * cells / (2 * REACH)
    out, by_s = np.zeros((len(s), cells + 3)), np.zeros((len(s), cells + 3))
    at = cell[:, None] + np.arange(4)
    np.put_along_axis(out, at, value, axis=1)
    np.put_along_axis(by_s, at, slope, axis=1)
    return out, by_s


def powers(degree: int) -> list[tuple[int, int]]:
    """Exponent pairs of s and t, lowest total degree first."""
    return [(n - j, j) for n in range(degree + 1) for j in range(n + 1)]


def terms(st: FloatArray, degree: int) -> FloatArray:
    """Monomials of s and t [n, size]."""
    return np.stack([st[:, 0] ** i * st[:, 1] ** j for i, j in powers(degree)], -1)
