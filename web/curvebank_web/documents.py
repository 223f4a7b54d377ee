"""What the server needs to know of a draft's document, which may be unfinished or wrong anywhere."""

import math
from typing import Any

from .page_store import PageKey

TURNS = (0, 90, 180, 270)


def part(doc: dict[str, Any], name: str) -> dict[str, Any]:
    """An object inside the document, or an empty one."""
    value = doc.get(name)
    return value if isinstance(value, dict) else {}


def text(value: object) -> str:
    """Text that SQLite can hold: a lone surrogate, which JSON can spell, becomes a question mark."""
    return str(value or "").encode("utf-8", "replace").decode()


def title_of(doc: dict[str, Any]) -> str:
    """What a draft is called in lists: maker and model, else the file's name."""
    pump = part(doc, "pump")
    name = " ".join(text(pump.get(k)) for k in ("maker", "model") if pump.get(k))
    return (name or text(part(doc, "sheet").get("file")) or "Untitled sheet")[:200]


def sheet_of(doc: dict[str, Any]) -> str | None:
    """SHA-256 of the sheet the document names, or None.

    Examples
    --------
    >>> sheet_of({"sheet": {"sha256": "AB" * 32}}) == "ab" * 32
    True
    """
    sha = part(doc, "sheet").get("sha256")
    if not isinstance(sha, str) or len(sha) != 64 or not all(c in "0123456789abcdefABCDEF" for c in sha):
        return None
    return sha.lower()


def page_key(doc: dict[str, Any], laid: str | None = None) -> PageKey | None:
    """The page the document works on, or None where it names none that could exist.

    A recipe need not state its sheet's SHA-256: ``laid`` is the sheet the draft lies on.
    """
    sha, sheet = sheet_of(doc) or (laid if "sheet" in doc else None), part(doc, "sheet")
    page, dpi, turn = sheet.get("page", 1), sheet.get("dpi", 300), sheet.get("turn", 0)
    if sha is None or not _whole(page) or page < 1 or not _number(dpi) or not 36 <= dpi <= 1200 or not _whole(turn) or turn not in TURNS:
        return None
    return PageKey(sha, page, float(dpi), turn)


def masks_of(doc: dict[str, Any]) -> list[dict[str, Any]]:
    """The masks of the document's sheet, as they stand; what is wrong with one is said where it is used."""
    masks = part(doc, "sheet").get("masks")
    return [m for m in masks if isinstance(m, dict)] if isinstance(masks, list) else []


def pump_facts(doc: dict[str, Any]) -> dict[str, Any]:
    """Stages, speed and density of the pump as far as they make sense, for a preview of an unfinished document."""
    pump, facts = part(doc, "pump"), {}
    if _whole(pump.get("stages")) and 1 <= pump["stages"] <= 100:
        facts["stages"] = pump["stages"]
    for name in ("speed_rpm", "density_kgm3"):
        if _number(pump.get(name)) and pump[name] > 0:
            facts[name] = pump[name]
    return facts


def _whole(value: object) -> bool:
    return isinstance(value, int) and not isinstance(value, bool) and abs(value) < 2**31


def _number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and math.isfinite(value)
