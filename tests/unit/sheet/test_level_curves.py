"""The level part of a curve is no printed line, also where no grid shows what the page's lines are like."""

import numpy as np
from chart import png_of

from curvebank import sheet


def test_level_parts_of_parallel_curves_stay() -> None:
    x = np.arange(980)
    grey = np.full((560, 980), 240.0)
    y, rows = 60 + 2.2e-4 * (x - 120.0) ** 2, np.arange(560)[:, None]
    for k in range(8):
        grey -= 190 * np.exp(-0.5 * ((rows - y[None, :] - 48 * k) / 1.0) ** 2)
    noisy = np.clip(np.rint(grey + np.random.default_rng(5).normal(0, 6, grey.shape)), 0, 255).astype(np.uint8)
    prepared = sheet.prepare(sheet.load(png_of(noisy)))
    assert not [line for line in prepared.lines if line.horizontal]
    on = prepared.clean[np.rint(y).astype(int)[:300], x[:300]]
    assert np.percentile(on, 5) > 120
