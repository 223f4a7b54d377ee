"""The cross profile of a drawn line: a box of one width, blurred, and how to measure it."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.special import ndtr

from ..records import FloatArray

WIDTHS = np.array([0.4, 0.55, 0.7, 0.85, 1.0, 1.15, 1.3, 1.5, 1.8])
BLURS = np.array([0.45, 0.65, 0.85, 1.1, 1.4, 1.8, 2.4])
"""Widths (in parts of a first guess) and blurs [px] tried for a line's cross profile."""


ENOUGH = 8000
"""So many readings measure a profile; of more, every so-manyth is taken."""
Reals = npt.NDArray[np.floating[Any]]


@dataclass(frozen=True, slots=True, eq=False)
class Shape:
    """Cross profile of a drawn line: a box of ``width`` px blurred by a Gaussian of ``blur`` px, ``height`` in ink.

    ``noise`` is the scatter of single pixels about it.
    """

    width: float
    blur: float
    noise: float
    height: float

    def value(self, d: FloatArray) -> FloatArray:
        """Profile at distance ``d`` [px] from the middle, 1 at the middle."""
        return (ndtr((d + self.width / 2) / self.blur) - ndtr((d - self.width / 2) / self.blur)) / self._peak

    def slope(self, d: FloatArray) -> FloatArray:
        """Derivative of the profile [1/px]."""
        a, b = (d + self.width / 2) / self.blur, (d - self.width / 2) / self.blur
        return (np.exp(-0.5 * a * a) - np.exp(-0.5 * b * b)) / (np.sqrt(2 * np.pi) * self.blur * self._peak)

    @property
    def _peak(self) -> float:
        return max(float(2 * ndtr(self.width / 2 / self.blur) - 1), 1e-6)

    @property
    def half_extent(self) -> float:
        """Distance [px] from the middle beyond which there is practically no ink."""
        return self.width / 2 + 2.2 * self.blur


def shape_of(d: Reals, ink: Reals, width_px: float, sampling: float = 0.0) -> Shape:
    """Line width and blur from ink at distances ``d`` [px] from the middle (both flat), by the median profile.

    ``width_px`` is a first guess. ``sampling`` is the variance [px^2] that resampling has added to the blur.
    """
    every = max(len(d) // ENOUGH, 1)
    d, ink = d[::every], ink[::every]
    bins = np.rint(d * 3).astype(np.int64)
    low = int(bins.min())
    bins -= low
    # Medians of all bins at once: counted by bin and ink step, the middle of each bin's count.
    count = int(bins.max()) + 1
    table = np.bincount(bins * 256 + np.rint(255.0 * ink).astype(np.int64), minlength=256 * count).reshape(count, 256)
    sizes = table.sum(axis=1)
    held = np.flatnonzero(sizes)
    at = (held + low) / 3.0
    profile = np.argmax(np.cumsum(table[held], axis=1) > (sizes[held] // 2)[:, None], axis=1) / 255.0
    width = np.repeat(np.clip(width_px * WIDTHS, 0.6, 30), len(BLURS))[:, None]
    blur = np.tile(np.sqrt(BLURS**2 + sampling), len(WIDTHS))[:, None]
    edge = 0.5 * width / blur
    u = at / blur
    g = (ndtr(u + edge) - ndtr(u - edge)) / np.maximum(2 * ndtr(edge) - 1, 1e-6)
    g -= g.mean(axis=1, keepdims=True)
    heights = (g @ profile) / np.maximum((g * g).sum(axis=1), 1e-12)
    miss = np.where(heights > 0.02, np.abs(profile - profile.mean() - heights[:, None] * g).sum(axis=1), np.inf)
    k = int(np.argmin(miss))
    if not np.isfinite(miss[k]):
        return Shape(max(width_px, 1.0), 0.9, 0.05, 1.0)
    return Shape(float(width[k, 0]), float(BLURS[k % len(BLURS)]), 0.05, float(heights[k]))
