"""Where a sheet's file comes from: parked on the desk, or stored in the bank with a revision."""

from contextlib import closing
from pathlib import Path
from typing import Any

from curvebank.bank import catalogue
from curvebank.errors import NotFound

from . import desk_file, desk_sheets
from .bank_access import reading


def from_bank(bank: Path, sha256: str) -> bytes | None:
    """The bytes of a sheet that a stored revision came from, or None."""
    return _kept(catalogue.sheet_bytes, bank, sha256)


def describe_in_bank(bank: Path, sha256: str) -> dict[str, Any] | None:
    """``{sha256, file_name, media, pages}`` of a stored sheet, or None."""
    return _kept(catalogue.sheet_facts, bank, sha256)


def _kept(question: Any, bank: Path, sha256: str) -> Any:
    if not bank.exists():
        return None
    with reading(bank) as reader:
        try:
            return question(reader, sha256)
        except NotFound:
            return None


def sheet_bytes(desk: Path, bank: Path, sha256: str) -> bytes | None:
    """The file of a sheet, from the desk or else from the bank; None where neither has it. Usable from any thread or process."""
    with closing(desk_file.connect(desk)) as db:
        data = desk_sheets.data(db, sha256)
    return data if data is not None else from_bank(bank, sha256)
