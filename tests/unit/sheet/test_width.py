"""The typical width of a sheet's curves: not that of its grid, its letters or its noise."""

import cv2
import numpy as np
import pytest
from scipy.special import ndtr

from curvebank.sheet.width import line_width


def page_with(width, *, grid_px=0.0, pitch=24, noise=0.0, text=False, seed=3):
    """Ink 0..255 of three curves of ``width`` px, a grid of ``grid_px`` px, letters and specks."""
    rng = np.random.default_rng(seed)
    y, x = np.mgrid[0:900, 0:1100].astype(float)

    def stroke(distance, wide):
        return ndtr((wide / 2 - distance) / 0.7) - ndtr((-wide / 2 - distance) / 0.7)

    ink = np.zeros_like(x)
    if grid_px:
        for d in (np.mod(y, pitch), np.mod(x, pitch)):
            ink = np.maximum(ink, 0.8 * stroke(np.minimum(d, pitch - d), grid_px))
    for k in range(3):
        rise = 0.0011 * x
        ink = np.maximum(ink, stroke((y - 100 - 200 * k - 0.00055 * x**2) / np.hypot(1, rise), width))
    out = np.rint(255 * ink).astype(np.uint8)
    if text:
        for k in range(24):
            cv2.putText(out, "HEAD m 320 mm", (560, 30 + 34 * k), cv2.FONT_HERSHEY_SIMPLEX, 1.1, 255, 3, cv2.LINE_AA)
    if noise:
        out[rng.random(out.shape) < noise] = 255
    return out


@pytest.mark.parametrize("width", [1.0, 2.0, 3.0, 5.0, 8.0])
def test_width_follows_the_curves(width):
    assert line_width(page_with(width)) == pytest.approx(width, abs=0.3 * width + 0.5)


@pytest.mark.parametrize(
    "spoilt",
    [{"grid_px": 1.0}, {"grid_px": 1.0, "pitch": 12}, {"grid_px": 8.0, "pitch": 90}, {"noise": 0.02}, {"text": True}],
    ids=["grid", "millimetre paper", "heavy grid", "specks", "letters"],
)
def test_grid_letters_and_specks_do_not_set_the_width(spoilt):
    assert line_width(page_with(4.0, **spoilt)) == pytest.approx(4.0, abs=1.3)


def test_an_empty_page_has_the_usual_width():
    assert line_width(np.zeros((200, 200), np.uint8)) == 3.0
