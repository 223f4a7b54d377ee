"""Words as ink: rendered large by a TrueType font, turned and shrunk into a small patch of the page."""

from functools import lru_cache

import cv2
import numpy as np
from PIL import Image, ImageDraw, ImageFont

from .scene import Words

SCALE = 4


@lru_cache(maxsize=64)
def _font(size: int) -> ImageFont.FreeTypeFont:
    from matplotlib import font_manager

    return ImageFont.truetype(font_manager.findfont("DejaVu Sans"), size)


def patch(words: Words, blur: float, shape: tuple[int, int]) -> tuple[slice, slice, np.ndarray] | None:
    """Rows, columns and ink 0..1 of a text on a page of ``shape``; None when it falls off the page."""
    font = _font(max(int(round(words.size * SCALE * 1.35)), 6))
    left, top, right, bottom = font.getbbox(words.text)
    tile = Image.new("L", (int(right - left) + 8, int(bottom - top) + 8), 0)
    ImageDraw.Draw(tile).text((4 - left, 4 - top), words.text, font=font, fill=255)
    big = cv2.GaussianBlur(np.asarray(tile), (0, 0), 0.45 * SCALE)
    reach = int(np.hypot(*big.shape) / SCALE / 2) + 3
    x, y = (int(round(v)) for v in words.at)
    height, width = shape
    x0, x1, y0, y1 = max(x - reach, 0), min(x + reach + 1, width), max(y - reach, 0), min(y + reach + 1, height)
    if x1 <= x0 or y1 <= y0:
        return None
    turn = cv2.getRotationMatrix2D((big.shape[1] / 2, big.shape[0] / 2), -words.angle, 1.0 / SCALE)
    turn[:, 2] += np.array([words.at[0] - x0 - big.shape[1] / 2, words.at[1] - y0 - big.shape[0] / 2])
    ink = cv2.warpAffine(big, turn, (x1 - x0, y1 - y0), flags=cv2.INTER_LINEAR).astype(np.float32) / 255
    if blur > 0.3:
        ink = cv2.GaussianBlur(ink, (0, 0), blur)
    return slice(y0, y1), slice(x0, x1), words.level * ink
