"""The printed grid, frame, ticks and numbers of a panel; several weights, mm paper, ticks alone, a broken axis, further flow scales."""

import numpy as np

from .geometry import Placement
from .look import Look
from .panel import Axis, Panel
from .scene import BLACK, Scene, Stroke, Words

GREEN, BROWN, BLUE = (0.35, 0.65, 0.45), (0.75, 0.55, 0.4), (0.45, 0.6, 0.8)


def draw_axes(scene: Scene, place: Placement, panel: Panel, look: Look, rng: np.random.Generator, per_mm: float, line_px: float) -> None:
    """Everything of a panel but its curves."""
    colour = {"curves": BLACK, "green-mm": GREEN, "brown-mm": BROWN, "blue": BLUE}.get(look.coloured, BLACK)
    same = look.grid in ("same", "same-strong")
    heavy = 0.97 if same else float(rng.uniform(0.3, 0.55))
    fine = 0.85 if same else float(rng.uniform(0.18, 0.35))
    if look.coloured in ("green-mm", "brown-mm", "blue"):
        heavy, fine = 1.0, 0.75
    major_px = max(line_px * float(rng.uniform(0.4, 0.6)), 0.7)
    minor_px = max(line_px * float(rng.uniform(0.22, 0.35)), 0.5)
    if look.grid == "same-strong":
        major_px, minor_px = 0.95 * line_px, 0.6 * line_px

    def rule(points: np.ndarray, width: float, level: float, ink: tuple[float, float, float]) -> None:
        if look.snapped:  # as a renderer does that puts upright and level lines on whole pixels
            flat = np.abs(points[1] - points[0]) < 1e-6
            points = np.where(flat, np.rint(points), points)
        ends = np.linspace(points[0], points[1], max(int(np.hypot(*(points[1] - points[0])) / 12), 2) + 1)
        scene.items.append(Stroke(place(ends), width, level, ink))

    if look.grid not in ("ticks", "none"):
        parts = 10 if look.grid == "mm" else int(rng.choice(look.parts))
        for axis, upright in ((panel.x, True), (panel.ys[0], False)):
            for values, width, level in ((axis.minors(parts), minor_px, fine), (axis.ticks(), major_px, heavy)):
                for s in axis.share(values):
                    rule(panel.px([s, s], [0, 1]) if upright else panel.px([0, 1], [s, s]), width, level, colour)
            if look.grid == "mm":
                for s in axis.share(axis.minors(2)):
                    rule(panel.px([s, s], [0, 1]) if upright else panel.px([0, 1], [s, s]), 0.5 * (major_px + minor_px), heavy, colour)
    frame = max(line_px * float(rng.uniform(0.6, 0.9)), 0.8)
    corners = [(0, 0), (1, 0), (1, 1), (0, 1)]
    closed = look.grid != "ticks" or rng.random() < 0.5
    for k in range(4 if closed else 0):
        a, b = corners[k], corners[(k + 1) % 4]
        rule(panel.px([a[0], b[0]], [a[1], b[1]]), frame, 0.97, BLACK)
    if not closed:
        rule(panel.px([0, 1], [0, 0]), frame, 0.97, BLACK)
        rule(panel.px([0, 0], [0, 1]), frame, 0.97, BLACK)
    size = max(2.2 * per_mm, 7.0) * 0.8
    for axis in (panel.x, *panel.more_x, *panel.ys):
        _scale(scene, place, panel, axis, look, rng, per_mm, frame, size, rule)
    if look.broken:
        _break_mark(panel, rule, per_mm, frame)


def _scale(scene, place, panel: Panel, axis: Axis, look: Look, rng, per_mm: float, frame: float, size: float, rule) -> None:
    at = panel.tick_px(axis, axis.ticks(), per_mm)
    level = axis.quantity == "flow"
    out = np.array([0.0, 1.0]) if level else np.array([1.0 if axis.side == "right" else -1.0, 0.0])
    if axis.offset_mm:
        ends = panel.tick_px(axis, axis.value(np.array([0.0, 1.0])), per_mm)
        rule(ends, frame, 0.97, BLACK)
    ticks = look.grid == "ticks" or axis.offset_mm or axis.side == "right"
    inward = look.grid == "ticks" and rng.random() < 0.5
    if ticks:
        for p in at:
            rule(np.stack([p, p + out * 1.8 * per_mm * (-1 if inward and not axis.offset_mm else 1)]), frame, 0.95, BLACK)
        for p in panel.tick_px(axis, axis.minors(5), per_mm) if axis.offset_mm or look.grid == "ticks" else ():
            rule(np.stack([p, p + out * 1.0 * per_mm * (-1 if inward and not axis.offset_mm else 1)]), 0.7 * frame, 0.95, BLACK)
    if level and panel.shares_flow_below:
        return
    for value, p in zip(axis.ticks(), at, strict=True):
        text = f"{abs(value):g}"
        shift = out * (2.6 * per_mm + (0.6 * size if level else 0.35 * size * len(text)))
        scene.items.append(Words(text, tuple(place((p + shift)[None])[0]), size, 0.0, 0.95))
    name = {"flow": "Q", "head": "H", "power": "P", "efficiency": "Eta", "npshr": "NPSH"}[axis.quantity]
    end = at[-1] + (np.array([-9.0 * per_mm, 0]) if level else np.array([0, -4.0 * per_mm])) + out * 3.2 * per_mm
    scene.items.append(Words(f"{name} {axis.unit}", tuple(place((end + (0, 3.0 * per_mm if level else 0))[None])[0]), size, 0.0, 0.95))


def _break_mark(panel: Panel, rule, per_mm: float, frame: float) -> None:
    """A zigzag on both axes near the corner, where the scale does not reach zero."""
    for corner, way in ((panel.px(0.0, 0.0), np.array([1.0, 0.0])), (panel.px(0.0, 0.0), np.array([0.0, -1.0]))):
        across = way[::-1]
        base = corner - way * 5 * per_mm
        rule(np.stack([base, corner]), frame, 0.97, BLACK)
        for k in range(3):
            a = corner + way * (1.2 * k + 1) * per_mm - across * 1.2 * per_mm
            rule(np.stack([a, a + way * 0.6 * per_mm + across * 2.4 * per_mm]), frame, 0.97, BLACK)
