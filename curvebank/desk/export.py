"""A stored pump as files other tools read: CSV tables or one JSON document, canonical units named in every column."""

import csv
import io
import json
from pathlib import Path
from typing import Any

import curvebank

from ..bank import catalogue, revision_view

POINT_COLUMNS = ["key", "revision", "state", "curve", "quantity", "unit", "diameter_mm", "speed_rpm", "level", "flow_m3h", "value", "sigma"]
FIT_COLUMNS = [
    "key", "revision", "state", "curve", "quantity", "unit", "diameter_mm", "speed_rpm", "q_lo_m3h", "q_hi_m3h", "q_mid_m3h",
    "q_half_m3h", "order", *(f"scaled_{k}" for k in range(9)), "sigma",
]  # fmt: skip
FORMS = {"csv-points": "-points.csv", "csv-fits": "-fits.csv", "json": ".json"}
"""What can be written, and how the file's name ends after the key."""
UNITS = {"efficiency": "1", "overall_efficiency": "1", "power": "kW", "input_power": "kW"}


def unit_of(quantity: str) -> str:
    """Canonical unit of a stored value; the second number of a contour's point is head in m."""
    return UNITS.get(quantity, "m")


def document(bank: Path, key: str, revision: int | None = None) -> dict[str, Any]:
    """One revision in full (the released one where none is named): curves with fits and points, findings, waivers, cautions, sheets.

    Raises
    ------
    BankError, NotFound
        No such bank, pump or revision, or nothing released yet.
    """
    with curvebank.open(bank) as reader:
        pump = reader.pump(key) if revision is None else catalogue.pinned(reader, key, revision)
        found: dict[str, Any] = revision_view.detail(reader, pump.key, pump.revision)
        return {"export": 1} | found


def text(doc: dict[str, Any], form: str) -> str:
    """A document in one of `FORMS`: the traced points, the fits as scaled coefficients, or all of it as JSON.

    A fit is read with t = (flow - q_mid) / q_half and Horner: value = s0 + t (s1 + t (s2 + ...)), between q_lo and q_hi.
    """
    if form == "csv-points":
        return _csv(POINT_COLUMNS, _point_rows(doc))
    if form == "csv-fits":
        return _csv(FIT_COLUMNS, _fit_rows(doc))
    return json.dumps(doc, ensure_ascii=False, indent=1, allow_nan=False) + "\n"


def files(doc: dict[str, Any], *forms: str) -> dict[str, str]:
    """Texts by file name, ``KEY-points.csv`` and so on."""
    return {f"{doc['key']}{FORMS[form]}": text(doc, form) for form in forms}


def _head(doc: dict[str, Any], c: dict[str, Any]) -> list[Any]:
    return [doc["key"], doc["number"], doc["state"], c["id"], c["quantity"], unit_of(c["quantity"]), c["diameter_mm"], c["speed_rpm"]]


def _point_rows(doc: dict[str, Any]) -> list[list[Any]]:
    return [[*_head(doc, c), c["level"], q, v, s] for c in doc["curves"] for (q, v), s in zip(c["points"], c["sigma"], strict=True)]


def _fit_rows(doc: dict[str, Any]) -> list[list[Any]]:
    rows = []
    for c in doc["curves"]:
        f = c["fit"]
        if f:
            scaled = list(f["scaled"]) + [None] * (9 - len(f["scaled"]))
            rows.append([*_head(doc, c), *f["domain"], f["mid"], f["half"], f["order"], *scaled, f["sigma"]])
    return rows


def _csv(columns: list[str], rows: list[list[Any]]) -> str:
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([["" if v is None else repr(v) if isinstance(v, float) else v for v in row] for row in rows])
    return out.getvalue()
