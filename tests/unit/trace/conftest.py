"""Drawn sheets with exact truth, and a box that stands for a calibrated panel."""

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "bench"))

import drawn  # noqa: E402
import measures  # noqa: E402

from curvebank import sheet  # noqa: E402
from curvebank.records import PageInfo  # noqa: E402


class Box:
    """Inside is a box [px]."""

    def __init__(self, low, high):
        self.low, self.high = np.asarray(low, float), np.asarray(high, float)
        self.outline = np.array([self.low, [self.high[0], self.low[1]], self.high, [self.low[0], self.high[1]]])

    def inside(self, xy):
        xy = np.asarray(xy, float)
        return ((xy >= self.low) & (xy <= self.high)).all(axis=1)


def prepared_of(pixels):
    height, width = pixels.shape[:2]
    info = PageInfo(sha256="0" * 64, page=1, width=width, height=height, dpi_x=None, dpi_y=None, media="image/png")
    return sheet.prepare(sheet.Sheet(pixels=pixels, info=info))


def paint(lines, size=(700, 500), width=3.0, noise=3.0, seed=0, dash=(), blur=0.7):
    """A white page with strokes; returns the page and their dense true lines."""
    page = drawn.Page(np.random.default_rng(seed), *size, blur=blur)
    true = [page.stroke(np.asarray(xy, float), width, 0.95, dash) for xy in lines]
    grey = 240 * (1 - 0.85 * np.clip(page.ink, 0, 1)) + page.rng.normal(0, noise, page.ink.shape)
    return np.clip(np.rint(grey), 0, 255).astype(np.uint8), true


@pytest.fixture
def box():
    return Box((0, 0), (699, 499))


@pytest.fixture(scope="session")
def tools():
    return {"paint": paint, "prepared_of": prepared_of, "score": measures.score, "draw": drawn.draw, "Box": Box}
