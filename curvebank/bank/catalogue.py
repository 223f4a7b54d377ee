"""What a bank holds, as lists show it: pumps a page at a time, the history of one, kept sheets. Plain dicts, ready for JSON.

Every function takes a `Bank`; a `Store` has one as ``bank``. One revision in full is in `revision_view`.
"""

import json
from typing import Any

from ..errors import BankError, CurvebankError, NotFound
from .pump import Pump
from .reader import PUMP_SQL

STATES = ("draft", "submitted", "released", "superseded", "withdrawn")
SHOWN = (
    "coalesce((SELECT revision_id FROM release_span WHERE pump_id = pump.id AND valid_to IS NULL),"
    " (SELECT id FROM revision AS last WHERE last.pump_id = pump.id ORDER BY number DESC LIMIT 1))"
)
"""The revision a list shows: the released one, or else the latest."""


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
        An item has key, maker, model, state, revision, stages, rated_rpm, diameters_mm, quantities, bep (see `best_point`), and the number
        of findings by severity.
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
    items = [_item(bank, Pump(bank, row)) for row in rows[:limit]]
    return {"items": items, "next": items[-1]["key"] if len(rows) > limit else None}


def _item(bank: Any, pump: Pump) -> dict[str, Any]:
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
        "bep": best_point(pump),
        "findings": _severities(bank, pump.revision_id),
    }


def best_point(pump: Pump) -> dict[str, Any] | None:
    """The best-efficiency point of the largest diameter (the fields of `duty.Duty`), or None where efficiency or head is not known."""
    try:
        best = pump.bep()
    except CurvebankError:
        return None
    return None if best is None else {**best._asdict(), "cautions": list(best.cautions)}


def _severities(bank: Any, revision_id: int) -> dict[str, int]:
    found = dict(bank.query("SELECT severity, count(*) FROM finding WHERE revision_id = ? GROUP BY severity", (revision_id,)))
    return {severity: found.get(severity, 0) for severity in ("error", "warning", "note")}


def pump_detail(bank: Any, key: str) -> dict[str, Any]:
    """One pump with its revisions and its events, oldest first.

    Raises
    ------
    NotFound
        No such pump.
    """
    pump_id, key = bank.resolve(key)
    names = ("number", "state", "saved_at", "who", "why", "parent")
    rows = bank.query(
        "SELECT revision.number, state, saved_at, who, why, (SELECT number FROM revision AS p WHERE p.id = revision.parent_id)"
        " FROM revision JOIN revision_state ON revision_state.revision_id = revision.id"
        " WHERE revision.pump_id = ? ORDER BY revision.number",
        (pump_id,),
    )
    revisions = [dict(zip(names, row, strict=True)) for row in rows]
    maker, model = bank.query("SELECT maker.name, model FROM pump JOIN maker ON maker.id = maker_id WHERE pump.id = ?", (pump_id,))[0]
    stages, rated = bank.query("SELECT stages, rated_rpm FROM revision WHERE pump_id = ? ORDER BY number DESC LIMIT 1", (pump_id,))[0]
    return {
        "key": key,
        "maker": maker,
        "model": model,
        "stages": stages,
        "rated_rpm": rated,
        "revisions": revisions,
        "released": next((r["number"] for r in revisions if r["state"] == "released"), None),
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
        numbers = ", ".join(str(n) for (n,) in bank.query("SELECT number FROM revision WHERE pump_id = ? ORDER BY number", (pump_id,)))
        raise NotFound(f"{key} has no revision {number}. It has {numbers}.", code="not-found")
    return Pump(bank, rows[0])


def blob(bank: Any, sha256_hex: str) -> tuple[str, bytes]:
    """(kind, bytes) of something kept whole: a sheet, recipe or body.

    Raises
    ------
    NotFound
        The bank does not keep it.
    """
    rows = bank.query("SELECT kind, bytes FROM blob WHERE sha256 = ?", (_digest(sha256_hex),))
    if not rows:
        raise NotFound(f"The bank keeps nothing under the hash {sha256_hex[:12]}.", code="not-found")
    return rows[0]


def sheet_facts(bank: Any, sha256_hex: str) -> dict[str, Any]:
    """``{sha256, file_name, media, pages}`` of a kept sheet.

    Raises
    ------
    NotFound
        No such sheet.
    """
    rows = bank.query("SELECT file_name, media, pages FROM sheet WHERE sha256 = ?", (_digest(sha256_hex),))
    if not rows:
        raise NotFound(f"The bank keeps no sheet under the hash {sha256_hex[:12]}.", code="not-found")
    return {"sha256": sha256_hex, **dict(zip(("file_name", "media", "pages"), rows[0], strict=True))}


def sheet_bytes(bank: Any, sha256_hex: str) -> bytes:
    """The file of a kept sheet, as it was.

    Raises
    ------
    NotFound
        No such sheet.
    """
    return blob(bank, sheet_facts(bank, sha256_hex)["sha256"])[1]


def _digest(sha256_hex: str) -> bytes:
    try:
        return bytes.fromhex(sha256_hex)
    except ValueError:
        return b""
