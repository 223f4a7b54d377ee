"""Sheets parked on the desk until a draft that uses them is saved into the bank."""

import hashlib
import sqlite3
from typing import Any

from .desk_file import now, transaction


def add(db: sqlite3.Connection, data: bytes, *, file_name: str, media: str, pages: int) -> str:
    """Park a sheet's file and return its SHA-256. The same bytes again change nothing."""
    sha = hashlib.sha256(data).hexdigest()
    with transaction(db):
        db.execute(
            "INSERT INTO sheet (sha256, file_name, media, pages, bytes, added_at) VALUES (?, ?, ?, ?, ?, ?) ON CONFLICT DO NOTHING",
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
