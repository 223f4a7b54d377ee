"""The page's own pixels near an axis, each with its place along and across it; no resampling."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from ..sheet import Prepared
from .axis import Axis

Floats32 = npt.NDArray[np.float32]
CELL_PX = 0.7
"""Cells of this size are nowhere wider than a pixel, so each holds one pixel at most, and that is the nearest to its middle."""


@dataclass(slots=True, eq=False)
class Pixels:
    """Pixels near an axis: arc length, distance across, ink 0..1, weight 0..1 (low under printed lines, 0 under a mask)."""

    s: FloatArray
    d: Floats32
    ink: Floats32
    weight: Floats32

    def believed(self) -> npt.NDArray[np.bool_]:
        """Which pixels show the line's own ink: clear of printed lines, or all that are known where hardly any is clear."""
        return believed(self.weight)


def believed(weight: Floats32) -> npt.NDArray[np.bool_]:
    """Which readings to look at, by their weights."""
    known = weight > 0
    keep: npt.NDArray[np.bool_] = weight > 0.4
    if keep.sum() < 0.3 * known.sum() or not keep.any():
        return known if known.any() else np.ones(weight.shape, bool)
    return keep


def trust(printed: FloatArray | Floats32) -> Floats32:
    """Weight of ink under a printed line of ink ``printed`` 0..1: a light line divides out well, a dark one hides what lies below."""
    return (1.0 / (1.0 + (printed * 10.0) ** 2)).astype(np.float32)


def pixels_near(prepared: Prepared, axis: Axis, half: float) -> Pixels:
    """All pixels within ``half`` px of the axis, each once."""
    height, width = prepared.shape
    s = np.arange(0.5 * CELL_PX, axis.length, CELL_PX) if axis.closed else np.arange(-CELL_PX, axis.length + 1.5 * CELL_PX, CELL_PX)
    across = np.arange(-half, half + 0.5 * CELL_PX, CELL_PX)
    points, normals = axis.at(s)
    bend = np.clip(axis.curvature_at(s), -0.5 / half, 0.5 / half)[:, None]
    x = points[:, :1] + normals[:, :1] * across
    y = points[:, 1:] + normals[:, 1:] * across
    px, py = np.rint(x), np.rint(y)
    x, y = px - points[:, :1], py - points[:, 1:]
    nx, ny = normals[:, :1], normals[:, 1:]
    along = x * ny - y * nx
    d = x * nx + y * ny
    # Where the axis bends, the foot of a pixel on it lies a little further along, and the pixel a little nearer to it or farther.
    along /= 1.0 - bend * d
    d -= 0.5 * bend * along * along
    mine = (np.abs(along) <= 0.5 * CELL_PX) & (np.abs(d - across) <= 0.5 * CELL_PX)
    mine &= (px >= 0) & (px < width) & (py >= 0) & (py < height)
    at = np.flatnonzero(mine)
    flat = (py.ravel()[at] * width + px.ravel()[at]).astype(np.int64)
    arc = s[at // len(across)] + along.ravel()[at]
    ink = prepared.clean.ravel()[flat] * np.float32(1 / 255)
    weight = trust(prepared.printed.ravel()[flat] * np.float32(1 / 255))
    if prepared.masked is not None:
        weight[prepared.masked.ravel()[flat]] = 0.0
    return Pixels(arc, d.ravel()[at].astype(np.float32), ink, weight)
