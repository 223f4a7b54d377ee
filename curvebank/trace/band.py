"""Bands along an axis: the page resampled along normals, and how line-like each spot of it is."""

import cv2
import numpy as np
import numpy.typing as npt

from ..records import FloatArray
from .axis import Axis

Floats32 = npt.NDArray[np.float32]


def sample(image: npt.NDArray[np.uint8], axis: Axis, s: FloatArray, offsets: FloatArray, shrink: float) -> Floats32:
    """Ink 0..1 [rows, offsets] at arc lengths ``s`` and ``offsets`` [px] across, from the image averaged down by ``shrink``."""
    xy, normal = axis.at(s)
    x = xy[:, :1] + normal[:, :1] * offsets[None, :]
    y = xy[:, 1:] + normal[:, 1:] * offsets[None, :]
    height, width = image.shape
    pad = 4
    x0, x1 = int(np.clip(x.min() - pad, 0, width - 2)), int(np.clip(x.max() + pad + 1, 2, width))
    y0, y1 = int(np.clip(y.min() - pad, 0, height - 2)), int(np.clip(y.max() + pad + 1, 2, height))
    part = image[y0:y1, x0:x1]
    kx = ky = 1.0
    if shrink > 1.01:
        w, h = max(int(round((x1 - x0) / shrink)), 1), max(int(round((y1 - y0) / shrink)), 1)
        kx, ky = w / (x1 - x0), h / (y1 - y0)
        part = np.asarray(cv2.resize(part, (w, h), interpolation=cv2.INTER_AREA), dtype=np.uint8)
    mx = ((x - x0 + 0.5) * kx - 0.5).astype(np.float32)
    my = ((y - y0 + 0.5) * ky - 0.5).astype(np.float32)
    out = cv2.remap(part, mx, my, cv2.INTER_LINEAR, borderMode=cv2.BORDER_CONSTANT, borderValue=0)
    return out.astype(np.float32) * np.float32(1 / 255)


def ridge(band: Floats32, flank: int, cap: float) -> Floats32:
    """Line-likeness 0..1 [rows, offsets]: middle less the darker of two flanks ``flank`` columns away, full from ``cap`` of full ink on."""
    padded = np.pad(band, ((0, 0), (flank, flank)))
    n = band.shape[1]
    darker = np.maximum(padded[:, :n], padded[:, 2 * flank : 2 * flank + n])
    return np.clip((band - darker) * np.float32(1 / cap), 0.0, 1.0)
