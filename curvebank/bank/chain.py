"""The chains of events and of settings: what is hashed for each row, and how one is appended.

``sha256(previous hash, seq, at, who, kind, pump, revision, why, json)`` over the packed fields; a ``saved`` event carries the hash of its
revision's body, so the head of the chain covers every saved number. Settings form a chain of their own.
"""

import datetime
import sqlite3
from typing import Any

from . import pack

FIELDS = (
    ("previous_sha256", pack.HASH),
    ("seq", pack.INTEGER),
    ("at", pack.TEXT),
    ("who", pack.TEXT),
    ("kind", pack.TEXT),
    ("pump_id", pack.INTEGER),
    ("revision_id", pack.optional(pack.INTEGER)),
    ("why", pack.TEXT),
    ("json", pack.TEXT),
)
NAMES = ", ".join(name for name, _ in FIELDS)
SETTING = (
    ("previous_sha256", pack.HASH),
    ("seq", pack.INTEGER),
    ("name", pack.TEXT),
    ("value", pack.TEXT),
    ("who", pack.TEXT),
    ("at", pack.TEXT),
)
SETTING_NAMES = ", ".join(name for name, _ in SETTING)


def event_hash(row: dict[str, Any]) -> bytes:
    """The hash of one event from its stored columns."""
    return pack.sha256(b"CVBK-event-1" + pack.pack_part(FIELDS, row))


def setting_hash(row: dict[str, Any]) -> bytes:
    """The hash of one setting from its stored columns."""
    return pack.sha256(b"CVBK-setting-1" + pack.pack_part(SETTING, row))


def append_setting(connection: sqlite3.Connection, *, name: str, value: str, who: str) -> None:
    """Add one setting at the end of its chain, inside the caller's transaction."""
    last = connection.execute("SELECT seq, sha256 FROM setting ORDER BY seq DESC LIMIT 1").fetchone() or (0, bytes(32))
    row: dict[str, Any] = {"previous_sha256": last[1], "seq": last[0] + 1, "name": name, "value": value, "who": who, "at": utc_now()}
    values = [row[part] for part, _ in SETTING]
    connection.execute(f"INSERT INTO setting ({SETTING_NAMES}, sha256) VALUES (?, ?, ?, ?, ?, ?, ?)", [*values, setting_hash(row)])


def utc_now() -> str:
    """The clock as banks write it: ``YYYY-MM-DDTHH:MM:SS.sssZ``."""
    return datetime.datetime.now(datetime.UTC).strftime("%Y-%m-%dT%H:%M:%S.%f")[:-3] + "Z"


def next_at(connection: sqlite3.Connection) -> str:
    """The later of the clock and the last event: time in a bank never runs backwards."""
    last = connection.execute("SELECT at FROM event ORDER BY seq DESC LIMIT 1").fetchone()
    now = utc_now()
    return max(now, last[0]) if last else now


def append(
    connection: sqlite3.Connection, *, at: str, who: str, kind: str, pump_id: int, revision_id: int | None, why: str, json: str
) -> int:
    """Add one event at the end of the chain, inside the caller's transaction. Returns its seq."""
    last = connection.execute("SELECT seq, sha256 FROM event ORDER BY seq DESC LIMIT 1").fetchone() or (0, bytes(32))
    row: dict[str, Any] = {"previous_sha256": last[1], "seq": last[0] + 1, "at": at, "who": who, "kind": kind}
    row |= {"pump_id": pump_id, "revision_id": revision_id, "why": why, "json": json}
    values = [row[name] for name, _ in FIELDS]
    connection.execute(f"INSERT INTO event ({NAMES}, sha256) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", [*values, event_hash(row)])
    return row["seq"]
