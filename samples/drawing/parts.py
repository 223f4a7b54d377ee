"""Things found on every sheet besides the chart: the sheet as a whole, title blocks, rubber stamps, pencil notes."""

import io
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from PIL import Image

from . import letters, record
from .ageing import smooth_noise, to_bytes
from .chart import Curve

CANONICAL = {"m3/h": 1.0, "gal/min(US)": 0.22712470704, "m": 1.0, "ft": 0.3048, "kW": 1.0, "hp": 0.7456998715822702, "%": 0.01}
"""Canonical value of one printed unit (NIST SP 811)."""


@dataclass(kw_only=True)
class Sheet:
    """One sample: its geometry and words, and ``paint``, which makes the bytes of the scan."""

    name: str
    file: str
    seed: int
    page: object
    title: str
    mode: str
    family: dict
    panels: list
    curves: list
    sheet: dict
    pump: dict
    paint: Callable

    def truth(self):
        """The exact truth document."""
        return record.truth(self.name, self.file, self.page, self.title, self.mode, self.family, self.panels, self.curves, self.seed)

    def recipe(self, truth_doc, sha256):
        """The recipe document for a scan with this SHA-256."""
        sheet = {"file": self.file, "page": 1, "sha256": sha256} | self.sheet
        return record.recipe(truth_doc, sheet, self.pump, self.panels, self.curves)


def plot(pump, panel, letter, quantity, d, share, *, k=0, speed_rpm=None, shown=None, name=None, density_kgm3=998.2, **more):
    """A curve of a pump in the printed units of its panel.

    ``d`` is the wheel that is drawn [mm], ``shown`` the diameter that is printed, ``share`` the ends as shares of best flow.
    """
    n = speed_rpm or pump.speed_rpm
    q = pump.flow(np.linspace(*share, 400), d, n)
    value = {
        "head": lambda: pump.head(q, d, n),
        "efficiency": lambda: pump.efficiency(q, d, n),
        "power": lambda: pump.power(q, d, n, density_kgm3),
        "npshr": lambda: pump.npshr(q),
    }[quantity]()
    return Curve(
        id=f"{letter}-{name or shown or d}",
        panel=panel,
        y_axis=k,
        quantity=quantity,
        flow=q / CANONICAL[panel.x.unit],
        value=value / CANONICAL[panel.y[k].unit],
        diameter_mm=shown or d,
        speed_rpm=n,
        **more,
    )


def family(pump, *, mislabelled=None):
    """What the truth says of the trim law of a sheet's curves."""
    nq = (
        pump.speed_rpm * (pump.best_flow_m3h / 3600) ** 0.5 / (float(pump.head(pump.best_flow_m3h, pump.diameter_mm)) / pump.stages) ** 0.75
    )
    return {
        "law": "Q~D^a, H~D^b",
        "a": pump.flow_exponent,
        "b": pump.head_exponent,
        "dmax_mm": pump.diameter_mm,
        "nq": round(float(nq), 1),
        "exact": mislabelled is None,
        "shifted": None,
        "mislabelled": mislabelled,
    }


def ruled(ink, x, y, width_mm):
    """A straight line between two places given as ((x0, x1), (y0, y1)) in mm."""
    ink.stroke(np.array([[x[0], y[0]], [x[1], y[1]]], float), width_mm)


def title_block(lines, words, typed, left, top, width, rows, rng, *, row_mm=7.0, caption_mm=1.35, text_mm=2.0, pen=0.3, hand="typed"):
    """A ruled block of cells; each row is a list of (share of width, caption, text). ``words`` prints, ``typed`` fills in."""
    height = row_mm * len(rows)
    for i in range(len(rows) + 1):
        heavy = i in (0, len(rows))
        ruled(lines, (left, left + width), (top + i * row_mm,) * 2, pen if heavy else pen * 0.6)
    ruled(lines, (left, left), (top, top + height), pen)
    ruled(lines, (left + width, left + width), (top, top + height), pen)
    for i, row in enumerate(rows):
        x = left
        for j, (share, caption, text) in enumerate(row):
            if j:
                ruled(lines, (x, x), (top + i * row_mm, top + (i + 1) * row_mm), pen * 0.6)
            words.set_type(caption, (x + 0.9, top + i * row_mm + 0.8 + caption_mm), caption_mm)
            at = (x + 1.6 + rng.normal(0, 0.25), top + (i + 1) * row_mm - 1.3 + rng.normal(0, 0.12))
            if hand == "set":
                typed.set_type(text, at, text_mm)
            else:
                typed.strokes(letters.write(text, at, text_mm, hand=hand, rng=rng), 0.24 if hand == "typed" else 0.26)
            x += share * width


def stamp(ink, at_mm, lines, rng, *, turn=4.0, height_mm=2.6, pen=0.34, frame=True, round_shape=False):
    """A rubber stamp: words in a box or an oval, a little aslant."""
    a = np.radians(turn)
    along, down = np.array([np.cos(a), -np.sin(a)]), np.array([np.sin(a), np.cos(a)])
    widths = [letters.width_mm(t, height_mm * k) for t, k in lines]
    heights = [height_mm * k * 1.75 for _, k in lines]
    total = sum(heights)
    y = -total / 2
    at = np.asarray(at_mm, float)
    for (text, k), h in zip(lines, heights, strict=True):
        spot = at + down * (y + h * 0.78)
        ink.strokes(letters.write(text, spot, height_mm * k, turn=turn, align=0.5, rng=rng), pen * (0.8 + 0.2 * k))
        y += h
    if not frame:
        return
    w, h = max(widths) / 2 + 2.6, total / 2 + 1.4
    t = np.linspace(0, 2 * np.pi, 90)
    for grow in (0.0, 0.9):
        if round_shape:
            box = [at + along * (w * 1.22 + grow) * np.cos(s) + down * (h * 1.45 + grow) * np.sin(s) for s in t]
        else:
            c = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1], [-1, -1]]) * [w + grow, h + grow]
            box = [at + along * u + down * v for u, v in c]
        ink.stroke(np.array(box), pen * (1.2 if not grow else 0.7))


def worn(shape, rng, share=0.35):
    """Ink loss [h, w] of a stamp pressed unevenly."""
    return np.clip(share + 0.28 * smooth_noise(rng, shape, 60) + 0.3 * smooth_noise(rng, shape, 4), 0, 0.92)


def note(ink, text, at_mm, height_mm, rng, *, turn=0.0, pen=0.3):
    """A line written by hand."""
    ink.strokes(letters.write(text, at_mm, height_mm, hand="note", turn=turn, slant=0.22, rng=rng), pen)


def save_jpeg(image, dpi, *, quality=80):
    """JPEG bytes of a gray or colour page."""
    picture = Image.fromarray(to_bytes(image))
    out = io.BytesIO()
    picture.save(out, "JPEG", quality=quality, dpi=dpi, optimize=True, subsampling=2 if image.ndim == 3 else -1)
    return out.getvalue()


def gray(image):
    """Luminance of a colour page, as a scanner with a white lamp sees it."""
    return image @ np.array([0.299, 0.587, 0.114], np.float32)
