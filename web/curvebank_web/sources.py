"""Where a sheet's file comes from: parked on the desk, or stored in the bank with a revision."""

import sqlite3
from contextlib import closing
from pathlib import Path
from typing import Any

from . import desk_file, desk_sheets


def from_bank(bank: Path, sha256: str) -> bytes | None:
    """The bytes of a sheet that a stored revision came from, or None."""
    row = _bank_row(bank, "SELECT bytes FROM blob WHERE sha256 = ? AND kind = 'sheet'", sha256)
    return row[0] if row else None


def describe_in_bank(bank: Path, sha256: str) -> dict[str, Any] | None:
    """``{sha256, file_name, media, pages}`` of a stored sheet, or None."""
    row = _bank_row(bank, "SELECT sha256, file_name, media, pages FROM sheet WHERE sha256 = ?", sha256)
    return dict(zip(("sha256", "file_name", "media", "pages"), row, strict=True)) if row else None


def _bank_row(bank: Path, sql: str, sha256: str) -> Any:
    if not bank.exists():
        return None
    with closing(sqlite3.connect(f"{bank.absolute().as_uri()}?mode=ro", uri=True, timeout=30)) as db:
        return db.execute(sql, (sha256,)).fetchone()


def sheet_bytes(desk: Path, bank: Path, sha256: str) -> bytes | None:
    """The file of a sheet, from the desk or else from the bank; None where neither has it. Usable from any thread or process."""
    with closing(desk_file.connect(desk)) as db:
        data = desk_sheets.data(db, sha256)
    return data if data is not None else from_bank(bank, sha256)
