"""Invented pumps as pure shapes: head, efficiency, power and NPSHr of a wheel, contours on the head-flow plane.

Flow and values are in shares of their axes.
Families obey Q ~ D and H ~ D^2 (P ~ D^3); merging efficiency curves are made on purpose, in several geometries.
"""

from dataclasses import dataclass

import numpy as np

T = np.linspace(0.0, 1.0, 500)


@dataclass
class Shape:
    """One printed line: shares of the flow axis ``q`` and of its value axis ``v``; ``axis`` names the value axis."""

    quantity: str
    axis: str
    q: np.ndarray
    v: np.ndarray
    ratio: float = 1.0
    closed: bool = False
    level: float | None = None
    note: str = ""


@dataclass
class Wheel:
    """Shape parameters of one invented pump."""

    head0: float
    rise: float
    drop: float
    power: float
    best: float
    eta: float
    end: float


def wheel(rng: np.random.Generator) -> Wheel:
    u = rng.uniform
    return Wheel(u(0.78, 0.92), u(-0.05, 0.10), u(0.38, 0.6), u(1.7, 2.6), u(0.52, 0.66), u(0.68, 0.84), u(0.84, 0.95))


def ratios(rng: np.random.Generator, count: int, step: tuple[float, float] = (0.05, 0.08)) -> np.ndarray:
    return 1 - np.r_[0.0, np.cumsum(rng.uniform(*step, count - 1))]


def heads(w: Wheel, rs: np.ndarray, rng: np.random.Generator) -> list[Shape]:
    out = []
    for r in rs:
        x = rng.uniform(0.0, 0.05) + (w.end * rng.uniform(0.96, 1.0) - 0.03) * T
        h = w.head0 * (1 + 4 * w.rise * x * (1 - x) ** 2 - w.drop * x**w.power)
        out.append(Shape("head", "head", r * x, r**2 * h, float(r)))
    return out


def efficiency(w: Wheel, rs: np.ndarray, axis: str = "efficiency") -> list[Shape]:
    """Curves that share their rise and then part: merging within a line width by nature when the trims are close."""
    out = []
    for k, r in enumerate(rs):
        x = 0.012 + (w.end - 0.012) * T
        v = (w.eta - 0.008 * k) * (1 - np.abs(1 - x / w.best) ** 2.1)
        out.append(Shape("efficiency", axis, r * x, np.maximum(v, 0.0), float(r)))
    return out


def merging(w: Wheel, rng: np.random.Generator, geometry: str, line_share: float, count: int = 2) -> list[Shape]:
    """Efficiency curves closer than a line width (``line_share`` of the axis) for part of their length.

    "rise": one rise, parted after it. "touch": parted, together in the middle, parted. "asymptote": together from somewhere to the end.
    "tail": parted at the left and one line at the right end.
    """
    x = 0.015 + (w.end - 0.015) * T
    first = w.eta * (1 - np.abs(1 - x / w.best) ** 2.0)
    out = [Shape("efficiency", "efficiency", x, first)]
    for k in range(1, count):
        s = float(k)
        if geometry == "rise":
            part = np.clip((x - rng.uniform(0.2, 0.42)) / 0.5, 0, None)
            gap = rng.uniform(0.1, 0.3) * line_share + s * rng.uniform(0.16, 0.26) * part**1.6
        elif geometry == "touch":
            at = rng.uniform(0.35, 0.6) * w.end
            gap = rng.uniform(0.05, 0.5) * line_share + s * rng.uniform(0.5, 0.9) * (x - at) ** 2
        elif geometry == "asymptote":
            gap = rng.uniform(0.0, 0.3) * line_share + s * rng.uniform(0.1, 0.2) * np.exp(-x / rng.uniform(0.07, 0.13))
        else:
            gap = rng.uniform(0.0, 0.3) * line_share + s * rng.uniform(0.15, 0.3) * np.clip(1 - x / (0.7 * w.end), 0, None) ** 2
        out.append(Shape("efficiency", "efficiency", x, first - gap, 1 - 0.04 * k, note=f"merges: {geometry}"))
    return [_within(s) for s in out]


def _within(s: Shape) -> Shape:
    keep = s.v > 0.01
    return Shape(s.quantity, s.axis, s.q[keep], s.v[keep], s.ratio, s.closed, s.level, s.note)


def powers(rng: np.random.Generator, rs: np.ndarray, axis: str = "power", end: float = 0.88, top: float | None = None) -> list[Shape]:
    a, b, c = rng.uniform(0.18, 0.3), rng.uniform(0.45, 0.65), rng.uniform(0.02, 0.22)
    size = (top or rng.uniform(0.6, 0.9)) / (a + b - c)
    out = []
    for r in rs:
        x = 0.01 + (end - 0.02) * T
        out.append(Shape("power", axis, r * x, r**3 * size * (a + b * x - c * x * x), float(r)))
    return out


def npshr(rng: np.random.Generator, axis: str = "npshr", end: float = 0.88) -> list[Shape]:
    low, x = rng.uniform(0.12, 0.25), rng.uniform(0.08, 0.2) + (end - 0.2) * T
    v = low + 0.25 * (0.35 - np.minimum(x, 0.35)) ** 2 + rng.uniform(0.7, 1.0) * np.clip(x - 0.2, 0, None) ** rng.uniform(2.2, 3.2)
    return [Shape("npshr", axis, x[v < 0.95], v[v < 0.95])]


def steep(rng: np.random.Generator) -> list[Shape]:
    """A mixed-flow pump: head with a saddle, steep at the end; power that falls; lines that run almost straight up."""
    x = 0.02 + 0.9 * T
    saddle = rng.uniform(0.1, 0.16) * np.exp(-(((x - rng.uniform(0.36, 0.44)) / 0.09) ** 2))
    s = 0.9 - 0.55 * x - saddle - 0.4 * np.clip(x - 0.55, 0, None) ** 1.4
    out = [Shape("head", "head", x[s > 0.03], s[s > 0.03])]
    v = 0.05 + 0.85 * T
    out.append(Shape("efficiency_iso", "head", 0.30 + 0.07 * np.sin(rng.uniform(2.5, 4) * v), v, level=0.7))
    out.append(Shape("efficiency_iso", "head", 0.74 - rng.uniform(0.15, 0.3) * (v - 0.5) ** 2, v, level=0.7))
    t = 0.55 * T
    out.append(Shape("head", "head", 0.1 + t, 0.12 + 0.62 / (1 + np.exp(-(t - 0.28) / rng.uniform(0.022, 0.05))), 0.9))
    out.append(Shape("npshr", "head", 0.08 + 0.8 * T, 0.05 + 0.02 * T + 0.72 * T ** rng.uniform(6, 10), 1.0))
    return out


def contours(rng: np.random.Generator, closed: int, opened: int) -> list[Shape]:
    """Nested lines of constant efficiency: egg-shaped loops and U shapes that open upwards, downwards or to the left."""
    out: list[Shape] = []
    q0, v0, tilt = rng.uniform(0.45, 0.55), rng.uniform(0.55, 0.66), rng.uniform(-0.45, -0.15)
    a, b = rng.uniform(0.08, 0.12), rng.uniform(0.045, 0.065)
    if not closed:
        a, b = 1.6 * a, 1.7 * b
    phi = 2 * np.pi * np.linspace(0, 1, 600)
    for k in range(closed):
        e, f = a * np.cos(phi) * (1 + 0.14 * np.cos(phi)), b * np.sin(phi) * (1 + 0.08 * np.sin(phi))
        q = q0 + e * np.cos(tilt) - f * np.sin(tilt)
        out.append(Shape("efficiency_iso", "head", q, v0 + e * np.sin(tilt) + f * np.cos(tilt), closed=True, level=0.84 - 0.02 * k))
        a, b = a * rng.uniform(1.35, 1.6), b * rng.uniform(1.35, 1.6)
        v0 -= 0.15 * b
    opening = rng.choice([-0.5, 0.0, 0.5]) * np.pi + rng.uniform(-0.3, 0.3)
    for k in range(opened):
        v0 -= 0.25 * b
        half = rng.uniform(2.0, 2.5)
        p = opening + np.pi + np.linspace(-half, half, 500)
        e, f = a * np.cos(p), b * np.sin(p)
        q = q0 + e * np.cos(tilt) - f * np.sin(tilt)
        v = v0 + e * np.sin(tilt) + f * np.cos(tilt)
        keep = (q > 0.02) & (q < 0.98) & (v > 0.03) & (v < 0.97)
        edge = np.flatnonzero(np.diff(np.r_[0, keep.astype(int), 0])).reshape(-1, 2)
        low, high = max(edge, key=lambda pair: pair[1] - pair[0])
        out.append(Shape("efficiency_iso", "head", q[low:high], v[low:high], level=0.80 - 0.04 * k))
        a, b = a * rng.uniform(1.3, 1.45), b * rng.uniform(1.4, 1.6)
    return out


def log_lines(rng: np.random.Generator, count: int) -> list[Shape]:
    """Envelope lines on log-log paper (shares are of the logarithmic axis)."""
    out = []
    for k in range(count):
        x = 0.06 + 0.1 * k * rng.uniform(0.6, 1.0) + (0.5 + 0.05 * k) * T
        v = 0.85 - 0.13 * k - 0.09 * (x - x[0]) - rng.uniform(0.7, 1.1) * np.clip(x - x[0] - 0.2, 0, None) ** 2.2
        out.append(Shape("head", "head", x[v > 0.03], v[v > 0.03], 1 - 0.07 * k))
    return out
