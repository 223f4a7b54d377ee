"""Pixels near an axis, and readings of them, on pages whose answer is known."""

import numpy as np
import pytest

from curvebank.trace.axis import from_polyline
from curvebank.trace.blocks import read_blocks
from curvebank.trace.pixels import pixels_near
from curvebank.trace.shape import Shape, shape_of


class Page:
    """As much of a prepared sheet as pixels are read from."""

    def __init__(self, clean, masked=None):
        self.clean, self.printed, self.masked = clean, np.zeros_like(clean), masked
        self.shape = clean.shape


@pytest.mark.parametrize("turn", [0.0, 0.3, 0.7854, 1.4, 2.5])
def test_every_pixel_of_a_straight_strip_is_found_once_with_its_true_place(turn):
    c, s = np.cos(turn), np.sin(turn)
    line = np.array([150.3, 149.6]) + np.linspace(-100, 100, 201)[:, None] * [c, s]
    page = np.arange(300 * 300).reshape(300, 300)
    yy, xx = np.mgrid[0:300, 0:300]
    along = (xx - line[0, 0]) * c + (yy - line[0, 1]) * s
    across = -(xx - line[0, 0]) * s + (yy - line[0, 1]) * c
    got = pixels_near(Page(page.astype(np.uint32)), from_polyline(line, False), 8.0)
    which = np.rint(got.ink.astype(np.float64) * 255).astype(int)
    assert len(np.unique(which)) == len(which)
    inner = (along > 1) & (along < 199) & (np.abs(across) < 7.5)
    assert np.isin(np.flatnonzero(inner), which).all()
    assert np.abs(got.s - along.ravel()[which]).max() < 1e-3 and np.abs(got.d - across.ravel()[which]).max() < 1e-3


def test_a_ring_of_pixels_has_its_distances():
    a = np.linspace(0, 2 * np.pi, 400)
    ring = from_polyline(np.stack([100 + 60 * np.cos(a), 100 + 60 * np.sin(a)], 1), True)
    yy, xx = np.mgrid[0:200, 0:200]
    radius = np.hypot(xx - 100, yy - 100)
    got = pixels_near(Page(np.arange(40000).reshape(200, 200).astype(np.uint32)), ring, 6.0)
    which = np.rint(got.ink.astype(np.float64) * 255).astype(int)
    assert np.abs(np.abs(got.d) - np.abs(radius.ravel()[which] - 60)).max() < 0.02
    missed = np.setdiff1d(np.flatnonzero(np.abs(radius - 60) < 5), which)
    assert len(missed) < 0.03 * len(which)


@pytest.mark.parametrize("phase", [0.0, 0.25, 0.5, 0.8])
def test_readings_give_the_place_of_a_drawn_line_without_bias(phase):
    shape = Shape(3.0, 0.8, 0.02, 0.9)
    yy = np.mgrid[0:60, 0:400][0]
    ink = 0.05 + 0.9 * shape.value(yy - (30 + phase)) + np.random.default_rng(1).normal(0, 0.02, (60, 400))
    page = Page(np.clip(np.rint(255 * ink), 0, 255).astype(np.uint8))
    axis = from_polyline(np.array([[10.0, 30.4], [390.0, 30.4]]), False)
    pixels = pixels_near(page, axis, 10.0)
    got = read_blocks(pixels, pixels.d, shape, axis.length, 3.0)
    miss = got.shift - (phase - 0.4)
    assert got.good.all() and abs(miss.mean()) < 0.004
    assert 0.8 < miss.std() / np.sqrt((got.sigma**2).mean()) < 1.2


def test_pixels_under_a_mask_carry_no_weight():
    hidden = np.zeros((60, 400), bool)
    hidden[:, 100:200] = True
    axis = from_polyline(np.array([[10.0, 30.4], [390.0, 30.4]]), False)
    pixels = pixels_near(Page(np.zeros((60, 400), np.uint8), hidden), axis, 8.0)
    assert ((pixels.weight == 0) == ((pixels.s > 89.5) & (pixels.s < 189.5))).all()


def test_a_shape_is_measured_from_its_profile():
    true = Shape(4.0, 0.85, 0.05, 0.8)
    d = np.random.default_rng(0).uniform(-9, 9, 20000)
    got = shape_of(d, np.clip(0.05 + 0.8 * true.value(d), 0, 1), 3.6)
    assert got.width == pytest.approx(4.0, rel=0.1) and got.blur == 0.85 and got.height == pytest.approx(0.8, abs=0.03)
