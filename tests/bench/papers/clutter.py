"""What lies over a chart and is no curve: hatching of a working range, a stamp, handwriting."""

import numpy as np

from .geometry import Placement
from .look import Look
from .panel import Panel
from .scene import Scene, Stroke, Words, resample


def clutter(
    scene: Scene, place: Placement, panels: list[Panel], lines: list[tuple[str, np.ndarray, str]], look: Look,
    rng: np.random.Generator, per_mm: float, line_px: float,
) -> None:  # fmt: skip
    """Add what the look asks for, over everything drawn so far."""
    panel = panels[0]
    if look.hatching:
        heads = [line for name, line, quantity in lines if name == panel.id and quantity == "head"]
        if len(heads) >= 2:
            _hatch(scene, heads[0], heads[1], rng, per_mm, max(0.45 * line_px, 0.8))
    if look.stamp:
        _stamp(scene, place, panel, rng, per_mm)
    if look.writing:
        _writing(scene, place, panel, rng, per_mm)


def _hatch(scene: Scene, upper: np.ndarray, lower: np.ndarray, rng: np.random.Generator, per_mm: float, width: float) -> None:
    """Slanted lines from one curve to the next."""
    pitch = rng.uniform(2.2, 3.5) * per_mm
    slant = rng.uniform(0.5, 1.0) * rng.choice([-1, 1])
    low, high = max(upper[0, 0], lower[0, 0]), min(upper[-1, 0], lower[-1, 0])
    a, b = low + 0.3 * (high - low), low + 0.75 * (high - low)
    for x in np.arange(a, b, pitch):
        y0 = np.interp(x, upper[:, 0], upper[:, 1])
        x1 = x + slant * (np.interp(x, lower[:, 0], lower[:, 1]) - y0)
        if low < x1 < high:
            y1 = np.interp(x1, lower[:, 0], lower[:, 1])
            scene.items.append(Stroke(resample(np.array([[x, y0], [x1, y1]]), 1.0), width, 0.9))


def _stamp(scene: Scene, place: Placement, panel: Panel, rng: np.random.Generator, per_mm: float) -> None:
    middle = place(panel.px(rng.uniform(0.3, 0.7), rng.uniform(0.35, 0.75))[None])[0]
    half = np.array([rng.uniform(14, 20), rng.uniform(6, 9)]) * per_mm
    angle = rng.uniform(-25, 25)
    a = np.radians(angle)
    turn = np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]])
    ink = (0.45, 0.1, 0.4) if scene.coloured else (0.0, 0.0, 0.0)
    level = float(rng.uniform(0.5, 0.8))
    for k in (1.0, 0.88):
        box = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1], [-1, -1]]) * half * k
        scene.items.append(Stroke(resample(middle + box @ turn, 1.0), 0.5 * per_mm, level, ink))
    scene.items.append(Words("COPY FOR SITE", tuple(middle + np.array([0, -0.35 * half[1]]) @ turn), 0.42 * half[1], angle, level, ink))
    scene.items.append(Words("12 MAR 1974", tuple(middle + np.array([0, 0.4 * half[1]]) @ turn), 0.42 * half[1], angle, level, ink))


def _writing(scene: Scene, place: Placement, panel: Panel, rng: np.random.Generator, per_mm: float) -> None:
    """Loops and strokes of a pen: two notes and one circle round a duty point."""
    ink = (0.1, 0.15, 0.5) if scene.coloured else (0.0, 0.0, 0.0)
    pen = rng.uniform(0.3, 0.5) * per_mm
    for _ in range(2):
        start = place(panel.px(rng.uniform(0.1, 0.6), rng.uniform(0.3, 0.85))[None])[0]
        t = np.linspace(0, 1, 400)
        long = rng.uniform(22, 40) * per_mm
        tall = rng.uniform(1.5, 2.5) * per_mm
        phase = 2 * np.pi * rng.uniform(7, 11) * t
        x = start[0] + long * t + 0.8 * tall * np.cos(phase + 0.7)
        y = start[1] + tall * np.sin(phase) * (0.6 + 0.4 * np.sin(9 * t + rng.uniform(0, 6))) + rng.normal(0, 0.06) * long * t
        scene.items.append(Stroke(resample(np.stack([x, y], 1), 1.0), pen, float(rng.uniform(0.6, 0.9)), ink))
    at = place(panel.px(rng.uniform(0.4, 0.7), rng.uniform(0.4, 0.7))[None])[0]
    phi = np.linspace(0, 2.15 * np.pi, 300)
    r = rng.uniform(3, 5) * per_mm * (1 + 0.05 * np.sin(2 * phi))
    scene.items.append(Stroke(resample(at + np.stack([r * np.cos(phi), 0.8 * r * np.sin(phi)], 1), 1.0), pen, 0.85, ink))
