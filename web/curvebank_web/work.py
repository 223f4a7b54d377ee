"""The tasks a worker process knows. Each opens the files it needs itself; what it returns is small or packed."""

import json
from functools import partial
from pathlib import Path
from typing import Any

from curvebank import digitise, recipe, sheet
from curvebank.errors import CurvebankError, SheetError
from curvebank.jsonable import clean
from curvebank.records import PageInfo

from . import ghosts, prepared_cache, record_pack, sources
from .page_store import PageKey

Progress = Any


def _sheet(desk: str, bank: str, sha256: str) -> bytes:
    data = sources.sheet_bytes(Path(desk), Path(bank), sha256)
    if data is None:
        raise SheetError("Neither the desk nor the bank holds this sheet. Add its file again.", code="no-such-sheet")
    return data


def _part(progress: Progress, start: float, length: float, share: float, text: str = "") -> None:
    """Progress of a part of the work, told as progress of the whole."""
    progress(start + length * share, text)


def _prepared(desk: str, bank: str, cache: str, key: PageKey, progress: Progress) -> tuple[Any, PageInfo | None]:
    """The prepared page, from the cache or made now and kept; the page's facts where it was decoded now."""
    found = prepared_cache.read(Path(cache), key)
    if found is not None:
        return found, None
    progress(0.0, "Reading the sheet")
    loaded = sheet.load(_sheet(desk, bank, key.sha256), page=key.page, dpi=key.dpi, turn=key.turn)
    made = sheet.prepare(loaded, progress=partial(_part, progress, 0.1, 0.8))
    progress(0.95, "Keeping the levelled sheet")
    prepared_cache.write(Path(cache), key, made)
    return made, loaded.info


def prepare(*, desk: str, bank: str, cache: str, page: tuple[Any, ...], progress: Progress) -> None:
    """Prepare a page and keep it in the cache."""
    _prepared(desk, bank, cache, PageKey(*page), progress)


def run(
    *,
    desk: str,
    bank: str,
    cache: str,
    doc: bytes,
    page: tuple[Any, ...] | None,
    page_info: dict[str, Any] | None,
    settings: dict[str, Any],
    progress: Progress,
) -> dict[str, Any]:
    """Digitise a document as it stands; the result, its family picture and the packed records go back as text and bytes.

    A recipe or sheet that cannot be used is a result too: it says why. Only a stop or a fault of the program ends without one.
    """
    prepared, info = None, None
    early: CurvebankError | None = None
    if page is not None:
        try:
            prepared, decoded = _prepared(desk, bank, cache, PageKey(*page), partial(_part, progress, 0.0, 0.35))
            info = decoded or (PageInfo(**page_info) if page_info else None)
        except SheetError as error:
            early = error
    if early is not None:
        data = None if early.code == "no-such-sheet" else _sheet(desk, bank, PageKey(*page).sha256)  # type: ignore[misc]
        made = digitise.run(doc, data, settings, progress=progress)  # says in the result what is wrong with the sheet
    else:
        made = digitise.run(doc, None, settings, progress=progress, prepared=prepared, page=info)
    picture: dict[str, Any] = {}
    if made.error is None:
        progress(0.99, "Drawing the family")
        picture = ghosts.family_picture(made, recipe.parse(doc), prepared, settings)
    return {
        "result": json.dumps(digitise.result_json(made), allow_nan=False),
        "family": json.dumps(clean(picture), allow_nan=False),
        "digitised": record_pack.pack(made),
    }


def carry(
    *,
    desk: str,
    bank: str,
    cache: str,
    doc: bytes,
    old: tuple[Any, ...],
    old_info: dict[str, Any],
    new: tuple[Any, ...],
    new_info: dict[str, Any],
    file: str,
    settings: dict[str, Any],
    progress: Progress,
) -> dict[str, Any]:
    """Carry a document onto another scan of the same paper: the new recipe, and what changes with it.

    A draft need not name its pump yet: the names are set aside for the work and put back.
    """
    from curvebank.desk import rescan

    before, _ = _prepared(desk, bank, cache, PageKey(*old), partial(_part, progress, 0.0, 0.2))
    now, _ = _prepared(desk, bank, cache, PageKey(*new), partial(_part, progress, 0.2, 0.3))
    data = json.loads(doc)
    pump = data.get("pump")
    data["pump"] = {**(pump or {}), "maker": (pump or {}).get("maker") or "-", "model": (pump or {}).get("model") or "-", "key": "X"}
    key = PageKey(*new)
    made = rescan.carry(
        data,
        None,
        None,
        file=file,
        page=key.page,
        dpi=key.dpi,
        turn=key.turn,
        settings=settings,
        progress=partial(_part, progress, 0.5, 0.5),
        old_prepared=before,
        old_page=PageInfo(**old_info),
        new_prepared=now,
        new_page=PageInfo(**new_info),
    )
    return {"recipe": {**made.recipe, "pump": pump}, "report": clean(made.report())}


def join(
    *, desk: str, bank: str, first: tuple[Any, ...], second: tuple[Any, ...], ties: list[Any] | None, progress: Progress
) -> dict[str, Any]:
    """Join two halves of a sheet; the new sheet's file and how they were found to fit."""
    from curvebank.desk import joining

    one, two = PageKey(*first), PageKey(*second)
    made = joining.join(
        _sheet(desk, bank, one.sha256),
        _sheet(desk, bank, two.sha256),
        ties=ties,
        first_page=one.page,
        second_page=two.page,
        dpi=one.dpi,
        first_turn=one.turn,
        second_turn=two.turn,
        progress=progress,
    )
    return {"png": made.png, "report": clean(made.report)}


TASKS = {"prepare": prepare, "run": run, "carry": carry, "join": join}
