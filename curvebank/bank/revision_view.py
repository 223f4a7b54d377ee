"""One stored revision in full, as plain dicts ready for JSON: curves with their points on paper, findings, sheets, recipes, readings.

Every function takes a `Bank`; a `Store` has one as ``bank``.
"""

import json
from typing import Any

import numpy as np

from ..jsonable import clean, digits, places
from . import catalogue, pack

FLOAT32_DIGITS = 7
CURVE_FIELDS = (
    "id recipe_id panel x_axis y_axis quantity diameter_mm speed_rpm level label applies_to group basis head_is kind factor spread warnings"
).split()
FIT_FIELDS = "order mid half scaled covariance sigma max_miss max_miss_pct through_zero".split()
SOURCE_FIELDS = "page file_name width height dpi_x dpi_y turn made_by".split()


def detail(bank: Any, key: str, number: int) -> dict[str, Any]:
    """Everything the bank holds of a revision.

    A curve's ``points`` are (flow, value) with ``sigma``, and its ``trace_pixels`` (x, y) with ``sigma_px``, of at most 200 stored trace
    points; a typed table has no pixels. Curves, panels, findings and failed curves name their sheet by ``sheet_sha256`` and ``page``.

    Raises
    ------
    NotFound
        No such pump or revision.
    """
    pump = catalogue.pinned(bank, key, number)
    body = _body(bank, pump.revision_id)
    traces = dict(
        bank.query("SELECT local_id, bytes FROM trace JOIN curve ON curve.id = curve_id WHERE revision_id = ?", (pump.revision_id,))
    )
    return clean(
        {
            "key": pump.key,
            "maker": pump.maker,
            "model": pump.model,
            "number": pump.revision,
            "state": pump.state,
            "saved_at": pump.saved_at,
            "released_at": pump.released_at,
            "who": pump.who,
            "why": pump.why,
            "parent": body["parent"],
            "stages": pump.stages,
            "rated_rpm": pump.rated_rpm,
            "density_kgm3": pump.density_kgm3,
            "type": body["type"],
            "inlet": body["inlet"],
            "read_rule": pump.read_rule,
            "rule": body["rule"],
            "settings": pump.settings,
            "quantities": pump.quantities,
            "diameters_mm": pump.diameters_mm,
            "speeds_rpm": pump.speeds_rpm,
            "bep": catalogue.best_point(pump),
            "curves": [_curve(record, traces.get(record["id"])) for record in body["curves"]],
            "failed": [_failed(record) for record in body["failed"]],
            "findings": [_finding(record) for record in body["findings"]],
            "waivers": pump.waivers,
            "cautions": pump.cautions,
            "panels": [_panel(record) for record in body["panels"]],
            "sheets": [_sheet(bank, record) for record in body["sources"]],
            "events": [e for e in catalogue.events(bank, pump.pump_id) if e["revision"] == pump.revision],
            "made_by": body["made_by"],
        }
    )


def _body(bank: Any, revision_id: int) -> dict[str, Any]:
    rows = bank.query("SELECT bytes FROM revision JOIN blob ON blob.sha256 = body_sha256 WHERE revision.id = ?", (revision_id,))
    return pack.unpack(rows[0][0])


def _hex(sha256: bytes | None) -> str | None:
    return None if sha256 is None else sha256.hex()


def _place(record: dict[str, Any]) -> dict[str, Any]:
    return {"sheet_sha256": _hex(record["sheet_sha256"]), "page": record["page"]}


def _curve(record: dict[str, Any], raw: bytes | None) -> dict[str, Any]:
    table = np.frombuffer(raw, "<f4").reshape(6, -1).astype(np.float64) if raw else np.empty((6, 0))
    trace, fit = record["trace"], record["fit"]
    on_paper = trace is not None and trace["source"] != "table" and record["panel"] is not None
    return {
        **{name: record[name] for name in CURVE_FIELDS},
        **_place(record),
        "printed_units": [record["printed_x_unit"], record["printed_y_unit"]],
        "source": trace["source"] if trace else None,
        "traced": trace["traced"] if trace else 0,
        "closed": bool(trace and trace["closed"]),
        "confidence": trace["confidence"] if trace else None,
        "flagged": bool(trace and trace["flagged"]),
        "line_width_px": trace["line_width_px"] if trace else None,
        "stretches": [[s["first"], s["last"], s["reason"]] for s in trace["stretches"]] if trace else [],
        "points": digits(table[3:5].T, FLOAT32_DIGITS),
        "sigma": digits(table[5], 4),
        "trace_pixels": places(table[:2].T, 2) if on_paper else [],
        "sigma_px": digits(table[2], 4) if on_paper else [],
        "fit": None if fit is None else _fit(fit),
    }


def _fit(fit: dict[str, Any]) -> dict[str, Any]:
    return {**{name: fit[name] for name in FIT_FIELDS}, "domain": [fit["lo"], fit["hi"]], "coefficients": fit["plain"]}


def _panel(record: dict[str, Any]) -> dict[str, Any]:
    return {
        "id": record["id"],
        **_place(record),
        "outline": places(record["outline"], 2),
        "residual_px": record["residual_px"],
        "worst_px": record["worst_px"],
        "grid": {name: record[f"grid_{name}"] for name in ("used", "lines", "residual_px", "why")},
        "map": {"pixels": places(record["map_pixels"]), "values": {k: digits(v) for k, v in record["map_values"].items()}},
        "warnings": record["warnings"],
    }


def _failed(record: dict[str, Any]) -> dict[str, Any]:
    error = {"code": record["code"], "message": record["message"]}
    return {"id": record["id"], "quantity": record["quantity"], "error": error, **_place(record)}


def _finding(record: dict[str, Any]) -> dict[str, Any]:
    return {**record, "where": json.loads(record["where"]), **_place(record)}


def _sheet(bank: Any, record: dict[str, Any]) -> dict[str, Any]:
    """A source of the revision; one without a scan (a typed table) has no size."""
    sha256 = _hex(record["sheet_sha256"])
    facts = {"sha256": sha256, "recipe_sha256": _hex(record["recipe_sha256"])}
    if sha256 is None:
        return {**facts, **{name: record[name] for name in ("page", "file_name", "made_by")}}
    kept = catalogue.sheet_facts(bank, sha256)
    return {**facts, "media": kept["media"], "pages": kept["pages"], **{name: record[name] for name in SOURCE_FIELDS}}


def recipes(bank: Any, key: str, number: int) -> list[dict[str, Any]]:
    """The recipes of a revision with their sheets: ``{sheet_sha256, page, file_name, recipe_sha256, recipe}`` (``recipe`` as bytes)."""
    body = _body(bank, catalogue.pinned(bank, key, number).revision_id)
    return [
        {
            **_place(source),
            "file_name": source["file_name"],
            "recipe_sha256": source["recipe_sha256"].hex(),
            "recipe": catalogue.blob(bank, source["recipe_sha256"].hex())[1],
        }
        for source in body["sources"]
    ]


def values(
    bank: Any,
    key: str,
    number: int,
    quantity: str,
    flow_m3h: list[float],
    *,
    diameter_mm: float | None = None,
    speed_rpm: float | None = None,
    outside: str = "nan",
) -> dict[str, Any]:
    """A quantity at a list of flows: value, both uncertainties, and which flows lie inside what was traced.

    Outside it a value is None, or continued as far as `Quantity` does with ``outside="extrapolate"``: ``inside`` says so, no warning does.

    Raises
    ------
    OutsideDomain
        The diameter is outside what was traced, or no such curve.
    """
    reading = catalogue.pinned(bank, key, number).quantity(quantity)
    plan = reading.plan(diameter_mm, speed_rpm)
    flows = np.array(flow_m3h, dtype=np.float64)
    inside = np.array([bool(plan.holds(q)) for q in flows], dtype=bool)

    def read(of: str | None) -> Any:
        if of is None:
            got = np.array(reading(flows, diameter_mm, speed_rpm, outside="nan"))
        else:
            got = np.array(reading.uncertainty(flows, diameter_mm, speed_rpm, of=of, outside="nan"))
        if outside == "extrapolate":
            for i in np.flatnonzero(~inside):
                got[i] = reading._scalar(plan, float(flows[i]), "extrapolate", of, quiet=True)
        return got

    return clean(
        {
            "quantity": quantity,
            "diameter_mm": diameter_mm,
            "speed_rpm": speed_rpm,
            "domain": [plan.lo, plan.hi],
            "rule": plan.rule,
            "curves": plan.curves,
            "notes": plan.notes,
            "flow_m3h": flows,
            "value": read(None),
            "u_print": read("print"),
            "u_machine": read("machine"),
            "inside": inside,
        }
    )


def duty(bank: Any, key: str, number: int, **system: Any) -> dict[str, Any]:
    """``{"duties": [...]}``, each with the fields of `duty.Duty`: ``system`` goes to `Pump.duty`."""
    return clean({"duties": [found._asdict() for found in catalogue.pinned(bank, key, number).duty(**system)]})
