"""Sheets parked on the desk until a draft that uses them is saved into the bank."""

import hashlib
import sqlite3
from datetime import UTC, datetime, timedelta
from typing import Any

from .desk_file import now, transaction, written

FORGOTTEN_DAYS = 7
"""A sheet that no draft took up for so long was only tried."""


def add(db: sqlite3.Connection, data: bytes, *, file_name: str, media: str, pages: int) -> str:
    """Park a sheet's file and return its SHA-256. The same bytes again are the same sheet, as if added now."""
    sha = hashlib.sha256(data).hexdigest()
    with transaction(db):
        db.execute(
            "INSERT INTO sheet (sha256, file_name, media, pages, bytes, added_at) VALUES (?, ?, ?, ?, ?, ?)"
            " ON CONFLICT DO UPDATE SET added_at = excluded.added_at",
            (sha, file_name, media, pages, data, now()),
        )
    return sha


def data(db: sqlite3.Connection, sha256: str) -> bytes | None:
    """The bytes of a parked sheet, or None."""
    row = db.execute("SELECT bytes FROM sheet WHERE sha256 = ?", (sha256,)).fetchone()
    return row["bytes"] if row else None


def describe(db: sqlite3.Connection, sha256: str) -> dict[str, Any] | None:
    """``{sha256, file_name, media, pages}`` of a parked sheet, or None."""
    row = db.execute("SELECT sha256, file_name, media, pages FROM sheet WHERE sha256 = ?", (sha256,)).fetchone()
    return dict(row) if row else None


def clear_forgotten(db: sqlite3.Connection, at: datetime | None = None) -> int:
    """Remove sheets that were added a week or longer before ``at`` (default: now) and that no step of any draft names; how many."""
    before = written((at or datetime.now(UTC)) - timedelta(days=FORGOTTEN_DAYS))
    with transaction(db):
        gone = db.execute(
            "DELETE FROM sheet WHERE added_at <= ? AND NOT EXISTS (SELECT 1 FROM draft WHERE sheet_sha256 = sheet.sha256)"
            " AND NOT EXISTS (SELECT 1 FROM step WHERE instr(step.doc, sheet.sha256))",
            (before,),
        )
    return gone.rowcount
