"""Where a sheet's file comes from: parked on the desk, or stored in the bank with a revision."""

from contextlib import closing
from pathlib import Path
from typing import Any

from curvebank.bank.connect import open_read

from . import desk_file, desk_sheets


def from_bank(bank: Path, sha256: str) -> bytes | None:
    """The bytes of a sheet that a stored revision came from, or None."""
    row = _bank_row(bank, "SELECT bytes FROM blob WHERE sha256 = ? AND kind = 'sheet'", sha256)
    return row[0] if row else None


def describe_in_bank(bank: Path, sha256: str) -> dict[str, Any] | None:
    """``{sha256, file_name, media, pages}`` of a stored sheet, or None."""
    row = _bank_row(bank, "SELECT file_name, media, pages FROM sheet WHERE sha256 = ?", sha256)
    return {"sha256": sha256, "file_name": row[0], "media": row[1], "pages": row[2]} if row else None


def _bank_row(bank: Path, sql: str, sha256: str) -> Any:
    """One row of the bank's blob or sheet table, which are keyed by the 32 bytes of the digest."""
    if not bank.exists():
        return None
    with closing(open_read(bank)) as db:
        return db.execute(sql, (bytes.fromhex(sha256),)).fetchone()


def sheet_bytes(desk: Path, bank: Path, sha256: str) -> bytes | None:
    """The file of a sheet, from the desk or else from the bank; None where neither has it. Usable from any thread or process."""
    with closing(desk_file.connect(desk)) as db:
        data = desk_sheets.data(db, sha256)
    return data if data is not None else from_bank(bank, sha256)
