"""Preparation: ink levels, printed lines found where they were drawn, and taken out without cutting curves."""

import numpy as np
import pytest

from curvebank.errors import Cancelled
from curvebank.records import PageInfo
from curvebank.sheet import Prepared, Sheet, prepare
from curvebank.sheet.width import line_width


def sheet_of(pixels):
    height, width = pixels.shape[:2]
    info = PageInfo(sha256="0" * 64, page=1, width=width, height=height, dpi_x=200, dpi_y=200, media="image/png")
    return Sheet(pixels=pixels, info=info)


def ruled_page(slope=0.0, dark=60, seed=1):
    """Lines every 60 px (3 px wide, exact by area), a curve across them, shaded paper with noise."""
    y, x = np.mgrid[0:600, 0:800].astype(float)
    ink = np.zeros_like(x)
    for k in range(9):
        for d in (y - (60 + 60 * k + slope * x), x - (60 + 80 * k - slope * y)):
            ink = np.maximum(ink, np.clip(2.0 - np.abs(d), 0, 1))
    curve = np.clip(2.5 - np.abs(y - (150 + 0.00055 * (x - 100) ** 2)) / np.hypot(1, 0.0011 * (x - 100)), 0, 1)
    paper = 235 - 0.05 * x - 0.02 * y
    grey = paper * (1 - (1 - dark / 255) * np.maximum(ink, 0)) * (1 - 0.9 * curve)
    grey += np.random.default_rng(seed).normal(0, 3, grey.shape)
    return np.clip(grey, 0, 255).astype(np.uint8), curve


@pytest.mark.parametrize("slope", [0.0, 0.03])
def test_printed_lines_are_found_where_they_were_drawn(slope):
    pixels, _ = ruled_page(slope)
    lines = prepare(sheet_of(pixels)).lines
    across = [ln for ln in lines if ln.horizontal]
    assert len(across) >= 8 and len(lines) - len(across) >= 8
    for ln in across:
        drawn = 60 + slope * ln.along
        k = np.rint((ln.across - drawn).mean() / 60)
        miss = ln.across - drawn - 60 * k
        # The ends reach half a strip beyond what was measured.
        assert np.abs(miss[2:-2]).max() < 0.25, (k, miss)


@pytest.mark.parametrize("dark", [40, 150, 210])
def test_lines_of_three_weights_go_and_the_curve_stays(dark):
    pixels, curve = ruled_page(dark=dark)
    ready = prepare(sheet_of(pixels))
    on_curve = curve > 0.99
    away = curve < 0.01
    kept = (ready.clean[on_curve] > 110).mean()
    left = ready.clean[away][ready.ink[away] > 0.15 * 255]
    assert kept > 0.93
    assert np.median(left) < 40


def test_a_page_is_level_whatever_the_shade():
    pixels, curve = ruled_page()
    ready = prepare(sheet_of(pixels))
    assert np.median(ready.ink[curve < 0.01]) < 12
    assert np.median(ready.ink[curve > 0.99]) > 200


def test_a_negative_is_turned_round():
    pixels, _ = ruled_page()
    negative = prepare(sheet_of(255 - pixels))
    assert negative.light_on_dark
    assert not prepare(sheet_of(pixels)).light_on_dark
    assert np.abs(negative.ink.astype(int) - prepare(sheet_of(pixels)).ink.astype(int)).max() == 0


def test_line_width_follows_the_drawing():
    for width in (2, 4, 7):
        page = np.zeros((300, 300), np.uint8)
        for k in range(4):
            page[30 + 60 * k : 30 + 60 * k + width, 10:290] = 255
        assert line_width(page) == pytest.approx(width, abs=0.7)


def test_arrays_carry_everything_and_nothing_is_writeable():
    pixels, _ = ruled_page()
    ready = prepare(sheet_of(pixels))
    again = Prepared.from_arrays(ready.arrays())
    assert np.array_equal(again.clean, ready.clean) and again.width_px == ready.width_px and again.colour is None
    assert len(again.lines) == len(ready.lines)
    assert all(np.array_equal(a.points(), b.points()) for a, b in zip(again.lines, ready.lines, strict=True))
    for name in ("ink", "clean", "printed"):
        assert not getattr(ready, name).flags.writeable


def test_prepare_is_pure():
    pixels, _ = ruled_page()
    a, b = (prepare(sheet_of(pixels)).arrays() for _ in range(2))
    assert all(np.array_equal(a[k], b[k]) for k in a)


def test_colour_is_kept_only_where_there_is_colour():
    pixels, _ = ruled_page()
    grey = np.repeat(pixels[..., None], 3, axis=2)
    assert prepare(sheet_of(grey)).colour is None
    red = grey.copy()
    red[..., 0] = np.maximum(red[..., 0], 200)
    colour = prepare(sheet_of(red)).colour
    assert colour is not None and colour.shape == (600, 800, 3)


def test_progress_can_cancel():
    pixels, _ = ruled_page()

    def stop(share, text):
        if share > 0.3:
            raise Cancelled("stopped")

    with pytest.raises(Cancelled):
        prepare(sheet_of(pixels), progress=stop)


def test_blank_and_tiny_pages_have_no_lines():
    for shape in ((16, 16), (40, 700), (300, 300)):
        ready = prepare(sheet_of(np.full(shape, 240, np.uint8)))
        assert ready.lines == () and ready.clean.max() < 128
