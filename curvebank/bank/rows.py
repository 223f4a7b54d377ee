"""From a fresh digitisation to what a revision holds: packed records, trace bytes and columns.

Records carry the head of the whole pump, all stages, whatever the paper prints (``head_is`` remembers that); it is stored as it comes.
A failed curve is not stored as a curve but named with its error.
"""

import json
from typing import Any

import numpy as np

from ..errors import BankError
from ..records import Curve, Digitised, Finding, Fit, Notice, PanelResult
from . import pack

TRACE_POINTS = 200
MAX_ORDER = 8


def canonical_json(value: Any) -> str:
    """JSON with sorted keys and no spaces, so that equal values are equal text."""
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False, default=_plain)


def _plain(value: Any) -> Any:
    if hasattr(value, "tolist"):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} cannot be written as JSON")


def _notices(notices: tuple[Notice, ...]) -> list[dict[str, Any]]:
    return [{"code": n.code, "message": n.message, "stretch": None if n.stretch is None else [int(i) for i in n.stretch]} for n in notices]


def _fit(fit: Fit) -> dict[str, Any]:
    order = int(fit.order)
    if (
        not 0 <= order <= MAX_ORDER
        or len(fit.scaled) != order + 1
        or len(fit.plain) != order + 1
        or np.shape(fit.covariance) != (order + 1, order + 1)
    ):
        raise BankError(f"A fit of order {order} does not hold {order + 1} coefficients and their covariance.", code="bad-fit")
    return {
        "order": order,
        "lo": float(fit.lo),
        "hi": float(fit.hi),
        "mid": float(fit.mid),
        "half": float(fit.half),
        "scaled": fit.scaled,
        "covariance": fit.covariance,
        "plain": fit.plain,
        "sigma": float(fit.sigma),
        "max_miss": float(fit.max_miss),
        "max_miss_pct": float(fit.max_miss_pct),
        "through_zero": bool(fit.through_zero),
    }


def trace_bytes(pixels: Any, sigma_px: Any, points: Any, sigma: Any) -> tuple[int, bytes]:
    """At most 200 points as float32, field by field: x [px], y [px], sigma_px [px], flow, value, sigma. First and last point are kept."""
    count = len(points)
    n = min(count, TRACE_POINTS)
    at = np.round(np.linspace(0, count - 1, n)).astype(int)
    nothing = np.zeros(n)
    xy = np.asarray(pixels, dtype=float)[at] if len(pixels) == count else np.zeros((n, 2))
    width = np.asarray(sigma_px, dtype=float)[at] if len(sigma_px) == count else nothing
    value, u = np.asarray(points, dtype=float)[at], np.asarray(sigma, dtype=float)[at] if len(sigma) == count else nothing
    table = np.vstack([xy[:, 0], xy[:, 1], width, value[:, 0], value[:, 1], u]).astype("<f4")
    if not np.isfinite(table).all():
        raise BankError("A trace holds a point that is not finite. Look at the curve it belongs to.", code="not-finite")
    table[np.abs(table) < np.finfo(np.float32).tiny] = 0.0  # the SQL view reads normal numbers only
    return n, table.tobytes()


def _curve(curve: Curve, source: tuple[bytes | None, int], rated_rpm: float | None) -> tuple[dict[str, Any], bytes | None]:
    trace, raw = None, None
    if len(curve.points):
        t = curve.trace
        pixels, sigma_px = (t.pixels, t.sigma_px) if t is not None else ((), ())
        n, raw = trace_bytes(pixels, sigma_px, curve.points, curve.sigma)
        trace = {
            "n": n,
            "sha256": pack.sha256(raw),
            "traced": len(curve.points),
            "closed": bool(t.closed) if t else False,
            "confidence": float(t.confidence) if t else 1.0,
            "flagged": bool(t.flagged) if t else False,
            "source": t.source if t else curve.kind,
            "line_width_px": None if t is None or t.line_width_px is None else float(t.line_width_px),
            "hint_click": None if t is None or t.hint_click is None else [float(v) for v in t.hint_click],
            "stretches": [{"first": int(a), "last": int(b), "reason": why} for a, b, why in (t.stretches if t else ())],
            "warnings": _notices(t.warnings) if t else [],
        }
    number = lambda v: None if v is None else float(v)  # noqa: E731 - one line, used three times
    record = {
        "id": curve.id,
        "recipe_id": curve.id,
        "sheet_sha256": source[0],
        "page": source[1],
        "quantity": curve.quantity,
        "panel": curve.panel,
        "x_axis": curve.x_axis,
        "y_axis": curve.y_axis,
        "diameter_mm": number(curve.diameter_mm),
        "speed_rpm": number(curve.speed_rpm if curve.speed_rpm is not None else rated_rpm),
        "level": number(curve.level),
        "label": curve.label,
        "applies_to": curve.applies_to,
        "group": curve.group,
        "basis": curve.basis,
        "head_is": curve.head_is,
        "kind": curve.kind,
        "printed_x_unit": curve.printed_x_unit,
        "printed_y_unit": curve.printed_y_unit,
        "factor": float(curve.factor),
        "spread": {k: float(v) for k, v in curve.spread.items()},
        "warnings": _notices(curve.warnings),
        "trace": trace,
        "fit": None if curve.fit is None else _fit(curve.fit),
    }
    return record, raw


def _panel(panel: PanelResult, source: tuple[bytes | None, int]) -> dict[str, Any]:
    return {
        "id": panel.id,
        "sheet_sha256": source[0],
        "page": source[1],
        "outline": panel.outline,
        "map_pixels": panel.map_pixels,
        "map_values": dict(panel.map_values),
        "covariance": panel.covariance,
        "residual_px": float(panel.residual_px),
        "worst_px": float(panel.worst_px),
        "grid_used": bool(panel.grid.used),
        "grid_lines": int(panel.grid.lines),
        "grid_residual_px": None if panel.grid.residual_px is None else float(panel.grid.residual_px),
        "grid_why": panel.grid.why,
        "warnings": _notices(panel.warnings),
    }


def _finding(finding: Finding, source: tuple[bytes | None, int]) -> dict[str, Any]:
    number = lambda v: None if v is None else float(v)  # noqa: E731
    return {
        "rule": finding.rule,
        "severity": finding.severity,
        "subject": finding.subject,
        "message": finding.message,
        "measured": number(finding.measured),
        "limit": number(finding.limit),
        "unit": finding.unit,
        "source": finding.source,
        "action": finding.action,
        "where": canonical_json(finding.where),
        "key": finding.key,
        "sheet_sha256": source[0],
        "page": source[1],
    }


def fresh_parts(digitised: Digitised, source: tuple[bytes | None, int]) -> tuple[dict[str, list[dict[str, Any]]], dict[bytes, bytes]]:
    """What one sheet contributes to a revision, and its trace bytes by hash."""
    pump = digitised.pump
    if pump is None:
        raise BankError("A digitisation that failed as a whole is not saved. Cure its error first.", code="not-digitised")
    parts: dict[str, list[dict[str, Any]]] = {"panels": [], "curves": [], "failed": [], "findings": []}
    traces: dict[bytes, bytes] = {}
    for curve in digitised.curves:
        if curve.error is not None:
            code, message = str(curve.error.get("code", "curve")), str(curve.error.get("message", ""))
            failed = {
                "id": curve.id,
                "quantity": curve.quantity,
                "code": code,
                "message": message,
                "sheet_sha256": source[0],
                "page": source[1],
            }
            parts["failed"].append(failed)
            continue
        record, raw = _curve(curve, source, pump.speed_rpm)
        parts["curves"].append(record)
        if raw is not None:
            traces[record["trace"]["sha256"]] = raw
    parts["panels"] = [_panel(p, source) for p in digitised.panels if p.error is None]
    parts["findings"] = [_finding(f, source) for f in digitised.findings]
    return parts, traces


def curve_columns(record: dict[str, Any]) -> dict[str, Any]:
    """The columns of one packed curve: an index that can be rebuilt from the body at any time."""
    fit = record["fit"]
    label = record["label"]
    columns = {
        "local_id": record["id"],
        "quantity": record["quantity"],
        "diameter_mm": record["diameter_mm"],
        "speed_rpm": record["speed_rpm"],
        "level": record["level"],
        "applies_to": record["applies_to"],
        "label_by": label.get("by") if label else None,
        "label": label.get("printed") if label else None,
        "casting": record["group"],
        "basis": record["basis"],
        "kind": record["kind"],
        "sheet_sha256": record["sheet_sha256"],
        "page": record["page"],
        "orders": None,
        "q_lo": None,
        "q_hi": None,
        "q_mid": None,
        "q_half": None,
        "sigma": None,
        "max_miss": None,
        "cov": None,
        "sha256": pack.sha256(pack.pack_part(pack.CURVE, record)),
    }
    for k in range(MAX_ORDER + 1):
        columns[f"c{k}"] = columns[f"p{k}"] = None
    if fit is not None:
        columns.update(orders=fit["order"], q_lo=fit["lo"], q_hi=fit["hi"], q_mid=fit["mid"], q_half=fit["half"])
        columns.update(sigma=fit["sigma"], max_miss=fit["max_miss"], cov=np.ascontiguousarray(fit["covariance"], dtype="<f8").tobytes())
        for k in range(fit["order"] + 1):
            columns[f"c{k}"], columns[f"p{k}"] = float(fit["scaled"][k]), float(fit["plain"][k])
    return columns


def finding_json(record: dict[str, Any]) -> str:
    """A packed finding as the JSON of its row."""
    plain = {k: v for k, v in record.items() if k not in ("where", "sheet_sha256", "page")}
    plain["where"] = json.loads(record["where"])
    return canonical_json(plain)
