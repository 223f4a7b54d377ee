"""A low-order bend of the panel plane: what curled, stretched or folded paper does beyond a flat sheet.

``c_d = base_d + terms(u, v) a_d`` for each bent direction d, terms 1, s, t, s^2, s t, ... to a total degree in s, t = base coordinates
scaled to [-1, 1] over the measured area. Beyond it the bend stays as at the border: a polynomial is not continued.
"""

from dataclasses import dataclass

import numpy as np

from ..records import FloatArray

REACH = 1.05


@dataclass(frozen=True, slots=True, eq=False)
class Warp:
    """Bend of one direction: coefficients are ``parameters[first : first + size]`` of the map."""

    degree: int
    first: int
    centre: FloatArray
    half: FloatArray

    @property
    def size(self) -> int:
        return (self.degree + 1) * (self.degree + 2) // 2

    def terms(self, uv: FloatArray) -> FloatArray:
        """[n, size]."""
        return terms(self._scaled(uv)[0], self.degree)

    def slopes(self, uv: FloatArray) -> FloatArray:
        """d terms / d (u, v) [n, size, 2]; zero beyond the measured area."""
        st, free = self._scaled(uv)
        out = np.zeros((len(uv), self.size, 2))
        for k, (i, j) in enumerate(powers(self.degree)):
            if i:
                out[:, k, 0] = i * st[:, 0] ** (i - 1) * st[:, 1] ** j
            if j:
                out[:, k, 1] = j * st[:, 0] ** i * st[:, 1] ** (j - 1)
        return out * (free / self.half)[:, None, :]

    def _scaled(self, uv: FloatArray) -> tuple[FloatArray, np.ndarray]:
        st = (uv - self.centre) / self.half
        return np.clip(st, -REACH, REACH), np.abs(st) <= REACH


def powers(degree: int) -> list[tuple[int, int]]:
    """Exponent pairs of s and t, lowest total degree first."""
    return [(n - j, j) for n in range(degree + 1) for j in range(n + 1)]


def terms(st: FloatArray, degree: int) -> FloatArray:
    """Monomials of s and t [n, size]."""
    return np.stack([st[:, 0] ** i * st[:, 1] ** j for i, j in powers(degree)], -1)
