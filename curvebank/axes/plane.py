"""The plane of a panel: panel coordinates (u, v) to pixels and back, affine or projective.

``pixel = (o + u e1 + v e2) / (1 + g1 u + g2 v)`` with parameters ``[ox, oy, e1x, e1y, e2x, e2y]`` or the same and ``[g1, g2]``.
Lines of constant u and of constant v stay straight (a flat sheet seen by a scanner or a camera; Hartley and Zisserman,
*Multiple View Geometry*, ch. 2: a plane-to-plane map is a homography with eight degrees of freedom). Pixels are shifted
and scaled to about one inside, so that all parameters have like size.
"""

import numpy as np

from ..records import FloatArray


def pixels(theta: FloatArray, uv: FloatArray) -> FloatArray:
    """[n, 2] pixels of panel coordinates [n, 2]."""
    top = theta[0:2] + uv[:, :1] * theta[2:4] + uv[:, 1:] * theta[4:6]
    return top if len(theta) == 6 else top / _depth(theta, uv)[:, None]


def pixel_derivatives(theta: FloatArray, uv: FloatArray) -> tuple[FloatArray, FloatArray]:
    """d pixel / d theta [n, 2, p] and d pixel / d (u, v) [n, 2, 2]."""
    n, p = len(uv), len(theta)
    by_theta, by_uv = np.zeros((n, 2, p)), np.empty((n, 2, 2))
    depth = np.ones(n) if p == 6 else _depth(theta, uv)
    for k, weight in enumerate((1 / depth, uv[:, 0] / depth, uv[:, 1] / depth)):
        by_theta[:, 0, 2 * k] = by_theta[:, 1, 2 * k + 1] = weight
    at = pixels(theta, uv)
    g = np.zeros(2) if p == 6 else theta[6:8]
    for k in range(2):
        by_uv[:, :, k] = (theta[2 + 2 * k : 4 + 2 * k] - g[k] * at) / depth[:, None]
        if p == 8:
            by_theta[:, :, 6 + k] = -(uv[:, k] / depth)[:, None] * at
    return by_theta, by_uv


def coordinates(theta: FloatArray, at: FloatArray) -> FloatArray:
    """[n, 2] panel coordinates of pixels [n, 2]: the inverse of `pixels`, two linear equations a point."""
    g = np.zeros(2) if len(theta) == 6 else theta[6:8]
    a = theta[2:4] - g[0] * at
    b = theta[4:6] - g[1] * at
    r = at - theta[0:2]
    det = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
    return np.stack([(r[:, 0] * b[:, 1] - r[:, 1] * b[:, 0]) / det, (a[:, 0] * r[:, 1] - a[:, 1] * r[:, 0]) / det], -1)


def _depth(theta: FloatArray, uv: FloatArray) -> FloatArray:
    return 1.0 + uv @ theta[6:8]
