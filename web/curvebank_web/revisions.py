"""One stored revision as the pump page and scripts over HTTP want it: curves with their points on paper, findings, sheets, readings."""

import json
import warnings
from typing import Any

import numpy as np

from curvebank.bank import pack
from curvebank.digitise.result import clean, digits, places
from curvebank.errors import ExtrapolationWarning, NotFound
from curvebank.records import PageInfo

from . import catalogue
from .page_store import describe

FLOAT32_DIGITS = 7


def detail(bank: Any, key: str, number: int) -> dict[str, Any]:
    """Everything the bank holds of a revision, ready for JSON."""
    pump = catalogue.open_pump(bank, key, number)
    body = _body(bank, pump.revision_id)
    points = _points(bank, pump.revision_id)
    media = dict(bank.query("SELECT lower(hex(sha256)), media FROM sheet"))
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
            "quantities": pump.quantities,
            "diameters_mm": pump.diameters_mm,
            "speeds_rpm": pump.speeds_rpm,
            "bep": catalogue.best_point(pump),
            "curves": [_curve(c, points.get(c["id"])) for c in body["curves"]],
            "failed": [{**f, "sheet_sha256": _hex(f["sheet_sha256"])} for f in body["failed"]],
            "findings": pump.findings,
            "waivers": pump.waivers,
            "cautions": pump.cautions,
            "panels": [_panel(p) for p in body["panels"]],
            "sheets": [_sheet(s, media) for s in body["sources"]],
            "made_by": body["made_by"],
        }
    )


def values(
    bank: Any,
    key: str,
    number: int,
    *,
    quantity: str,
    flow_m3h: list[float],
    diameter_mm: float | None,
    speed_rpm: float | None,
    outside: str,
) -> dict[str, Any]:
    """A quantity at many flows with both uncertainties; null where the curve was not traced (``outside`` "nan")."""
    reading = catalogue.open_pump(bank, key, number).quantity(quantity)
    flow = np.array(flow_m3h, dtype=np.float64)
    plan = reading.plan(diameter_mm, speed_rpm)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ExtrapolationWarning)  # `inside` says it
        value = reading(flow, diameter_mm, speed_rpm, outside=outside)
        u = {of: reading.uncertainty(flow, diameter_mm, speed_rpm, of=of, outside=outside) for of in ("print", "machine")}
    return clean(
        {
            "quantity": quantity,
            "diameter_mm": diameter_mm,
            "speed_rpm": speed_rpm,
            "domain": [plan.lo, plan.hi],
            "rule": plan.rule,
            "curves": list(plan.curves),
            "notes": list(plan.notes),
            "flow_m3h": flow,
            "value": np.asarray(value),
            "u_print": np.asarray(u["print"]),
            "u_machine": np.asarray(u["machine"]),
            "inside": [bool(plan.holds(float(q))) for q in flow],
        }
    )


def recipe_of(bank: Any, key: str, number: int, sheet_sha256: str | None) -> dict[str, Any]:
    """The recipe document a revision was made from; of several sheets the one named, else the first. It names its sheet by SHA-256.

    Raises
    ------
    NotFound
        The revision does not come from that sheet.
    """
    pump = catalogue.open_pump(bank, key, number)
    rows = bank.query(
        "SELECT lower(hex(sheet_sha256)), page, bytes FROM revision_recipe JOIN blob ON blob.sha256 = recipe_sha256"
        " WHERE revision_id = ? ORDER BY revision_recipe.id",
        (pump.revision_id,),
    )
    for sha, _, raw in rows:
        if sheet_sha256 is None or sha == sheet_sha256:
            doc = json.loads(raw)
            if sha:
                doc["sheet"] = {**doc.get("sheet", {}), "sha256": sha}
            return doc
    raise NotFound(f"Revision {number} of {key} was not made from that sheet.", code="not-found")


def _body(bank: Any, revision_id: int) -> dict[str, Any]:
    rows = bank.query("SELECT bytes FROM revision JOIN blob ON blob.sha256 = body_sha256 WHERE revision.id = ?", (revision_id,))
    return pack.unpack(rows[0][0])


def _points(bank: Any, revision_id: int) -> dict[str, Any]:
    """Curve id -> array [6, n]: x [px], y [px], sigma_px, flow, value, sigma."""
    rows = bank.query("SELECT local_id, n, bytes FROM trace JOIN curve ON curve.id = curve_id WHERE revision_id = ?", (revision_id,))
    return {name: np.frombuffer(raw, dtype="<f4").reshape(6, n).astype(np.float64) for name, n, raw in rows}


def _hex(sha: bytes | None) -> str | None:
    return sha.hex() if sha else None


def _curve(record: dict[str, Any], table: Any) -> dict[str, Any]:
    names = (
        "id",
        "recipe_id",
        "page",
        "panel",
        "x_axis",
        "y_axis",
        "quantity",
        "diameter_mm",
        "speed_rpm",
        "level",
        "label",
        "applies_to",
        "group",
        "basis",
        "head_is",
        "kind",
        "factor",
        "spread",
        "warnings",
    )
    trace, fit = record["trace"], record["fit"]
    on_paper = table is not None and trace is not None and trace["source"] != "table" and record["panel"] is not None
    return {
        **{name: record[name] for name in names},
        "sheet_sha256": _hex(record["sheet_sha256"]),
        "printed_units": [record["printed_x_unit"], record["printed_y_unit"]],
        "closed": bool(trace and trace["closed"]),
        "confidence": trace["confidence"] if trace else None,
        "flagged": bool(trace and trace["flagged"]),
        "stretches": [[s["first"], s["last"], s["reason"]] for s in trace["stretches"]] if trace else [],
        "points": digits(table[3:5].T, FLOAT32_DIGITS) if table is not None else [],
        "sigma": digits(table[5], 4) if table is not None else [],
        "trace_pixels": places(table[0:2].T, 2) if on_paper else [],
        "fit": _fit(fit),
    }


def _fit(fit: dict[str, Any] | None) -> dict[str, Any] | None:
    if fit is None:
        return None
    kept = {
        name: fit[name] for name in ("order", "mid", "half", "scaled", "covariance", "sigma", "max_miss", "max_miss_pct", "through_zero")
    }
    return {**kept, "domain": [fit["lo"], fit["hi"]], "coefficients": fit["plain"]}


def _panel(record: dict[str, Any]) -> dict[str, Any]:
    grid = {
        "used": record["grid_used"],
        "lines": record["grid_lines"],
        "residual_px": record["grid_residual_px"],
        "why": record["grid_why"],
    }
    return {
        "id": record["id"],
        "sheet_sha256": _hex(record["sheet_sha256"]),
        "page": record["page"],
        "outline": places(record["outline"], 2),
        "residual_px": record["residual_px"],
        "worst_px": record["worst_px"],
        "grid": grid,
        "map": {"pixels": places(record["map_pixels"]), "values": {k: digits(v) for k, v in record["map_values"].items()}},
        "warnings": record["warnings"],
    }


def _sheet(record: dict[str, Any], media: dict[str, str]) -> dict[str, Any]:
    sha = _hex(record["sheet_sha256"])
    facts = {"recipe_sha256": _hex(record["recipe_sha256"]), "file_name": record["file_name"], "made_by": record["made_by"]}
    if sha is None:
        return {**facts, "sha256": None, "page": record["page"]}
    kind = media.get(sha, "")
    info = PageInfo(
        sha256=sha,
        page=record["page"],
        width=record["width"],
        height=record["height"],
        dpi_x=record["dpi_x"],
        dpi_y=record["dpi_y"],
        media=kind,
        turn=record["turn"],
    )
    dpi = record["dpi_x"] if kind == "application/pdf" and record["dpi_x"] else 300
    page = describe(info, dpi)
    del page["pages"]  # known to the page itself, not to the revision
    return {**facts, **page}
