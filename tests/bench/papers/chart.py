"""Compose one chart: panels and scales, curves with their print styles, grid, labels and clutter, placed on the page."""

from dataclasses import dataclass, replace

import numpy as np

from . import pumps
from .clutter import clutter
from .geometry import Placement
from .gridlines import draw_axes
from .look import Look
from .panel import Axis, Panel, pick_axis
from .pumps import Shape
from .scene import BLACK, DASHES, Blank, Scene, Stroke, Words, along, arc, dash_intervals, resample, without

COLOURS = ((0.05, 0.1, 0.55), (0.7, 0.05, 0.08), (0.0, 0.4, 0.12), (0.5, 0.1, 0.5), (0.75, 0.4, 0.0), (0.0, 0.0, 0.0))


@dataclass
class Drawn:
    """One curve on the page: its shape, where it lies (page px), how it is printed."""

    panel: Panel
    axis: int
    shape: Shape
    line: np.ndarray
    shares: np.ndarray
    style: str
    width: float
    colour: tuple[float, float, float]
    label: str
    gap: bool


@dataclass
class Chart:
    """The whole sheet before it is painted."""

    scene: Scene
    place: Placement
    panels: list[Panel]
    curves: list[Drawn]
    per_mm: float
    diameter_mm: int


def compose(look: Look, rng: np.random.Generator, laid: tuple[dict[str, float], np.random.Generator] | None = None) -> Chart:
    """Choose pumps, scales and styles and lay everything out. ``laid``: other moves of the same paper, as for another scan of it."""
    per_mm = look.dpi / 25.4
    width, height = (int(round(v * per_mm)) for v in look.page_mm)
    place = Placement(width, height)
    _moves(place, look, rng, look.dpi / 300)
    if laid is not None:
        place = Placement(width, height)
        _moves(place, replace(look, paper_moves=laid[0]), laid[1], look.dpi / 300)
    scene = Scene(width, height, float(rng.uniform(*look.blur_px)), coloured=bool(look.coloured))
    line_px = float(rng.uniform(*look.line_mm)) * per_mm
    panels, shapes = _content(look, rng, (width, height), per_mm, line_px)
    for panel in panels:
        draw_axes(scene, place, panel, look, rng, per_mm, line_px)
    diameter = int(rng.integers(22, 40)) * 10
    curves = [_curve(scene, place, panel, shape, look, rng, per_mm, line_px, i, diameter) for i, (panel, shape) in enumerate(shapes)]
    _labels(scene, curves, look, rng, per_mm)
    clutter(scene, place, panels, [(c.panel.id, c.line, c.shape.quantity) for c in curves], look, rng, per_mm, line_px)
    return Chart(scene, place, panels, curves, per_mm, diameter)


def _moves(place: Placement, look: Look, rng: np.random.Generator, unit: float) -> None:
    m = look.paper_moves
    if "stretch" in m:
        place.stretch(rng, m["stretch"] * unit)
    if "curl" in m:
        place.curl(m["curl"] * unit * rng.uniform(0.6, 1.0), m["curl"] * unit * rng.uniform(0.3, 0.9) * rng.choice([-1, 1]))
    if "fold" in m:
        slip = m["fold"] * unit * rng.uniform(0.3, 1.0)
        place.fold(place.width * rng.uniform(0.4, 0.6), rng.normal(0, 0.01), rng.normal(0, 0.002), slip)
    if "drum" in m:
        place.shear(rng.normal(0, 0.002), rng.uniform(0.3, 1.0) * m["drum"] * rng.choice([-1, 1]))
    if "camera" in m:
        place.camera(rng, m["camera"], rng.uniform(-0.006, 0.004))
    place.turn(rng.uniform(0.4, 1.0) * m["turn"] * rng.choice([-1, 1]) if "turn" in m else rng.uniform(-0.25, 0.25) * (not look.clean))


def _content(look: Look, rng: np.random.Generator, page: tuple[int, int], per_mm: float, line_px: float) -> tuple[list[Panel], list]:
    width, height = page
    below = 0.10 * height + (20 * per_mm if look.flow_scales else 0)
    x0, x1 = 0.13 * width, (0.82 if any(c in look.content for c in ("power", "npshr")) and look.panels == 1 else 0.88) * width
    top, bottom = 0.09 * height, height - below
    flow = pick_axis(rng, "flow", "bottom", look.scale, look.imperial, look.broken)
    more = []
    if look.flow_scales:
        low, high = flow.low, flow.high
        for k, (unit, factor) in enumerate((("l/s", 3.6), ("gal/min(US)", 0.22712470704), ("gal/min(imp)", 0.2727654))):
            step = _nice((high - low) / factor / 7)
            more.append(Axis("flow", unit, low / factor, high / factor, step, "bottom", offset_mm=9.0 * (k + 1)))
    panels: list[Panel] = []
    shapes: list[tuple[Panel, Shape]] = []
    heights = [1.0] if look.panels == 1 else [0.62, 0.38] if look.panels == 2 else [0.5, 0.25, 0.25]
    gap, y = 0.035 * height, top
    usable = bottom - top - gap * (look.panels - 1)
    wheel = pumps.wheel(rng)
    ratios = pumps.ratios(rng, int(rng.integers(look.wheels[0], look.wheels[1] + 1)))
    for k, share in enumerate(heights):
        box = (x0, y, x1, y + share * usable)
        y = box[3] + gap
        wanted = (
            look.content if look.panels == 1 else [tuple(c for c in look.content if c not in ("power", "npshr")), ("power",), ("npshr",)][k]
        )
        mine = _shapes(wanted, look, rng, wheel, ratios, 1.15 * line_px / (box[3] - box[1]))
        ys: list[Axis] = []
        for s in mine:
            if s.axis not in [a.quantity for a in ys]:
                right = sum(a.side == "right" for a in ys)
                side = "left" if not ys else "right"
                axis = pick_axis(
                    rng, s.axis, side, look.scale if s.axis == "head" else "linear", look.imperial, look.broken and s.axis == "head"
                )
                axis.offset_mm = 13.0 * right if side == "right" else 0.0
                ys.append(axis)
        panel = Panel(f"p{k}", box, flow, ys, more if k == look.panels - 1 else [], shares_flow_below=k < look.panels - 1)
        panels.append(panel)
        shapes += [(panel, s) for s in mine]
    return panels, shapes


def _nice(step: float) -> float:
    power = 10.0 ** np.floor(np.log10(step))
    return float(power * min((1, 2, 5, 10), key=lambda m: abs(np.log(m * power / step))))


def _shapes(wanted, look: Look, rng: np.random.Generator, wheel: pumps.Wheel, ratios: np.ndarray, line_share: float) -> list[Shape]:
    out: list[Shape] = []
    for name in wanted:
        if name == "heads":
            out += pumps.heads(wheel, ratios, rng)
        elif name == "dense":
            out += pumps.heads(wheel, pumps.ratios(rng, 9, (0.025, 0.035)), rng)
        elif name == "efficiency":
            out += pumps.efficiency(wheel, ratios[:1])
        elif name == "efficiencies":
            out += pumps.efficiency(wheel, ratios[:3])
        elif name == "merging":
            geometry = look.geometry or str(rng.choice(["rise", "touch", "asymptote", "tail"]))
            out += pumps.merging(wheel, rng, geometry, line_share, int(rng.integers(2, 4)))
        elif name == "power":
            out += pumps.powers(
                rng, ratios[:3] if look.panels == 1 else ratios, top=0.4 if look.panels == 1 and "heads" in wanted else None
            )
        elif name == "npshr":
            out += pumps.npshr(rng)
        elif name == "steep":
            out += pumps.steep(rng)
        elif name == "contours":
            out += pumps.contours(rng, int(rng.integers(look.loops[0], look.loops[1] + 1)), int(rng.integers(1, 4)))
        elif name == "loops":
            out += pumps.contours(rng, int(rng.integers(look.loops[0], look.loops[1] + 1)), 0)
        elif name == "ushapes":
            out += pumps.contours(rng, 0, 3)
        elif name == "log":
            out += pumps.log_lines(rng, int(rng.integers(3, 6)))
        else:
            raise ValueError(f"no content called {name}")
    return out


def _curve(
    scene: Scene, place: Placement, panel: Panel, shape: Shape, look: Look, rng: np.random.Generator,
    per_mm: float, line_px: float, index: int, diameter: int,
) -> Drawn:  # fmt: skip
    flat = panel.px(shape.q, shape.v)
    s = arc(flat)
    at = np.linspace(0, s[-1], int(s[-1]) + 1)
    shares = np.stack([np.interp(at, s, shape.q), np.interp(at, s, shape.v)], 1)
    flat = np.stack([np.interp(at, s, flat[:, k]) for k in (0, 1)], 1)
    if look.wobble_mm:
        turns = [2 * np.pi / (s[-1] / max(round(s[-1] / (w * per_mm)), 1)) for w in rng.uniform(18, 60, 3)]
        shift = sum(rng.uniform(0.2, 1.0) * np.sin(t * at + rng.uniform(0, 6.28)) for t in turns)
        e = np.gradient(flat, axis=0)
        flat = flat + look.wobble_mm * per_mm / 2 * shift[:, None] * np.stack([-e[:, 1], e[:, 0]], 1) / np.hypot(*e.T)[:, None]
    line = place(flat)
    pen = line_px * (0.85 if shape.quantity == "efficiency_iso" else 1.0) * (rng.uniform(0.9, 1.1) if look.engine == "any" else 1.0)
    style = "solid"
    if rng.random() < look.dashed_share:
        style = str(rng.choice([n for n in look.styles if n != "solid"] or ["dashed"]))
    length, intervals = arc(line)[-1], None
    if look.solid_then_dashed and shape.quantity == "head":
        split = rng.uniform(0.5, 0.75) * length
        dashes = dash_intervals(length, DASHES["dashed"], pen, split + 3 * pen)
        intervals, style = np.concatenate([[[0.0, split]], dashes]), "solid-dashed"
    elif style != "solid":
        intervals = dash_intervals(length, DASHES[style], pen)
    colour = COLOURS[index % len(COLOURS)] if look.coloured == "curves" else {"blue": COLOURS[0], "black": BLACK}.get(look.coloured, BLACK)
    label = (
        f"{shape.level:.0%}".replace("%", " %")
        if shape.level
        else f"{round(diameter * shape.ratio)}"
        if shape.quantity != "npshr"
        else "NPSH"
    )
    gap = bool(rng.random() < look.gaps)
    drawn = Drawn(panel, [a.quantity for a in panel.ys].index(shape.axis), shape, line, shares, style, pen, colour, label, gap)
    size = _letter(per_mm, pen)
    words: list[Blank | Words] = []
    if gap:
        share = rng.uniform(0.15, 0.85)
        middle, half = along(line, share), (0.33 * size * len(label) + 0.4 * size, 0.75 * size)
        e = along(line, min(share + 0.01, 1.0)) - along(line, share - 0.01)
        angle = float(np.degrees(np.arctan2(e[1], e[0])))
        angle = angle - 180 if angle > 90 else angle + 180 if angle < -90 else angle
        whole = rng.random() < 0.5 if look.gap_kind == "any" else look.gap_kind == "box"
        if whole:
            words.append(Blank(tuple(middle), half, angle))
        else:
            base = np.array([[0.0, length]]) if intervals is None else intervals
            intervals = without(base, share * length - half[0], share * length + half[0])
        words.append(Words(label, tuple(middle), size, angle, colour=colour))
    level = float(rng.uniform(0.88, 1.0)) if not look.clean else 1.0
    scene.items.append(Stroke(line, pen, level, colour, intervals, shape.closed))
    scene.items += words
    return drawn


def _letter(per_mm: float, pen: float) -> float:
    return max(2.4 * per_mm, 3.5 * pen, 8.0) * 0.8


def _labels(scene: Scene, curves: list[Drawn], look: Look, rng: np.random.Generator, per_mm: float) -> None:
    """Names at the ends of lines that carry none in a gap, or on leader lines with an arrow head."""
    for c in curves:
        if c.gap or c.shape.closed:
            continue
        size = _letter(per_mm, c.width)
        if look.leaders:
            at = along(c.line, rng.uniform(0.25, 0.8))
            way = np.array([rng.uniform(0.3, 1.0), rng.choice([-1, 1]) * rng.uniform(0.4, 1.0)])
            way *= rng.uniform(7, 16) * per_mm / np.hypot(*way)
            thin = max(0.5 * c.width, 0.8)
            scene.items.append(Stroke(resample(np.stack([at, at + way]), 1.0), thin, 0.95, c.colour))
            for turn in (-0.35, 0.35):
                w = way / np.hypot(*way) * 2.0 * per_mm
                barb = np.array([w[0] * np.cos(turn) - w[1] * np.sin(turn), w[0] * np.sin(turn) + w[1] * np.cos(turn)])
                scene.items.append(Stroke(resample(np.stack([at, at + barb]), 1.0), thin, 0.95, c.colour))
            scene.items.append(
                Words(c.label, tuple(at + way * 1.12 + (0.4 * size * len(c.label) * np.sign(way[0]), 0)), size, colour=c.colour)
            )
        elif rng.random() < 0.7:
            e = c.line[-1] - c.line[-6]
            e = e / max(np.hypot(*e), 1e-9)
            at = c.line[-1] + e * (0.9 * size + 0.25 * size * len(c.label)) + np.array([0.0, rng.uniform(-0.3, 0.3) * size])
            scene.items.append(Words(c.label, tuple(at), size, colour=c.colour))


__all__ = ["Chart", "Drawn", "compose"]
