"""A small drawn chart with known geometry, for tests that need a whole sheet: two head curves and an efficiency curve on a grey grid."""

import copy
import io

import cv2
import numpy as np
from PIL import Image
from scipy.spatial import cKDTree

WIDTH, HEIGHT = 900, 700
X0, X1, Y0, Y1 = 100.25, 800.5, 600.25, 80.75
"""Pixel places of flow 0 and 200 m3/h and of the axes' lower and upper ends."""
TOP_HEAD_M, TOP_ETA_PCT, TOP_FLOW = 60.0, 100.0, 200.0


def head_m(flow, diameter_mm):
    """Exact simple-law family: H = 50 - 0.0012 Q^2 at 320 mm, Q ~ D, H ~ D^2."""
    r = diameter_mm / 320.0
    return r**2 * 50.0 - 0.0012 * np.asarray(flow, dtype=float) ** 2


def efficiency(flow):
    """Fraction; peak 0.78 at 115 m3/h."""
    q = np.asarray(flow, dtype=float)
    return 0.78 * (2 * q / 115 - (q / 115) ** 2)


def to_px(flow, share):
    """Pixel of a flow and a share of the value axis."""
    return np.stack([X0 + (X1 - X0) * np.asarray(flow, dtype=float) / TOP_FLOW, Y0 + (Y1 - Y0) * np.asarray(share, dtype=float)], -1)


LINES = {
    "H-320": (np.linspace(5, 170, 400), lambda q: head_m(q, 320) / TOP_HEAD_M),
    "H-290": (np.linspace(5, 150, 400), lambda q: head_m(q, 290) / TOP_HEAD_M),
    "E-320": (np.linspace(20, 170, 400), lambda q: efficiency(q) * 100 / TOP_ETA_PCT),
}


def _ink(distance, width):
    """Coverage of pixels by a line of some width, from their distance to its middle: a one-pixel box filter."""
    return np.clip(width / 2 + 0.5 - np.abs(distance), 0.0, 1.0)


def png(noise=4.0, seed=3):
    """The sheet as PNG bytes: every line drawn by its exact distance, slight noise."""
    y, x = np.mgrid[0:HEIGHT, 0:WIDTH].astype(float)
    page = np.full((HEIGHT, WIDTH), 244.0)

    def lay(coverage, grey):
        page[:] = np.minimum(page, 244 - (244 - grey) * coverage)

    over_x, over_y = (x >= X0 - 1) & (x <= X1 + 1), (y <= Y0 + 1) & (y >= Y1 - 1)
    for i in range(11):
        frame = i in (0, 10)
        width, grey = (2.0, 60) if frame else (1.2, 190)
        lay(_ink(x - (X0 + (X1 - X0) * i / 10), width) * over_y, grey)
        lay(_ink(y - (Y0 + (Y1 - Y0) * i / 10), width) * over_x, grey)
    pixels = np.stack([x.ravel(), y.ravel()], -1)
    for q, share in LINES.values():
        dense = np.linspace(q[0], q[-1], 20000)
        near, _ = cKDTree(to_px(dense, share(dense))).query(pixels, distance_upper_bound=4.0)
        lay(_ink(np.where(np.isfinite(near), near, 9.0).reshape(page.shape), 2.6), 35)
    page += np.random.default_rng(seed).normal(0, noise, page.shape)
    out = io.BytesIO()
    Image.fromarray(np.clip(np.round(page), 0, 255).astype(np.uint8)).save(out, "PNG")
    return out.getvalue()


def _mark(flow, share, value):
    return {"at": [round(float(v), 2) for v in to_px(flow, share)], "value": value}


_DOCUMENT = {
    "recipe": 1,
    "sheet": {"file": "chart.png"},
    "pump": {"maker": "Fenwright", "model": "DP 80", "speed_rpm": 1750},
    "panels": [
        {
            "id": "main",
            "axes": {
                "flow": {"quantity": "flow", "unit": "m3/h", "marks": [_mark(q, 0, q) for q in (0, 100, 200)]},
                "head": {"quantity": "head", "unit": "m", "marks": [_mark(0, h / 60, h) for h in (0, 30, 60)]},
                "eta": {"quantity": "efficiency", "unit": "%", "marks": [_mark(200, e / 100, e) for e in (0, 50, 100)]},
            },
        }
    ],
    "curves": [
        {
            "id": name,
            "panel": "main",
            "x": "flow",
            "y": "eta" if name[0] == "E" else "head",
            "quantity": "efficiency" if name[0] == "E" else "head",
            "diameter_mm": float(name[2:]),
            "speed_rpm": 1750.0,
            "clicks": [[round(float(v), 1) for v in to_px(q[i], share(q[i]))] for i in (20, 200, 380)],
        }
        for name, (q, share) in LINES.items()
    ],
}


def document():
    """A fresh recipe for the chart."""
    return copy.deepcopy(_DOCUMENT)


def labelled(page_png=None):
    """The chart with a title, numbers at its axes and names at its curves, as grey pixels: they tell one place of a grid from the next."""
    page = np.array(Image.open(io.BytesIO(page_png or png())))

    def write(text, x, y, size=0.5):
        cv2.putText(page, text, (x, y), cv2.FONT_HERSHEY_SIMPLEX, size, 30, 1, cv2.LINE_AA)

    write("FENWRIGHT DP 80", 300, 45, 0.9)
    write("1750 1/min", 620, 45, 0.6)
    for i in range(11):
        write(str(20 * i), int(X0 + 70 * i) - 12, 622)
        write(str(6 * i), 66, int(Y0 - 52 * i) + 5)
        write(f"{10 * i}%", 812, int(Y0 - 52 * i) + 5)
    write("Capacity, cubic metres an hour", 300, 655, 0.6)
    write("320", 600, 330)
    write("290", 560, 430)
    return page


def png_of(pixels):
    """Grey pixels as PNG bytes."""
    out = io.BytesIO()
    Image.fromarray(pixels).save(out, "PNG")
    return out.getvalue()
