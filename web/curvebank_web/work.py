"""The tasks a worker process knows. Each opens the files it needs itself; only small things pass through the pipe."""

from pathlib import Path
from typing import Any

from curvebank import sheet
from curvebank.errors import SheetError

from . import prepared_cache, sources
from .page_store import PageKey


def _sheet(desk: str, bank: str, sha256: str) -> bytes:
    data = sources.sheet_bytes(Path(desk), Path(bank), sha256)
    if data is None:
        raise SheetError("Neither the desk nor the bank holds this sheet. Add its file again.", code="no-such-sheet")
    return data


def prepare(*, desk: str, bank: str, cache: str, page: tuple[Any, ...], progress: Any) -> None:
    """Prepare a page and keep it in the cache."""
    key = PageKey(*page)
    if prepared_cache.folder_of(Path(cache), key).is_dir():
        return
    progress(0.0, "Reading the sheet")
    loaded = sheet.load(_sheet(desk, bank, key.sha256), page=key.page, dpi=key.dpi, turn=key.turn)
    prepared = sheet.prepare(loaded, progress=lambda share, text="": progress(0.1 + 0.8 * share, text or "Levelling the ink"))
    progress(0.95, "Keeping the levelled sheet")
    prepared_cache.write(Path(cache), key, prepared)


TASKS = {"prepare": prepare}
