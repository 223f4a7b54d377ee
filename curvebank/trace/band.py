"""Bands along an axis: the page resampled along normals, and how line-like each spot of it is."""

import cv2
import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from .axis import Axis

Floats32 = npt.NDArray[np.float32]


def sample(image: npt.NDArray[np.uint8], axis: Axis, s: FloatArray, offsets: FloatArray, shrink: float) -> Floats32:
    """Ink 0..1 [rows, offsets] at arc lengths ``s`` and ``offsets`` [px] across, from the image averaged down by about ``shrink``."""
    xy, normal = axis.at(s)
    height, width = image.shape
    reach = max(abs(float(offsets[0])), abs(float(offsets[-1]))) + 4.0
    x0, y0 = (max(int(v - reach), 0) for v in xy.min(axis=0))
    x1, y1 = (int(v + reach) + 2 for v in xy.max(axis=0))
    x0, y0 = min(x0, width - 2), min(y0, height - 2)
    x1, y1 = min(max(x1, x0 + 2), width), min(max(y1, y0 + 2), height)
    k = max(int(round(shrink)), 1)
    if k > 1:
        # Whole cells of k x k pixels: averaging is fastest there, and every cell means the same.
        x1, y1 = (b - (b - a) % k if b - a >= k else b for a, b in ((x0, x1), (y0, y1)))
        part = image[y0:y1, x0:x1]
        size = (max((x1 - x0) // k, 1), max((y1 - y0) // k, 1))
        part = np.asarray(cv2.resize(part, size, interpolation=cv2.INTER_AREA), dtype=np.uint8)
    else:
        part = image[y0:y1, x0:x1]
    start = ((xy - (x0, y0) + 0.5) / k - 0.5).astype(np.float32)
    step, across = (normal / k).astype(np.float32), offsets.astype(np.float32)
    mx = start[:, :1] + step[:, :1] * across
    my = start[:, 1:] + step[:, 1:] * across
    out = cv2.remap(part, mx, my, cv2.INTER_LINEAR, borderMode=cv2.BORDER_CONSTANT, borderValue=0)
    return out * np.float32(1 / 255)


def ridge(band: Floats32, flank: int, cap: float) -> Floats32:
    """Line-likeness 0..1 [rows, offsets]: middle less the darker of two flanks ``flank`` columns away, full from ``cap`` of full ink on."""
    padded = np.pad(band, ((0, 0), (flank, flank)))
    n = band.shape[1]
    darker = np.maximum(padded[:, :n], padded[:, 2 * flank : 2 * flank + n])
    return np.clip((band - darker) * np.float32(1 / cap), 0.0, 1.0)
