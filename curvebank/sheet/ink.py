"""Paper to ink: polarity, background levelling and the typical width of a line on this sheet."""

import cv2
import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]
Floats = npt.NDArray[np.float32]


def is_light_on_dark(grey: Bytes) -> bool:
    """True for a blueprint or a negative: the sheet is dark and its fine structure is lighter than what lies around it."""
    small = cv2.resize(grey, None, fx=0.5, fy=0.5, interpolation=cv2.INTER_AREA)
    if float(np.median(small)) > 120:
        return False
    box = np.ones((9, 9), np.uint8)
    lighter = cv2.morphologyEx(small, cv2.MORPH_TOPHAT, box)
    darker = cv2.morphologyEx(small, cv2.MORPH_BLACKHAT, box)
    return float(lighter.astype(np.float64).mean()) > float(darker.astype(np.float64).mean())


def background(grey: Bytes) -> Floats:
    """The paper without ink, at full size: local maximum of the reduced page, blurred, enlarged."""
    height, width = grey.shape
    step = int(np.clip(round(8 * max(height, width) / 3300), 3, 16))
    small = cv2.resize(grey, (max(width // step, 4), max(height // step, 4)), interpolation=cv2.INTER_AREA)
    small = cv2.medianBlur(cv2.dilate(small, np.ones((5, 5), np.uint8)), 5)
    smooth = cv2.GaussianBlur(small.astype(np.float32), (0, 0), 2.0)
    return np.maximum(cv2.resize(smooth, (width, height), interpolation=cv2.INTER_LINEAR), 8.0)


def darkness(channel: Bytes) -> Floats:
    """1 - level / paper, so that uneven paper reads 0 and black ink about 1 (not yet scaled)."""
    out = background(channel)
    np.divide(channel, out, out=out, dtype=np.float32)
    np.subtract(1.0, out, out=out)
    return out


def ink_scale(dark: Floats) -> float:
    """Darkness that counts as full ink: a high percentile of what is clearly darker than the paper, however little of it there is.

    Most of what is inked may be a faint grid; the curves, a hundredth of it, must not be cut off at the grid's darkness.
    """
    thin = dark[::3, ::3]
    noise = 1.4826 * float(np.median(np.abs(thin - np.median(thin))))
    inked = thin[thin > max(0.12, 6.0 * noise)]
    if len(inked) < 60:
        return 0.5
    return float(np.clip(np.percentile(inked, 99), 0.15, 1.0))


def to_bytes(dark: Floats, scale: float) -> Bytes:
    """Darkness as ink 0..255; half a step of a grey level is far below the noise of any scan."""
    return np.asarray(cv2.convertScaleAbs(np.maximum(dark, 0.0, out=dark), alpha=255.0 / scale), dtype=np.uint8)
