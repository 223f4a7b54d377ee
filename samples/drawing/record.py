"""What was drawn, written down: the recipe a person would have made by clicking, and the exact truth to judge by."""

import json

import numpy as np

from .geometry import arc_mm

PRINTED = {"m3/h": "m³/h", "gal/min(US)": "gal/min (US)"}


def _pairs(p):
    return [[round(float(x), 4), round(float(y), 4)] for x, y in p]


def _tick_px(page, panel, axis, value):
    if axis is panel.x:
        return page.px(panel.mm(value, panel.y[0].lo))[0]
    return page.px(panel.mm(panel.x.hi if axis.side == "right" else panel.x.lo, value, panel.y.index(axis)))[0]


def _axis(page, panel, axis, name, rng):
    ticks = [(v, _tick_px(page, panel, axis, v)) for v in axis.ticks]
    last = len(ticks) - 1
    clicks = {}
    for n, shares in ((2, (0, 1)), (3, (0, 0.5, 1)), (5, (0, 0.25, 0.5, 0.75, 1))):
        chosen = sorted({round(s * last) for s in shares})
        clicks[str(n)] = [
            {"value": round(ticks[i][0], 6), "px": [round(float(c), 2) for c in ticks[i][1] + np.clip(rng.normal(0, 0.6, 2), -1.2, 1.2)]}
            for i in chosen
        ]
    return {
        "name": name,
        "quantity": axis.title,
        "unit": PRINTED.get(axis.unit, axis.unit),
        "scale": "linear",
        "min": axis.lo,
        "max": axis.hi,
        "ticks": [{"value": round(v, 6), "px": [round(float(c), 4) for c in p]} for v, p in ticks],
        "clicks": clicks,
        "labelled": axis.numbers,
    }


def _panel(page, panel, rng):
    grid = []
    for v in np.linspace(0, 1, 5):
        for u in np.linspace(0, 1, 5):
            x = panel.x.lo + u * (panel.x.hi - panel.x.lo)
            y = [a.lo + v * (a.hi - a.lo) for a in panel.y]
            at = page.px(panel.mm(x, y[0]))[0]
            grid.append({"px": [round(float(c), 4) for c in at], "x": round(x, 6), "y": [round(w, 6) for w in y]})
    return {
        "id": panel.id,
        "polygon": _pairs(page.px(panel.rectangle())),
        "x": _axis(page, panel, panel.x, "x", rng),
        "y": [_axis(page, panel, a, f"y{i}", rng) for i, a in enumerate(panel.y)],
        "secondary_x": None,
        "true_grid": grid,
    }


def _curve(page, curve, rng):
    mm = curve.line_mm
    px = page.px(mm)
    s = arc_mm(px)
    keep = np.r_[True, np.diff(s) > 1e-9]
    n = max(2, round(s[-1] / 1.6) + 1)
    t = np.linspace(0, s[-1], n)
    columns = [px[:, 0], px[:, 1], np.asarray(curve.flow, float), np.asarray(curve.value, float)]
    line = np.stack([np.interp(t, s[keep], c[keep]) for c in columns], -1)
    clicks = {}
    for k in (2, 3, 5):
        shares = np.arange(k) / k + 0.04 if curve.closed else np.linspace(0.025, 0.975, k)
        at = line[np.rint(shares * (n - 1)).astype(int), :2] + rng.uniform(-2.4, 2.4, (k, 2))
        clicks[str(k)] = [[round(float(x), 2), round(float(y), 2)] for x, y in at]
    contour = curve.quantity.endswith("_contour")
    return {
        "id": curve.id,
        "panel": curve.panel.id,
        "y_axis": curve.y_axis,
        "quantity": "efficiency_iso" if curve.quantity == "efficiency_contour" else curve.quantity,
        "level": curve.level * 100 if contour else None,
        "closed": curve.closed,
        "diameter_mm": curve.diameter_mm,
        "rpm": curve.speed_rpm,
        "unit": curve.panel.y[curve.y_axis].unit,
        "style": curve.style,
        "color": [int(c) for c in curve.extra.get("colour", (20, 20, 22))],
        "width_px": round(curve.width_mm * page.dpi_x / 25.4, 2),
        "label": curve.label,
        "label_interrupts": curve.gap_at is not None,
        "note": curve.note,
        "line": [[round(float(a), 3), round(float(b), 3), float(f"{c:.7g}"), float(f"{d:.7g}")] for a, b, c, d in line],
        "clicks": clicks,
    }


def truth(name, image, page, title, mode, family, panels, curves, seed):
    """The truth document; ``rng`` of the clicks depends on ``seed`` alone, so that recipe and truth repeat exactly."""
    rng = np.random.default_rng([seed, 77])
    width, height = page.size
    return {
        "name": name,
        "image": image,
        "width": width,
        "height": height,
        "dpi": page.dpi_x,
        "mode": mode,
        "title": title,
        "pixel_convention": "centre of the top-left pixel is (0, 0); x right, y down",
        "distorted": bool(page.turn_deg or page.waves or page.curl or page.shear or page.barrel or any(page.tilt)),
        "wobble_px": 0.0,
        "affinity": family,
        "panels": [_panel(page, p, rng) for p in panels],
        "curves": [_curve(page, c, rng) for c in curves],
    }


def recipe(truth_doc, sheet, pump, panels, curves):
    """The recipe: three marks an axis, three clicks a line (five on a closed one), as clicked in the truth; no more."""
    out = {"recipe": 1, "sheet": sheet, "pump": pump, "panels": [], "curves": []}
    for panel, drawn in zip(panels, truth_doc["panels"], strict=True):
        axes = {}
        for axis, seen in zip([panel.x, *panel.y], [drawn["x"], *drawn["y"]], strict=True):
            marks = [{"at": c["px"], "value": c["value"]} for c in seen["clicks"]["3"]]
            axes[axis.id] = {"quantity": axis.quantity, "unit": axis.unit, "scale": "linear", "marks": marks}
        out["panels"].append({"id": panel.id, "axes": axes, "grid": panel.grid})
    for curve, drawn in zip(curves, truth_doc["curves"], strict=True):
        entry = {
            "id": curve.id,
            "panel": curve.panel.id,
            "x": curve.panel.x.id,
            "y": curve.panel.y[curve.y_axis].id,
            "quantity": curve.quantity,
            "diameter_mm": curve.diameter_mm,
            "speed_rpm": curve.speed_rpm,
            "clicks": drawn["clicks"]["5" if curve.closed else "3"],
            "closed": curve.closed,
        }
        if curve.level is not None:
            entry["value"] = curve.level
        else:
            entry["fit"] = {"order": "auto"}
        entry.update({k: v for k, v in curve.extra.items() if k != "colour"})
        out["curves"].append(entry)
    return out


def _compact(value, indent=1, depth=0):
    """JSON with one item a line down to short lists, which stay on one line: small files and readable diffs."""
    flat = json.dumps(value, ensure_ascii=False)
    if len(flat) <= 140 or not isinstance(value, dict | list):
        return flat
    pad, close = " " * indent * (depth + 1), " " * indent * depth
    if isinstance(value, dict):
        body = [f"{pad}{json.dumps(k, ensure_ascii=False)}: {_compact(v, indent, depth + 1)}" for k, v in value.items()]
        return "{\n" + ",\n".join(body) + f"\n{close}}}"
    return "[\n" + ",\n".join(pad + _compact(v, indent, depth + 1) for v in value) + f"\n{close}]"


def dump(document):
    """Text of a recipe or truth document."""
    return _compact(document) + "\n"
