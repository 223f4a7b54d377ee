"""Truth and recipe of a drawn sheet, in the form of NAME.truth.json and NAME.recipe.json: clicks within 3 px, marks within 1.5 px."""

from typing import Any

import numpy as np

from .chart import Chart, Drawn
from .panel import Axis, Panel
from .scene import along

CLICK_PX, MARK_PX = 3.0, 1.5
PRINTED = {"flow": "Q", "head": "H", "power": "P", "efficiency": "Eta", "npshr": "NPSHr"}


def _round(xy: np.ndarray, digits: int = 2) -> list[Any]:
    return np.round(np.asarray(xy, float), digits).tolist()


def truth_of(chart: Chart, final: Any, rng: np.random.Generator, about: dict[str, Any]) -> dict[str, Any]:
    """``final`` carries page px to the px of the file (a fax has fewer rows)."""
    moved = len(chart.place.words) > 1
    return {
        **about,
        "pixel_convention": "centre of the top-left pixel is (0, 0); x right, y down",
        "distorted": moved,
        "affinity": {"law": "Q~D^a, H~D^b", "a": 1, "b": 2, "dmax_mm": chart.diameter_mm, "shifted": None, "mislabelled": None},
        "panels": [_panel(chart, p, final, rng) for p in chart.panels],
        "curves": [_curve(chart, c, f"c{i:02d}", final, rng) for i, c in enumerate(chart.curves)],
    }  # fmt: skip


def _panel(chart: Chart, panel: Panel, final: Any, rng: np.random.Generator) -> dict[str, Any]:
    t = np.linspace(0, 1, 21)
    edge = np.concatenate([panel.px(t, 1.0)[:-1], panel.px(1.0, 1 - t)[:-1], panel.px(1 - t, 0.0)[:-1], panel.px(0.0, t)[:-1]])
    grid = []
    for v in np.linspace(0, 1, 5):
        for q in np.linspace(0, 1, 5):
            at = final(chart.place(panel.px(q, v)[None]))[0]
            grid.append({"px": _round(at, 3), "x": float(panel.x.value(q)), "y": [float(a.value(v)) for a in panel.ys]})
    return {
        "id": panel.id,
        "polygon": _round(final(chart.place(edge))),
        "x": _axis(chart, panel, panel.x, "x", final, rng),
        "y": [_axis(chart, panel, a, f"y{i}", final, rng) for i, a in enumerate(panel.ys)],
        "secondary_x": [_axis(chart, panel, a, f"x{i + 1}", final, rng) for i, a in enumerate(panel.more_x)] or None,
        "true_grid": grid,
    }


def _axis(chart: Chart, panel: Panel, axis: Axis, name: str, final: Any, rng: np.random.Generator) -> dict[str, Any]:
    values = axis.ticks()
    at = final(chart.place(panel.tick_px(axis, values, chart.per_mm)))
    clicks = {}
    for n in (2, 3, 5):
        inner = np.rint(np.linspace(0, len(values) - 1, n)).astype(int)
        if n == 3 and len(values) > 3:
            inner[1] = int(rng.integers(1, len(values) - 1))
        inner = np.unique(inner)
        clicks[str(n)] = [{"value": float(values[k]), "px": _round(at[k] + rng.uniform(-MARK_PX, MARK_PX, 2))} for k in inner]
    return {
        "name": name, "quantity": PRINTED[axis.quantity], "unit": axis.unit, "scale": axis.scale, "min": axis.low, "max": axis.high,
        "ticks": [{"value": float(v), "px": _round(p, 4)} for v, p in zip(values, at, strict=True)], "clicks": clicks,
    }  # fmt: skip


def _curve(chart: Chart, c: Drawn, name: str, final: Any, rng: np.random.Generator) -> dict[str, Any]:
    line = final(c.line)
    step = max(int(round(1.6 / max(np.hypot(*(line[1] - line[0])), 1e-9))), 1)
    keep = np.unique(np.r_[np.arange(0, len(line), step), len(line) - 1])
    values = np.stack([c.panel.x.value(c.shares[:, 0]), c.panel.ys[c.axis].value(c.shares[:, 1])], 1)
    rows = np.concatenate([np.round(line[keep], 3), np.round(values[keep], 6)], 1)
    return {
        "id": name, "panel": c.panel.id, "y_axis": c.axis, "quantity": c.shape.quantity,
        "level": None if c.shape.level is None else round(100 * c.shape.level, 3), "closed": c.shape.closed,
        "diameter_mm": None if c.shape.quantity in ("npshr", "efficiency_iso") else round(chart.diameter_mm * c.shape.ratio, 1),
        "rpm": 1450, "unit": c.panel.ys[c.axis].unit, "style": c.style, "color": [round(255 * v) for v in c.colour],
        "width_px": round(c.width, 3), "label": c.label, "label_interrupts": c.gap, "note": c.shape.note,
        "line": rows.tolist(), "clicks": _clicks(line, c.shape.closed, rng),
    }  # fmt: skip


def _clicks(line: np.ndarray, closed: bool, rng: np.random.Generator) -> dict[str, Any]:
    out = {}
    for n in (2, 3, 5):
        if closed:
            share = (np.linspace(0, 1, n + 1)[:-1] + rng.uniform(0, 0.2)) % 1.0
        else:
            share = np.linspace(rng.uniform(0.008, 0.03), rng.uniform(0.97, 0.992), n)
            share[1:-1] += rng.uniform(-0.04, 0.04, n - 2)
        at = np.stack([along(line, s) for s in share])
        out[str(n)] = _round(at + rng.uniform(-CLICK_PX, CLICK_PX, at.shape))
    return out


def recipe_of(truth: dict[str, Any], file: str, all_scales: bool = False) -> dict[str, Any]:
    """Three marks an axis and three clicks a curve; ``all_scales`` adds the further flow scales as axes of their own."""
    panels = []
    names: dict[tuple[str, int], str] = {}
    for p in truth["panels"]:
        axes = {"flow": _recipe_axis(p["x"], "flow")}
        for i, extra in enumerate((p["secondary_x"] or []) if all_scales else []):
            axes[f"flow{i + 2}"] = _recipe_axis(extra, "flow")
        for i, y in enumerate(p["y"]):
            quantity = next(k for k, printed in PRINTED.items() if printed == y["quantity"])
            names[p["id"], i] = quantity if i == 0 else f"{quantity}{i}"
            axes[names[p["id"], i]] = _recipe_axis(y, quantity)
        panels.append({"id": p["id"], "axes": axes, "grid": "auto"})
    curves = []
    for c in truth["curves"]:
        contour = c["quantity"] == "efficiency_iso"
        row = {
            "id": c["id"], "panel": c["panel"], "x": "flow", "y": names[c["panel"], c["y_axis"]],
            "quantity": "efficiency_contour" if contour else c["quantity"], "diameter_mm": c["diameter_mm"], "speed_rpm": c["rpm"],
            "clicks": c["clicks"]["3"], "closed": c["closed"],
        }  # fmt: skip
        curves.append(row | ({"value": round(c["level"] / 100, 5)} if contour else {}))
    return {
        "recipe": 1,
        "sheet": {"file": file, "page": 1},
        "pump": {"maker": "Drawn sheets", "model": truth["name"], "stages": 1, "speed_rpm": 1450},
        "panels": panels,
        "curves": curves,
    }


def _recipe_axis(axis: dict[str, Any], quantity: str) -> dict[str, Any]:
    marks = [{"at": m["px"], "value": m["value"]} for m in axis["clicks"]["3"]]
    return {"quantity": quantity, "unit": axis["unit"], "scale": "log10" if axis["scale"] == "log" else "linear", "marks": marks}
