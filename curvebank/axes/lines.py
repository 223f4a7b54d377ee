"""The middle of a printed line, measured anew inside the panel: the track found on the sheet is only a guide.

Across the guide the ink is averaged over a short stretch along it, and the centre of what stands above half height is taken.
A curve or a label on the line spoils single places; the fit that follows is robust against them.
"""

import numpy as np
from scipy.ndimage import map_coordinates

from ..records import FloatArray

PLACES = 24
ALONG_PX = np.linspace(-10.0, 10.0, 11)
ACROSS_PX = np.arange(-4.0, 4.01, 0.5)
PEAK_WITHIN_PX = 2.5
HALF_HEIGHT = 0.45
LEAST_CONTRAST = 0.35


def measure(guide: FloatArray, ink: np.ndarray) -> FloatArray:
    """Points [k, 2] px on the middle of a line that runs along ``guide`` [m, 2]; k may be 0.

    Parameters
    ----------
    guide : [m, 2]
        Points on the line in order, good to a pixel or two, ends inside the panel.
    ink : [h, w]
        0 paper to 255 full ink.
    """
    step = np.hypot(*np.diff(guide, axis=0).T)
    s = np.concatenate([[0.0], np.cumsum(step)])
    margin = ALONG_PX[-1] + 2.0
    if s[-1] < 4 * margin:
        return np.empty((0, 2))
    where = np.linspace(margin, s[-1] - margin, PLACES)
    at = np.stack([np.interp(where, s, guide[:, k]) for k in (0, 1)], -1)
    ahead = np.stack([np.interp(where + margin, s, guide[:, k]) for k in (0, 1)], -1)
    tangent = ahead - at
    tangent /= np.hypot(tangent[:, 0], tangent[:, 1])[:, None]
    normal = np.stack([-tangent[:, 1], tangent[:, 0]], -1)
    grid = (
        at[:, None, None] + ALONG_PX[None, :, None, None] * tangent[:, None, None] + ACROSS_PX[None, None, :, None] * normal[:, None, None]
    )
    sampled = map_coordinates(ink, [grid[..., 1].ravel(), grid[..., 0].ravel()], output=np.float64, order=1, mode="nearest")
    # The median along the line passes over a curve that crosses it.
    profile = np.median(sampled.reshape(PLACES, len(ALONG_PX), len(ACROSS_PX)), axis=1)
    base = np.percentile(profile, 20, axis=1)
    near = np.abs(ACROSS_PX) <= PEAK_WITHIN_PX
    peak_at = ACROSS_PX[near][np.argmax(profile[:, near], axis=1)]
    height = profile[:, near].max(axis=1) - base
    above = np.maximum(profile - (base + HALF_HEIGHT * height)[:, None], 0.0) * (np.abs(ACROSS_PX - peak_at[:, None]) <= PEAK_WITHIN_PX)
    total = above.sum(axis=1)
    good = (height > LEAST_CONTRAST * np.median(height)) & (height > 12) & (total > 0)
    if good.sum() < 0.5 * PLACES:
        return np.empty((0, 2))
    centre = (above @ ACROSS_PX)[good] / total[good]
    return at[good] + centre[:, None] * normal[good]
