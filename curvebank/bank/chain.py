"""The chain of events: what is hashed for each, and how one is appended.

``sha256(previous hash, seq, at, who, kind, pump, revision, why, json)`` over the packed fields; a ``saved`` event carries the hash of its
revision's body, so the head of the chain covers every saved number.
"""

import datetime
import sqlite3

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


def event_hash(row: dict) -> bytes:
    """The hash of one event from its stored columns."""
    return pack.sha256(b"CVBK-event-1" + pack.pack_part(FIELDS, row))


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
    row = {"previous_sha256": last[1], "seq": last[0] + 1, "at": at, "who": who, "kind": kind}
    row |= {"pump_id": pump_id, "revision_id": revision_id, "why": why, "json": json}
    values = [row[name] for name, _ in FIELDS]
    connection.execute(f"INSERT INTO event ({NAMES}, sha256) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", [*values, event_hash(row)])
    return row["seq"]
