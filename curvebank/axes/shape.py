"""The panel plane from the printed lines alone: two families of lines make it square, the marks then only say what the values are.

Lines of one family on a flat sheet meet in a vanishing point: for x = x_k + m_k y the slope m is linear in x_k. Both points give the
line at infinity, and sending it there makes each family parallel and evenly spaced where it is evenly printed (Hartley and Zisserman,
*Multiple View Geometry*, ch. 2 and 8). A mark with a wrong value has no part in it.
"""

import numpy as np

from ..records import FloatArray

FEWEST = 3
WAVE = 1.5e-3
"""Waviness of a printed line as a share of the panel."""
CONVERGE_SIGMAS = 3.0
CONVERGE_PX = 0.12
"""Lines are taken as converging only where that is seen clearly and moves something by this much."""


def plane_of(families: tuple[list[FloatArray], list[FloatArray]]) -> FloatArray | None:
    """Plane parameters (six, or eight where lines converge) with u and v in units of the points; None where lines are few.

    Parameters
    ----------
    families : pair of list of [n, 2]
        Points on the lines of constant u and on those of constant v, shifted to a middle near 0.
    """
    if min(len(f) for f in families) < FEWEST:
        return None
    pencils = []
    for family in families:
        everything = np.concatenate(family)
        # The coordinate along a line: y for lines that run down the page, x for the others.
        along = 1 if np.median([np.ptp(p[:, 1]) - np.ptp(p[:, 0]) for p in family]) > 0 else 0
        pencils.append((_pencil(family, along, everything), along))
    if pencils[0][1] == pencils[1][1]:
        return None
    vanish = [_vanishing(p, along) for p, along in pencils]
    line = np.cross(vanish[0], vanish[1])
    if abs(line[2]) < 1e-9:
        return None
    h = line[:2] / line[2]
    rows = []
    for v in vanish:
        # u = p . x / (1 + h . x) is constant along the lines through v: p . v = 0.
        normal = np.array([-v[1], v[0]])
        rows.append(normal / np.hypot(*normal))
    matrix = np.array([[*rows[0], 0.0], [*rows[1], 0.0], [*h, 1.0]])
    if abs(np.linalg.det(matrix)) < 0.2:
        return None
    inverse = np.linalg.inv(matrix)
    inverse /= inverse[2, 2]
    theta = np.concatenate([inverse[:2, 2], inverse[:2, 0], inverse[:2, 1], inverse[2, :2]])
    return theta if np.any(np.abs(h) > 0) else theta[:6]


def _pencil(family: list[FloatArray], along: int, everything: FloatArray) -> tuple[float, float]:
    """(m0, m1): slope of the lines at place 0 and its change per place."""
    place, slope, weight = np.empty(len(family)), np.empty(len(family)), np.empty(len(family))
    for k, p in enumerate(family):
        t, x = p[:, along], p[:, 1 - along]
        m, x0 = np.polyfit(t - t.mean(), x, 1)
        place[k], slope[k], weight[k] = x0 - m * t.mean(), m, float(((t - t.mean()) ** 2).sum())
    good = np.ones(len(family))
    m0, m1, sigma = 0.0, 0.0, np.inf
    for _ in range(6):
        w = weight * good
        mean = float(np.average(slope, weights=w))
        middle = float(np.average(place, weights=w))
        spread = float((w * (place - middle) ** 2).sum())
        m1 = float((w * (place - middle) * (slope - mean)).sum() / max(spread, 1e-300))
        m0 = mean - m1 * middle
        miss = np.abs(slope - m0 - m1 * place)
        scale = max(1.4826 * float(np.median(miss)), 1e-5)
        good = np.maximum(1 - (miss / (5 * scale)) ** 2, 1e-3) ** 2
        # A printed line's own slope is known this well; the scatter of five slopes alone would say little.
        sigma = min(scale, WAVE / float(np.ptp(everything[:, along]))) / np.sqrt(max(float((good * (place - middle) ** 2).sum()), 1e-300))
    reach, length = np.ptp(place), np.ptp(everything[:, along])
    if abs(m1) < CONVERGE_SIGMAS * sigma or abs(m1) * reach * length / 8 < CONVERGE_PX / 500:
        return float(np.average(slope, weights=weight * good)), 0.0
    return m0, m1


def _vanishing(pencil: tuple[float, float], along: int) -> FloatArray:
    """Homogeneous vanishing point of lines x = x_k + (m0 + m1 x_k) t, all through t = -1 / m1."""
    m0, m1 = pencil
    # At t = -1/m1: x_k + (m0 + m1 x_k) t = -m0 / m1.
    x, t, w = m0, 1.0, -m1
    return np.array([t, x, w]) if along == 0 else np.array([x, t, w])
