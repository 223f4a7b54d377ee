"""What the web app and the command line list and show: plain dicts, ready for JSON.

Every function takes a `Bank`; a `Store` has one as ``bank``.
"""

import json
from typing import Any

import numpy as np

from ..errors import BankError, CurvebankError, NotFound
from . import pack
from .pump import Pump
from .reader import PUMP_SQL

STATES = ("draft", "submitted", "released", "superseded", "withdrawn")
SHOWN = (
    "coalesce((SELECT revision_id FROM release_span WHERE pump_id = pump.id AND valid_to IS NULL),"
    " (SELECT id FROM revision AS last WHERE last.pump_id = pump.id ORDER BY number DESC LIMIT 1))"
)
"""The revision a list shows: the released one, or else the latest."""


def counts(bank: Any) -> dict[str, int]:
    """How many pumps, revisions, released pumps, sheets and curves (of shown revisions) there are."""
    sql = (
        "SELECT (SELECT count(*) FROM pump), (SELECT count(*) FROM revision), (SELECT count(*) FROM release_span WHERE valid_to IS NULL),"
        f" (SELECT count(*) FROM sheet), (SELECT count(*) FROM pump JOIN curve ON curve.revision_id = {SHOWN})"
    )
    return dict(zip(("pumps", "revisions", "released", "sheets", "curves"), bank.query(sql)[0], strict=True))


def list_pumps(bank: Any, *, q: str | None = None, state: str | None = None, cursor: str | None = None, limit: int = 50) -> dict[str, Any]:
    """One page of the catalogue in the order of the key: ``{"items": [...], "next": cursor or None}``.

    Parameters
    ----------
    q : str, optional
        Words that each occur in key, maker or model, in any case.
    state : str, optional
        Only pumps whose shown revision is in that state.
    cursor : str, optional
        ``next`` of the page before.

    Returns
    -------
    dict
        An item has key, maker, model, state, revision, stages, rated_rpm, diameters_mm, quantities, bep {flow_m3h, head_m} or None, and the
        number of findings by severity.
    """
    if state is not None and state not in STATES:
        raise BankError(f"“{state}” is not a state. Known: {', '.join(STATES)}.", code="usage")
    limit = min(max(int(limit), 1), 500)
    where, values = ["pump.key > ?"], [cursor or ""]
    for word in (q or "").split():
        like = "%" + word.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_") + "%"
        where.append("(pump.key LIKE ? ESCAPE '\\' OR maker.name LIKE ? ESCAPE '\\' OR pump.model LIKE ? ESCAPE '\\')")
        values += [like] * 3
    if state is not None:
        where.append("(SELECT state FROM revision_state WHERE revision_state.revision_id = revision.id) = ?")
        values.append(state)
    rows = bank.query(f"{PUMP_SQL} WHERE revision.id = {SHOWN} AND {' AND '.join(where)} ORDER BY pump.key LIMIT ?", (*values, limit + 1))
    items = [_item(Pump(bank, row)) for row in rows[:limit]]
    return {"items": items, "next": items[-1]["key"] if len(rows) > limit else None}


def _item(pump: Pump) -> dict[str, Any]:
    try:
        best = pump.bep()
    except CurvebankError:
        best = None
    return {
        "key": pump.key,
        "maker": pump.maker,
        "model": pump.model,
        "state": pump.state,
        "revision": pump.revision,
        "stages": pump.stages,
        "rated_rpm": pump.rated_rpm,
        "diameters_mm": list(pump.diameters_mm),
        "quantities": list(pump.quantities),
        "bep": None if best is None else {"flow_m3h": best.flow_m3h, "head_m": best.head_m},
        "findings": _severities(pump._bank, pump.revision_id),
    }


def _severities(bank: Any, revision_id: int) -> dict[str, int]:
    found = dict(bank.query("SELECT severity, count(*) FROM finding WHERE revision_id = ? GROUP BY severity", (revision_id,)))
    return {severity: found.get(severity, 0) for severity in ("error", "warning", "note")}


def pump_detail(bank: Any, key: str) -> dict[str, Any]:
    """One pump with its revisions and its events.

    Raises
    ------
    NotFound
        No such pump.
    """
    pump_id, key = bank.resolve(key)
    revisions = [
        {"number": number, "state": state, "saved_at": at, "who": who, "why": why, "parent": parent}
        for number, state, at, who, why, parent in bank.query(
            "SELECT revision.number, state, saved_at, who, why, (SELECT number FROM revision AS p WHERE p.id = revision.parent_id)"
            " FROM revision JOIN revision_state ON revision_state.revision_id = revision.id"
            " WHERE revision.pump_id = ? ORDER BY revision.number",
            (pump_id,),
        )
    ]
    released = next((r["number"] for r in revisions if r["state"] == "released"), None)
    maker, model = bank.query("SELECT maker.name, model FROM pump JOIN maker ON maker.id = maker_id WHERE pump.id = ?", (pump_id,))[0]
    shown = bank.query("SELECT stages, rated_rpm FROM revision WHERE pump_id = ? ORDER BY number DESC LIMIT 1", (pump_id,))
    stages, rated = shown[0] if shown else (1, None)
    return {
        "key": key,
        "maker": maker,
        "model": model,
        "stages": stages,
        "rated_rpm": rated,
        "revisions": revisions,
        "released": released,
        "events": events(bank, pump_id),
    }


def events(bank: Any, pump_id: int) -> list[dict[str, Any]]:
    """The events of a pump, oldest first, with the hash that links each to the one before."""
    rows = bank.query(
        "SELECT seq, at, event.who, kind, revision.number, event.why, json, event.sha256 FROM event"
        " LEFT JOIN revision ON revision.id = event.revision_id WHERE event.pump_id = ? ORDER BY seq",
        (pump_id,),
    )
    names = ("seq", "at", "who", "kind", "revision", "why")
    return [{**dict(zip(names, row, strict=False)), "more": json.loads(row[6]), "sha256": row[7].hex()} for row in rows]


def _body(bank: Any, key: str, number: int) -> tuple[int, int, str, dict[str, Any]]:
    pump_id, key = bank.resolve(key)
    rows = bank.query(
        "SELECT revision.id, bytes FROM revision JOIN blob ON blob.sha256 = body_sha256 WHERE pump_id = ? AND number = ?", (pump_id, number)
    )
    if not rows:
        numbers = ", ".join(str(n) for (n,) in bank.query("SELECT number FROM revision WHERE pump_id = ? ORDER BY number", (pump_id,)))
        raise NotFound(f"{key} has no revision {number}. It has {numbers}.", code="not-found")
    return pump_id, rows[0][0], key, pack.unpack(rows[0][1])


def pinned(bank: Any, key: str, number: int) -> Pump:
    """The readable pump of a revision in any state, without the warning a script gets for a withdrawn one.

    Raises
    ------
    NotFound
        No such pump or revision.
    """
    pump_id, key = bank.resolve(key)
    rows = bank.query(PUMP_SQL + " WHERE pump.id = ? AND revision.number = ?", (pump_id, number))
    if not rows:
        raise NotFound(f"{key} has no revision {number}.", code="not-found")
    return Pump(bank, rows[0])


def revision_detail(bank: Any, key: str, number: int) -> dict[str, Any]:
    """One revision in full: curves with fits and trace points, panels, failed curves, findings, waivers, cautions, sheets.

    A curve's ``points`` are (flow, value) and ``trace_pixels`` (x, y) of at most 200 stored trace points, with ``sigma`` and ``sigma_px``;
    ``sheet`` is the index of its scan in ``sheets``.
    """
    pump_id, revision_id, key, body = _body(bank, key, number)
    pump = pinned(bank, key, number)
    sheets = [_sheet(bank, source) for source in body["sources"]]
    index = {(source["sheet_sha256"], source["page"]): i for i, source in enumerate(body["sources"])}
    raw = dict(
        bank.query("SELECT local_id, trace.bytes FROM curve JOIN trace ON curve_id = curve.id WHERE revision_id = ?", (revision_id,))
    )
    state, *_ = bank.query("SELECT state FROM revision_state WHERE revision_id = ?", (revision_id,))[0]
    plain = (
        "number",
        "parent",
        "saved_at",
        "who",
        "why",
        "maker",
        "model",
        "stages",
        "rated_rpm",
        "density_kgm3",
        "type",
        "inlet",
        "read_rule",
    )
    return {
        "key": key,
        **{name: body[name] for name in plain},
        "state": state,
        "released_at": pump.released_at,
        "rule": {k: v.tolist() for k, v in body["rule"].items()},
        "made_by": body["made_by"],
        "settings": {k: json.loads(v) for k, v in body["settings"].items()},
        "diameters_mm": list(pump.diameters_mm),
        "speeds_rpm": list(pump.speeds_rpm),
        "quantities": list(pump.quantities),
        "sheets": sheets,
        "curves": [_curve(record, raw.get(record["id"]), index) for record in body["curves"]],
        "panels": [_panel(panel, index) for panel in body["panels"]],
        "failed": [_failed(f, index) for f in body["failed"]],
        "findings": [_finding(f, index) for f in body["findings"]],
        "waivers": pump.waivers,
        "cautions": pump.cautions,
        "events": [e for e in events(bank, pump_id) if e["revision"] == number],
    }


def _sheet(bank: Any, source: dict[str, Any]) -> dict[str, Any]:
    rows = bank.query("SELECT media, pages FROM sheet WHERE sha256 = ?", (source["sheet_sha256"],))
    media, pages = rows[0] if rows else ("", 0)
    hexed = {name: None if source[name] is None else source[name].hex() for name in ("sheet_sha256", "recipe_sha256")}
    plain = {name: source[name] for name in ("page", "file_name", "width", "height", "dpi_x", "dpi_y", "turn", "made_by")}
    return {"sha256": hexed["sheet_sha256"], "recipe_sha256": hexed["recipe_sha256"], "media": media, "pages": pages, **plain}


def _curve(record: dict[str, Any], raw: bytes | None, index: dict[Any, int]) -> dict[str, Any]:
    plain = (
        "id quantity panel x_axis y_axis diameter_mm speed_rpm level label applies_to group basis head_is kind printed_x_unit "
        "printed_y_unit factor spread warnings"
    ).split()
    out = {name: record[name] for name in plain}
    out["sheet"] = index.get((record["sheet_sha256"], record["page"]))
    table = np.frombuffer(raw, "<f4").reshape(6, -1).astype(float) if raw else np.empty((6, 0))
    out["trace_pixels"] = table[:2].T.tolist()
    out["sigma_px"], out["sigma"] = table[2].tolist(), table[5].tolist()
    out["points"] = table[3:5].T.tolist()
    trace, fit = record["trace"], record["fit"]
    names = ("traced", "closed", "confidence", "flagged", "source", "line_width_px", "stretches")
    out["trace"] = {name: trace[name] for name in names} | {"warnings": trace["warnings"]} if trace else None
    out["fit"] = None
    if fit is not None:
        out["fit"] = {
            "order": fit["order"],
            "domain": [fit["lo"], fit["hi"]],
            "mid": fit["mid"],
            "half": fit["half"],
            "scaled": fit["scaled"].tolist(),
            "coefficients": fit["plain"].tolist(),
            "covariance": fit["covariance"].tolist(),
            "sigma": fit["sigma"],
            "max_miss": fit["max_miss"],
            "max_miss_pct": fit["max_miss_pct"],
            "through_zero": fit["through_zero"],
        }
    return out


def _panel(panel: dict[str, Any], index: dict[Any, int]) -> dict[str, Any]:
    return {
        "id": panel["id"],
        "sheet": index.get((panel["sheet_sha256"], panel["page"])),
        "outline": panel["outline"].tolist(),
        "map": {"pixels": panel["map_pixels"].tolist(), "values": {k: v.tolist() for k, v in panel["map_values"].items()}},
        "residual_px": panel["residual_px"],
        "worst_px": panel["worst_px"],
        "grid": {
            "used": panel["grid_used"],
            "lines": panel["grid_lines"],
            "residual_px": panel["grid_residual_px"],
            "why": panel["grid_why"],
        },
        "warnings": panel["warnings"],
    }


def _failed(failed: dict[str, Any], index: dict[Any, int]) -> dict[str, Any]:
    error = {"code": failed["code"], "message": failed["message"]}
    sheet = index.get((failed["sheet_sha256"], failed["page"]))
    return {"id": failed["id"], "quantity": failed["quantity"], "error": error, "sheet": sheet}


def _finding(finding: dict[str, Any], index: dict[Any, int]) -> dict[str, Any]:
    names = ("rule", "severity", "subject", "message", "measured", "limit", "unit", "source", "action", "key")
    where, sheet = json.loads(finding["where"]), index.get((finding["sheet_sha256"], finding["page"]))
    return {**{name: finding[name] for name in names}, "where": where, "sheet": sheet}


def values(
    bank: Any,
    key: str,
    number: int,
    quantity: str,
    flow_m3h: list[float],
    *,
    diameter_mm: float | None = None,
    speed_rpm: float | None = None,
) -> dict[str, Any]:
    """A quantity at a list of flows: value and both uncertainties, None where the flow is outside what was traced.

    Raises
    ------
    OutsideDomain
        The diameter is outside what was traced, or no such curve.
    """
    reading = pinned(bank, key, number).quantity(quantity)
    plan = reading.plan(diameter_mm, speed_rpm)
    out: dict[str, Any] = {"quantity": quantity, "flow_m3h": list(flow_m3h), "domain": [plan.lo, plan.hi], "notes": list(plan.notes)}
    out["inside"] = [bool(plan.holds(q)) for q in flow_m3h]

    def listed(call: Any, **more: Any) -> list[float | None]:
        return [call(float(q), diameter_mm, speed_rpm, **more) if ok else None for q, ok in zip(flow_m3h, out["inside"], strict=True)]

    out["value"] = listed(reading)
    out["u_print"], out["u_machine"] = listed(reading.uncertainty, of="print"), listed(reading.uncertainty, of="machine")
    return out


def duty(bank: Any, key: str, number: int, **system: Any) -> dict[str, Any]:
    """Duties of a revision as dicts: ``system`` goes to `Pump.duty`."""
    return {"duties": [d._asdict() for d in pinned(bank, key, number).duty(**system)]}


def blob(bank: Any, sha256_hex: str) -> tuple[str, bytes]:
    """(kind, bytes) of something kept whole: a sheet, recipe or body.

    Raises
    ------
    NotFound
        The bank does not keep it.
    """
    try:
        sha = bytes.fromhex(sha256_hex)
    except ValueError:
        sha = b""
    rows = bank.query("SELECT kind, bytes FROM blob WHERE sha256 = ?", (sha,))
    if not rows:
        raise NotFound(f"The bank keeps nothing under the hash {sha256_hex[:12]}.", code="not-found")
    return rows[0]


def sheet_bytes(bank: Any, sha256_hex: str) -> tuple[bytes, str, str]:
    """(bytes, file name, media type) of a kept sheet.

    Raises
    ------
    NotFound
        No such sheet.
    """
    kind, raw = blob(bank, sha256_hex)
    rows = bank.query("SELECT file_name, media FROM sheet WHERE sha256 = ?", (bytes.fromhex(sha256_hex),))
    if kind != "sheet" or not rows:
        raise NotFound(f"The bank keeps no sheet under the hash {sha256_hex[:12]}.", code="not-found")
    return raw, rows[0][0], rows[0][1]


def recipes(bank: Any, key: str, number: int) -> list[dict[str, Any]]:
    """The recipes of a revision with their sheets: ``{sheet_sha256, page, file_name, recipe_sha256, recipe}`` (``recipe`` as bytes)."""
    body = _body(bank, key, number)[3]
    return [
        {
            "sheet_sha256": None if s["sheet_sha256"] is None else s["sheet_sha256"].hex(),
            "page": s["page"],
            "file_name": s["file_name"],
            "recipe_sha256": s["recipe_sha256"].hex(),
            "recipe": blob(bank, s["recipe_sha256"].hex())[1],
        }
        for s in body["sources"]
    ]
