"""Small drawn charts of sixteen kinds, quick to trace: for unit tests and a first look (`drawing` draws sheets with axes and recipes).

Lines are painted by their distance to every pixel (no raster engine, no resampling), so the truth is exact to rounding. Paper stretch,
rotation and perspective act on the geometry before painting.
"""

from dataclasses import dataclass, field
from typing import Any

import cv2
import numpy as np
from papers.paint import project
from papers.scene import arc, resample
from scipy.special import ndtr

KINDS = (
    "plain",
    "sameink",
    "dashes",
    "labels",
    "warp",
    "fax",
    "hairline",
    "merge",
    "loops",
    "photo",
    "copy",
    "mm",
    "coarse",
    "plotter",
    "steep",
    "dense",
)
"""What each kind stresses; ``draw`` takes one of these."""


@dataclass
class Page:
    """A page being drawn: ink 0..1 and the map from drawing px to page px."""

    rng: np.random.Generator
    width: int
    height: int
    blur: float = 0.7
    warp: Any = None
    ink: np.ndarray = field(default_factory=lambda: np.zeros((0, 0), np.float32))

    def __post_init__(self) -> None:
        self.ink = np.zeros((self.height, self.width), np.float32)

    def place(self, xy: np.ndarray) -> np.ndarray:
        """Drawing px to page px."""
        return xy if self.warp is None else self.warp(np.asarray(xy, float))

    def stroke(self, xy: np.ndarray, width: float, level: float, dash: tuple[float, ...] = (), step: float = 1.0) -> np.ndarray:
        """Paint a polyline (drawing px) and return its dense page line."""
        line = resample(self.place(resample(np.asarray(xy, float), 2.0 * step)), step)
        half = width / 2 + 4 * self.blur + 1.5
        d = np.arange(-int(half + step) - 1, int(half + step) + 2)
        grid = (np.rint(line).astype(int)[:, None, :] + np.stack(np.meshgrid(d, d), -1).reshape(-1, 2)[None]).reshape(-1, 2)
        keep = (grid >= 0).all(1) & (grid[:, 0] < self.width) & (grid[:, 1] < self.height)
        flat = np.unique(grid[keep][:, 1] * self.width + grid[keep][:, 0])
        if not len(flat):
            return line
        px = np.stack([flat % self.width, flat // self.width], 1).astype(float)
        dist, along = project(px, line)
        b = max(self.blur, 0.25)
        cover = ndtr((width / 2 - dist) / b) - ndtr((-width / 2 - dist) / b)
        cover *= pattern(along, arc(line)[-1], dash, b)
        self.ink[px[:, 1].astype(int), px[:, 0].astype(int)] = np.maximum(
            self.ink[px[:, 1].astype(int), px[:, 0].astype(int)], (level * cover).astype(np.float32)
        )
        return line

    def text(self, words: str, at: np.ndarray, angle: float, size: float, gap: bool) -> None:
        """Letters centred on a page point, on a blank box when ``gap``."""
        scale, thick = size / 22.0, max(int(round(size / 11)), 1)
        (w, h), _ = cv2.getTextSize(words, cv2.FONT_HERSHEY_SIMPLEX, scale * 4, thick * 4)
        tile = np.zeros((h + 24, w + 24), np.uint8)
        cv2.putText(tile, words, (12, h + 12), cv2.FONT_HERSHEY_SIMPLEX, scale * 4, 255, thick * 4, cv2.LINE_AA)
        turn = cv2.getRotationMatrix2D((tile.shape[1] / 2, tile.shape[0] / 2), -angle, 0.25)
        turn[:, 2] += np.asarray(at) - (tile.shape[1] / 2, tile.shape[0] / 2)
        size_px = (self.width, self.height)
        if gap:
            box = cv2.warpAffine(np.full_like(tile, 255), turn, size_px, flags=cv2.INTER_AREA).astype(np.float32) / 255
            self.ink *= 1 - box
        small = cv2.GaussianBlur(tile, (0, 0), 2.0)
        self.ink = np.maximum(self.ink, cv2.warpAffine(small, turn, size_px, flags=cv2.INTER_LINEAR).astype(np.float32) / 255)


def pattern(along: np.ndarray, length: float, dash: tuple[float, ...], blur: float) -> np.ndarray:
    """Ink 0..1 along a dashed (or solid) line with ends at 0 and ``length``."""
    ends = ndtr(along / blur) * ndtr((length - along) / blur)
    if not dash:
        return ends
    period = sum(dash)
    t = np.mod(along, period)
    out = np.zeros_like(t)
    start = 0.0
    for k in range(0, len(dash), 2):
        for shift in (-period, 0.0, period):
            out += ndtr((t - start - shift) / blur) * ndtr((start + dash[k] + shift - t) / blur)
        start += dash[k] + dash[k + 1]
    return np.clip(out, 0, 1) * ends


def make_warp(rng: np.random.Generator, width: int, height: int, bend: float, turn_deg: float, keystone: float) -> Any:
    """Smooth paper stretch of ``bend`` px, a turn and a keystone, as a function of points [n, 2]."""
    waves = [(rng.uniform(0.4, 1.3, 2), rng.uniform(0, 6.28, 2), rng.normal(0, bend / 2.2, 2)) for _ in range(3)]
    c, s = np.cos(np.radians(turn_deg)), np.sin(np.radians(turn_deg))
    k = rng.uniform(-keystone, keystone, 2)
    middle = np.array([width / 2, height / 2])

    def warp(xy: np.ndarray) -> np.ndarray:
        u = xy / np.array([width, height])
        out = xy.copy()
        for f, phase, size in waves:
            out = out + np.sin(2 * np.pi * (u @ f) + phase[0])[:, None] * size
        v = (out - middle) @ np.array([[c, s], [-s, c]])
        return middle + v / (1 + (v / middle) @ k)[:, None]

    return warp


def draw(kind: str, seed: int) -> tuple[np.ndarray, dict[str, Any]]:
    """One sheet: uint8 page (grey or RGB) and its truth, in the form of the development sheets' truth files."""
    rng = np.random.default_rng([KINDS.index(kind), seed])
    pick = lambda low, high: float(rng.uniform(low, high))  # noqa: E731
    big = {"coarse": 0.55, "plotter": 1.6}.get(kind, pick(0.85, 1.25))
    width, height = int(1250 * big), int(1050 * big)
    line_px = {"hairline": pick(0.9, 1.4), "coarse": pick(1.1, 1.7), "plotter": pick(4, 6.5)}.get(kind, pick(2.0, 4.0))
    page = Page(rng, width, height, blur=pick(0.5, 0.9) * (0.8 if kind == "coarse" else 1.0))
    bend, turn, key = {"warp": (5, 2.0, 0.01), "photo": (1.5, 1.5, 0.09), "fax": (0.5, 0.6, 0), "copy": (2, 0.8, 0)}.get(
        kind, (0.0, pick(-0.4, 0.4), 0)
    )
    page.warp = make_warp(rng, width, height, bend, turn, key)
    x0, x1, y0, y1 = 0.1 * width, 0.92 * width, 0.08 * height, 0.88 * height
    to_px = lambda q, v: np.stack([x0 + np.asarray(q) * (x1 - x0), y1 - np.asarray(v) * (y1 - y0)], -1)  # noqa: E731
    _grid(page, kind, to_px, line_px, pick)
    curves = _curves(page, kind, to_px, line_px, pick)
    polygon = page.place(np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]]))
    truth = {"panels": [{"id": "p0", "polygon": polygon.tolist()}], "curves": curves, "kind": kind, "seed": seed}
    return _spoil(page, kind, pick), truth


def _grid(page: Page, kind: str, to_px: Any, line_px: float, pick: Any) -> None:
    same = kind in ("sameink", "copy", "fax") or (kind in ("warp", "dashes", "merge") and pick(0, 1) < 0.5)
    minor = {"mm": 60, "dense": 30}.get(kind, int(pick(8, 22)))
    major = 5
    for i in range(minor + 1):
        heavy = i % major == 0
        level = (0.95 if same else pick(0.2, 0.45)) if heavy else (0.8 if same and kind != "copy" else pick(0.12, 0.3))
        w = line_px * (pick(0.45, 0.6) if heavy else pick(0.3, 0.4))
        page.stroke(to_px([i / minor] * 2, [0, 1]), w, level, step=4.0)
        page.stroke(to_px([0, 1], [i / minor] * 2), w, level, step=4.0)
    for a, b in (((0, 0), (1, 0)), ((0, 0), (0, 1)), ((1, 0), (1, 1)), ((0, 1), (1, 1))):
        page.stroke(to_px([a[0], b[0]], [a[1], b[1]]), line_px * 0.8, 0.97)
    for k in range(6):
        page.text(f"{k * 20}", page.place(to_px([k / 5], [-0.035]))[0], 0, 11 * max(line_px / 3, 0.6), False)
        page.text(f"{k * 10}", page.place(to_px([-0.035], [k / 5]))[0], 0, 11 * max(line_px / 3, 0.6), False)


def _curves(page: Page, kind: str, to_px: Any, line_px: float, pick: Any) -> list[dict[str, Any]]:
    rng, out = page.rng, []
    t = np.linspace(0, 1, 400)
    shapes: list[tuple[str, np.ndarray, np.ndarray, bool]] = []
    droop, top = pick(-0.05, 0.12), pick(0.8, 0.93)
    count = 7 if kind == "dense" else int(rng.integers(3, 6))
    for k in range(count):
        r = 1 - (0.05 if kind == "dense" else pick(0.07, 0.1)) * k
        q0, q1 = pick(0.0, 0.04), pick(0.8, 0.95) * r
        q = q0 + (q1 - q0) * t
        shapes.append(("head", q, top * r * r * (1 + 4 * droop * (q / r) * (1 - q / r) ** 2 - 0.45 * (q / r) ** 2.1), False))
    if kind not in ("dense",):
        q = 0.02 + 0.85 * t
        shapes.append(("power", q, 0.12 + pick(0.1, 0.25) * q + 0.05 * q**2, False))
    if kind in ("plain", "sameink", "warp", "copy", "mm", "dashes", "photo", "hairline"):
        q = pick(0.0, 0.03) + pick(0.8, 0.9) * t
        shapes.append(("efficiency", q, pick(0.6, 0.8) * (1 - ((q - 0.62) / 0.62) ** 2), False))
    if kind == "merge":
        for k in range(3):
            r = 1 - 0.09 * k
            q = 0.01 + 0.85 * r * t
            shapes.append(("efficiency", q, 0.66 * (1 - 0.012 * k) * (1 - ((q / r - 0.62) / 0.62) ** 2), False))
    if kind == "loops":
        for k, (a, b) in enumerate(((0.1, 0.05), (0.16, 0.09), (0.22, 0.13))):
            phi, tilt = 2 * np.pi * np.linspace(0, 1, 500), -0.25
            e, f = a * np.cos(phi) * (1 + 0.12 * np.cos(phi)), b * np.sin(phi)
            shapes.append(
                ("efficiency_iso", 0.5 + e * np.cos(tilt) - f * np.sin(tilt), 0.6 + 0.02 * k + e * np.sin(tilt) + f * np.cos(tilt), True)
            )
        phi = np.linspace(-2.0, 2.0, 400)
        shapes.append(("efficiency_iso", 0.5 + 0.28 * np.cos(phi), 0.6 + 0.18 * np.sin(phi), False))
    if kind == "steep":
        v = 0.05 + 0.85 * t
        shapes.append(("efficiency_iso", 0.3 + 0.1 * np.sin(3 * v), v, False))
        shapes.append(("efficiency_iso", 0.75 - 0.2 * (v - 0.5) ** 2, v, False))
        shapes.append(("npshr", 0.05 + 0.8 * t, 0.05 + 0.02 * t + 0.75 * t**8, False))
    dashes = {"dash": (7.0, 4.0), "dot": (1.2, 1.8), "dashdot": (7.0, 2.5, 1.5, 2.5), "long": (14.0, 3.0)}
    labels = []
    for i, (quantity, q, v, closed) in enumerate(shapes):
        style = "solid"
        if kind == "dashes" or (kind in ("warp", "sameink", "copy") and pick(0, 1) < 0.2):
            style = ("solid", "dash", "dashdot", "dot", "long")[int(rng.integers(0, 5))]
        px = to_px(q, v)
        if kind in ("mm", "plotter") and pick(0, 1) < 0.7:
            s = arc(px)
            for _ in range(3):
                px = px + np.stack([np.zeros_like(s), np.sin(2 * np.pi * s / pick(150, 500) + pick(0, 6))], 1) * pick(0, 0.6) * line_px / 3
        pen = line_px * (0.8 if quantity == "efficiency_iso" else 1.0)
        line = page.stroke(px, pen, pick(0.88, 1.0) if kind != "copy" else pick(0.6, 1.0), tuple(d * pen for d in dashes.get(style, ())))
        if kind == "labels" or pick(0, 1) < 0.25:
            labels.append((i, line, kind == "labels" or pick(0, 1) < 0.5))
        out.append(_truth(page, f"c{i:02d}", quantity, style, pen, closed, line))
    for i, line, gap in labels:
        s = arc(line)
        k = int(np.searchsorted(s, s[-1] * pick(0.2, 0.8))) if gap else len(line) - 1
        k = min(max(k, 3), len(line) - 1)
        e = line[k] - line[max(k - 8, 0)]
        angle = float(np.degrees(np.arctan2(e[1], e[0])))
        size = 14 * max(line_px / 3, 0.6)
        at = line[k] if gap else line[-1] + e / max(np.hypot(*e), 1e-9) * (2.2 * size)
        page.text(f"{320 - 12 * i}", at, angle if gap else 0.0, size, gap)
    return out


def _truth(page: Page, name: str, quantity: str, style: str, width: float, closed: bool, line: np.ndarray) -> dict[str, Any]:
    rng, s = page.rng, arc(line)
    clicks = {}
    for n in (2, 3, 5):
        share = np.linspace(0, 1, n + 1)[:-1] + 0.07 if closed else np.linspace(0.01, 0.99, n)
        if not closed and rng.random() < 0.3:
            share[0], share[-1] = rng.uniform(0.01, 0.05), rng.uniform(0.95, 0.99)
        at = np.stack([np.interp(share * s[-1], s, line[:, k]) for k in (0, 1)], 1)
        if closed and n == 2:
            continue
        clicks[str(n)] = (at + rng.uniform(-3, 3, at.shape)).tolist()
    return {
        "id": name,
        "panel": "p0",
        "quantity": quantity,
        "style": style,
        "width_px": width,
        "closed": closed,
        "clicks": clicks,
        "line": line.tolist(),
    }


def _spoil(page: Page, kind: str, pick: Any) -> np.ndarray:
    rng, ink = page.rng, np.clip(page.ink, 0, 1)
    h, w = ink.shape

    def field_(cell: int, size: float) -> np.ndarray:
        coarse = rng.normal(0, size, (max(h // cell, 2), max(w // cell, 2))).astype(np.float32)
        return cv2.resize(coarse, (w, h), interpolation=cv2.INTER_CUBIC)

    if kind in ("copy", "fax"):
        ink = ink * np.clip(1 + field_(14, 0.25) + field_(4, 0.15), 0.1, 1.3)
    if kind in ("hairline", "coarse"):
        ink = ink * np.clip(1 + field_(6, 0.15), 0.2, 1.2)
    paper = {"copy": 225.0, "photo": 190.0, "mm": 225.0}.get(kind, 238.0) + field_(160, 6.0)
    if kind == "photo":
        y, x = np.mgrid[0:h, 0:w]
        paper = paper * (0.75 + 0.35 * (x / w) * (1 - 0.4 * y / h))
    if kind == "warp":
        fold = int(w * pick(0.3, 0.7))
        paper[:, max(fold - 2, 0) : fold + 3] -= 45
    grey = paper * (1 - ink * (0.6 if kind in ("copy", "photo") else 0.85))
    grey = cv2.GaussianBlur(grey, (0, 0), pick(0.3, 0.9))
    grey = grey + rng.normal(0, {"copy": 14, "photo": 9, "coarse": 6}.get(kind, 5), grey.shape)
    if kind == "copy":
        for _ in range(int(pick(100, 400))):
            cv2.circle(grey, (int(rng.integers(w)), int(rng.integers(h))), int(rng.integers(1, 3)), float(rng.uniform(40, 150)), -1)
    out = np.clip(np.rint(grey), 0, 255).astype(np.uint8)
    if kind == "fax":
        return np.where(out > 140, 255, 0).astype(np.uint8)
    quality = int(pick(45, 95))
    return cv2.imdecode(cv2.imencode(".jpg", out, [cv2.IMWRITE_JPEG_QUALITY, quality])[1], cv2.IMREAD_UNCHANGED)
