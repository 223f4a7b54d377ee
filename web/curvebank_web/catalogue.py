"""The catalogue: pumps of a bank by name, page by page, with what a list or a map shows of each."""

from typing import Any

from curvebank.errors import CurvebankError

SHOWN_SQL = """
SELECT pump.key, maker.name, pump.model, revision_state.state, revision.number
FROM pump JOIN maker ON maker.id = maker_id
  JOIN revision ON revision.id = coalesce((SELECT revision_id FROM release_span WHERE pump_id = pump.id AND valid_to IS NULL),
    (SELECT id FROM revision AS last WHERE last.pump_id = pump.id ORDER BY number DESC LIMIT 1))
  JOIN revision_state ON revision_state.revision_id = revision.id
WHERE pump.key > :after AND (:state IS NULL OR revision_state.state = :state)
  AND (:q = '' OR pump.key LIKE :q ESCAPE '\\' OR maker.name || ' ' || pump.model LIKE :q ESCAPE '\\')
ORDER BY pump.key LIMIT :limit
"""
"""The revision shown is the released one, or the latest where none is released."""


def listing(bank: Any, *, q: str = "", state: str | None = None, after: str = "", limit: int = 50) -> dict[str, Any]:
    """``{items, next}``: pumps whose key, maker or model holds ``q``, by key; ``next`` is the cursor of the following page or None."""
    like = "%" + q.strip().replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_") + "%" if q.strip() else ""
    rows = bank.query(SHOWN_SQL, {"after": after, "state": state, "q": like, "limit": limit + 1})
    items = [_item(bank, *row) for row in rows[:limit]]
    return {"items": items, "next": rows[limit - 1][0] if len(rows) > limit else None}


def _item(bank: Any, key: str, maker: str, model: str, state: str, number: int) -> dict[str, Any]:
    pump = open_pump(bank, key, number)
    counts = dict.fromkeys(("error", "warning", "note"), 0)
    for finding in pump.findings:
        counts[finding["severity"]] += 1
    return {
        "key": key,
        "maker": maker,
        "model": model,
        "state": state,
        "revision": number,
        "stages": pump.stages,
        "rated_rpm": pump.rated_rpm,
        "diameters_mm": list(pump.diameters_mm),
        "quantities": list(pump.quantities),
        "bep": best_point(pump),
        "findings": counts,
    }


def best_point(pump: Any) -> dict[str, Any] | None:
    """The best-efficiency point of the largest diameter, or None where efficiency or head is not known."""
    try:
        bep = pump.bep()
    except CurvebankError:
        return None
    return bep._asdict() if bep is not None else None


def open_pump(bank: Any, key: str, number: int) -> Any:
    """A revision of any state. A withdrawn one warns scripts; here its state is shown instead."""
    import warnings

    from curvebank.errors import WithdrawnWarning

    with warnings.catch_warnings():
        warnings.simplefilter("ignore", WithdrawnWarning)
        return bank.pump(key, revision=number)


def history(bank: Any, key: str) -> dict[str, Any]:
    """One pump with its revisions and events, oldest first."""
    pump_id, key = bank.resolve(key)
    (maker, model, stages) = bank.query(
        "SELECT maker.name, model, stages FROM pump JOIN maker ON maker.id = maker_id WHERE pump.id = ?", (pump_id,)
    )[0]
    revisions = bank.query(
        "SELECT revision.number, state, revision.saved_at, revision.who, revision.why, parent.number FROM revision"
        " JOIN revision_state AS now ON now.revision_id = revision.id"
        " LEFT JOIN revision AS parent ON parent.id = revision.parent_id WHERE revision.pump_id = ? ORDER BY revision.number",
        (pump_id,),
    )
    events = bank.query(
        "SELECT seq, event.at, event.kind, number, event.who, event.why FROM event LEFT JOIN revision ON revision.id = revision_id"
        " WHERE event.pump_id = ? ORDER BY seq",
        (pump_id,),
    )
    listed = [dict(zip(("number", "state", "saved_at", "who", "why", "parent"), row, strict=True)) for row in revisions]
    return {
        "key": key,
        "maker": maker,
        "model": model,
        "stages": stages,
        "revisions": listed,
        "released": next((r["number"] for r in listed if r["state"] == "released"), None),
        "events": [dict(zip(("seq", "at", "kind", "revision", "who", "why"), row, strict=True)) for row in events],
    }
