"""The result document of a digitisation: plain, strict JSON in canonical units."""

import json
from typing import Any

import numpy as np

from .. import units
from ..jsonable import clean, digits, places
from ..records import Curve, Digitised, Finding, Fit, Notice, PanelResult


def result_json(made: Digitised) -> dict[str, Any]:
    """The result as a JSON-able dict (format 1, see DEVELOPERS.md). Pixels are rounded to 1e-4 px, values to nine digits."""
    page = made.page
    sheet: dict[str, Any] = {"file": made.sheet_file}
    if page is not None:
        sheet |= {name: getattr(page, name) for name in ("sha256", "page", "width", "height", "dpi_x", "dpi_y", "media", "turn", "pages")}
    pump = None if made.pump is None else {name: getattr(made.pump, name) for name in made.pump.__dataclass_fields__}
    return clean(
        {
            "result": 1,
            "sheet": sheet,
            "recipe_sha256": made.recipe_sha256,
            "made_by": dict(made.made_by),
            "pump": pump,
            "error": made.error,
            "panels": [panel_json(p) for p in made.panels],
            "curves": [curve_json(c, stages=made.pump.stages if made.pump else 1) for c in made.curves],
            "findings": [finding_json(f) for f in made.findings],
        }
    )


def dumps(made: Digitised) -> str:
    """The result as JSON text; NaN and infinities cannot occur."""
    return json.dumps(result_json(made), ensure_ascii=False, allow_nan=False, separators=(",", ":")) + "\n"


def panel_json(p: PanelResult) -> dict[str, Any]:
    """One calibrated panel with its map on a 9 x 9 grid."""
    return {
        "id": p.id,
        "outline": digits(p.outline, 6),
        "residual_px": p.residual_px,
        "worst_px": p.worst_px,
        "grid": {"used": p.grid.used, "lines": p.grid.lines, "residual_px": p.grid.residual_px, "why": p.grid.why},
        "map": {"pixels": places(p.map_pixels), "values": {k: digits(v) for k, v in p.map_values.items()}},
        "warnings": [notice_json(n) for n in p.warnings],
    }


def curve_json(c: Curve, *, stages: int = 1) -> dict[str, Any]:
    """One curve. A typed table has no place on paper: its ``pixels`` are the rows as printed, so each point keeps what was typed."""
    t = c.trace
    if t is not None:
        pixels, sigma_px = places(t.pixels), places(t.sigma_px)
    else:
        pixels, sigma_px = _typed_rows(c, stages), [0.0] * len(c.points)
    return {
        "id": c.id,
        "quantity": c.quantity,
        "panel": c.panel,
        "diameter_mm": c.diameter_mm,
        "speed_rpm": c.speed_rpm,
        "level": c.level,
        "label": c.label,
        "applies_to": c.applies_to,
        "group": c.group,
        "basis": c.basis,
        "kind": c.kind,
        "printed_units": [c.printed_x_unit, c.printed_y_unit],
        "pixels": pixels,
        "points": digits(c.points),
        "sigma_px": sigma_px,
        "sigma": digits(c.sigma, 5),
        "closed": bool(t.closed) if t else False,
        "confidence": t.confidence if t else (0.0 if c.error else 1.0),
        "flagged": bool(t.flagged) if t else bool(c.error),
        "stretches": [[int(a), int(b), why] for a, b, why in t.stretches] if t else [],
        "hint_click": list(t.hint_click) if t and t.hint_click else None,
        "spread": {k: float(v) for k, v in ({"calibration": 0.0, "reading": 0.0, "drawing": 0.0, "fit": 0.0} | c.spread).items()},
        "warnings": [notice_json(n) for n in c.warnings],
        "error": c.error,
        "fit": fit_json(c.fit),
    }


def _typed_rows(c: Curve, stages: int) -> list[Any]:
    if not len(c.points):
        return []
    q = units.from_canonical(c.points[:, 0], "flow", c.printed_x_unit)
    whole = stages if c.head_is == "per stage" and c.quantity == "head" else 1
    v = units.from_canonical(c.points[:, 1] * c.factor / whole, c.quantity, c.printed_y_unit)
    return digits(np.column_stack([q, v]))


def fit_json(f: Fit | None) -> dict[str, Any] | None:
    """A fit: plain powers of flow, and the scaled form t = (flow - mid) / half that loses no digits."""
    if f is None:
        return None
    return {
        "order": f.order,
        "domain": [f.lo, f.hi],
        "coefficients": [float(v) for v in f.plain],
        "mid": f.mid,
        "half": f.half,
        "scaled": [float(v) for v in f.scaled],
        "covariance": [[float(v) for v in row] for row in f.covariance],
        "sigma": f.sigma,
        "max_miss": f.max_miss,
        "max_miss_pct": f.max_miss_pct,
        "through_zero": f.through_zero,
    }


def finding_json(f: Finding) -> dict[str, Any]:
    """One finding with its key."""
    return {name: getattr(f, name) for name in f.__dataclass_fields__} | {"key": f.key}


def notice_json(n: Notice) -> dict[str, Any]:
    """One warning."""
    return {"code": n.code, "message": n.message, "stretch": list(n.stretch) if n.stretch else None}
