"""Weights that let a few outlying points (a blot, a crossing line) not bend the fit.

Points within 4 robust standard deviations keep weight 1 exactly, so clean data give the plain least-squares answer;
further out the weight falls as 4 / size (Huber 1964, doi:10.1214/aoms/1177703732).
"""

import numpy as np

from ..records import FloatArray
from .solver import least_squares

KEEP_SIGMAS = 4.0
FEWEST_POINTS = 12


def robust_weights(columns: FloatArray, v: FloatArray, s: FloatArray) -> FloatArray:
    """Square roots of the weights [n], 1 for ordinary points. Few points are all kept: none can be called an outlier."""
    n, k = columns.shape
    ones = np.ones(n)
    if n < max(FEWEST_POINTS, 3 * k):
        return ones
    weight = ones
    for _ in range(8):
        size = np.abs(least_squares(columns, v, weight / s).residuals) / s
        scale = 1.4826 * float(np.median(size)) * np.sqrt(n / max(n - k, 1))
        if scale <= 0:
            return ones
        new = np.minimum(1.0, KEEP_SIGMAS * scale / np.maximum(size, 1e-300)) ** 0.5
        if np.abs(new - weight).max() < 1e-4:
            break
        weight = new
    return weight
