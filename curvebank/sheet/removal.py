"""Take the printed lines out of the ink without cutting the curves that cross them."""

import cv2
import numpy as np
import numpy.typing as npt

from .lines import PrintedLine
from .strokes import paint

Bytes = npt.NDArray[np.uint8]

DARK = 0.45
"""From this model strength on a printed line hides what lies under it: the pixel is bridged, not divided out."""


def remove_lines(
    ink: Bytes, turned: Bytes, lines: tuple[list[PrintedLine], list[PrintedLine]], unit: float
) -> tuple[Bytes, Bytes, list[PrintedLine]]:
    """Ink without printed lines, the modelled ink of those lines (both 0..255), and the lines with contrast and width filled in.

    ``turned`` is the transpose of ``ink``, in which vertical lines are painted.
    """
    printed, drawn = np.zeros_like(ink), np.zeros_like(turned)
    measured = paint(ink, printed, lines[0], unit) + paint(turned, drawn, lines[1], unit)
    cv2.max(printed, cv2.transpose(drawn), dst=printed)
    return _subtract(ink, printed, unit), printed, measured


def _subtract(ink: Bytes, printed: Bytes, unit: float) -> Bytes:
    """Inks multiply what they let through: 1 - ink = (1 - line)(1 - rest). Under a dark line the rest is bridged by closing."""
    clean = ink.copy()
    touched = np.flatnonzero(printed)
    clean.reshape(-1)[touched] = _LEFT.reshape(-1)[printed.reshape(-1)[touched].astype(np.int32) * 256 + ink.reshape(-1)[touched]]
    size = 2 * max(2, round(3 * unit)) + 1
    bridged = np.asarray(cv2.morphologyEx(clean, cv2.MORPH_CLOSE, np.ones((size, size), np.uint8)), dtype=np.uint8)
    near = cv2.dilate((printed > 255 * DARK).view(np.uint8), np.ones((3, 3), np.uint8))
    cv2.min(bridged, cv2.max(ink, clean), dst=bridged)
    cv2.copyTo(bridged, near, clean)
    return clean


def _table() -> Bytes:
    """What is left [256, 256] of an ink (second index) under a printed line of a strength (first index)."""
    line = np.arange(256)[:, None] / 255.0
    left = 255.0 - (255.0 - np.arange(256)) / (1.0 - np.minimum(line, DARK))
    left[np.broadcast_to(line > DARK, left.shape)] = 0.0
    return np.asarray(np.clip(np.rint(left), 0, 255), dtype=np.uint8)


_LEFT = _table()
