"""The desk file: unsaved work beside the bank, in SQLite. Opening, schema, transactions.

Every acknowledged action is on the disk (synchronous FULL, one commit an action) before the answer goes out, so a killed
server loses nothing. Connections are made per request or per thread and never shared.
"""

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path

from curvebank.errors import CurvebankError

APPLICATION_ID = 0x43424B44  # "CBKD"
SCHEMA = 1
BUSY_MS = 30_000

TABLES = """
CREATE TABLE sheet (
  sha256 TEXT PRIMARY KEY CHECK (length(sha256) = 64), file_name TEXT NOT NULL, media TEXT NOT NULL, pages INTEGER NOT NULL,
  bytes BLOB NOT NULL, added_at TEXT NOT NULL
) STRICT;
CREATE TABLE draft (
  id TEXT PRIMARY KEY, title TEXT NOT NULL, sheet_sha256 TEXT, head INTEGER NOT NULL, tip INTEGER NOT NULL,
  created_at TEXT NOT NULL, updated_at TEXT NOT NULL, create_id TEXT UNIQUE, from_key TEXT, from_revision INTEGER
) STRICT;
CREATE TABLE step (
  draft_id TEXT NOT NULL REFERENCES draft (id) ON DELETE CASCADE, step INTEGER NOT NULL, parent INTEGER, label TEXT NOT NULL,
  action_id TEXT NOT NULL, doc TEXT NOT NULL, at TEXT NOT NULL,
  PRIMARY KEY (draft_id, step), UNIQUE (draft_id, action_id)
) STRICT;
CREATE TRIGGER step_is_append_only BEFORE UPDATE ON step BEGIN SELECT RAISE(ABORT, 'a step is never changed'); END;
CREATE TABLE result (
  draft_id TEXT NOT NULL, step INTEGER NOT NULL, recipe BLOB NOT NULL, result TEXT NOT NULL, family TEXT NOT NULL,
  digitised BLOB NOT NULL, at TEXT NOT NULL,
  PRIMARY KEY (draft_id, step), FOREIGN KEY (draft_id, step) REFERENCES step (draft_id, step) ON DELETE CASCADE
) STRICT;
CREATE TABLE saved (
  save_key TEXT PRIMARY KEY, draft_id TEXT NOT NULL, step INTEGER NOT NULL, key TEXT NOT NULL, revision INTEGER NOT NULL,
  at TEXT NOT NULL
) STRICT;
"""


class DeskError(CurvebankError):
    """The desk file cannot be used: not a desk, or written by a newer curvebank."""

    code = "desk"


def now() -> str:
    """Wall clock as stored everywhere: UTC, milliseconds, ``Z``."""
    return written(datetime.now(UTC))


def written(moment: datetime) -> str:
    """A moment in UTC as text that sorts like time."""
    return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")


def connect(path: Path) -> sqlite3.Connection:
    """A connection for one thread, with the guards on. Transactions are explicit (see ``transaction``)."""
    db = sqlite3.connect(path, timeout=BUSY_MS / 1000, isolation_level=None)
    db.row_factory = sqlite3.Row
    db.execute("PRAGMA foreign_keys = ON")
    db.execute("PRAGMA recursive_triggers = ON")
    db.execute("PRAGMA synchronous = FULL")
    return db


@contextmanager
def transaction(db: sqlite3.Connection) -> Iterator[sqlite3.Connection]:
    """One action: BEGIN IMMEDIATE, then commit, or roll back on any error."""
    db.execute("BEGIN IMMEDIATE")
    try:
        yield db
    except BaseException:
        db.execute("ROLLBACK")
        raise
    db.execute("COMMIT")


def prepare(path: Path) -> None:
    """Make the desk file if it is missing and bring an older one up to date.

    Raises
    ------
    DeskError
        The file is no desk, or a newer curvebank wrote it.
    """
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        db = sqlite3.connect(path, timeout=BUSY_MS / 1000, isolation_level=None)
    except (OSError, sqlite3.Error) as error:
        raise DeskError(f"The desk file {path} cannot be opened: {error}. Choose a folder you can write to.") from error
    try:
        version = db.execute("PRAGMA user_version").fetchone()[0]
        identity = db.execute("PRAGMA application_id").fetchone()[0]
        empty = version == 0 and not db.execute("SELECT 1 FROM sqlite_master").fetchone()
        if not empty and identity != APPLICATION_ID:
            raise DeskError(f"{path} is not a desk file of curvebank. Move it away, or name another bank.")
        if version > SCHEMA:
            raise DeskError(f"{path} was written by a newer curvebank. Install that version, or move the file away to start a new desk.")
        db.execute("PRAGMA journal_mode = WAL")
        if version < SCHEMA:
            _migrate(path)
    except sqlite3.DatabaseError as error:
        raise DeskError(f"{path} is not a desk file of curvebank ({error}). Move it away, or name another bank.") from error
    finally:
        db.close()


def _migrate(path: Path) -> None:
    from sqlite_utils import Database
    from sqlite_utils.migrations import Migrations

    steps = Migrations("curvebank_desk")

    @steps()
    def first_form(db: Database) -> None:
        for statement in _statements(TABLES):
            db.execute(statement)
        db.execute(f"PRAGMA application_id = {APPLICATION_ID}")
        db.execute("PRAGMA user_version = 1")

    connection = sqlite3.connect(path, timeout=BUSY_MS / 1000)
    try:
        steps.apply(Database(connection))
    finally:
        connection.close()


def _statements(script: str) -> list[str]:
    """Split a script into statements; ``complete_statement`` knows that a trigger's body holds semicolons."""
    found, part = [], ""
    for line in script.splitlines(keepends=True):
        part += line
        if sqlite3.complete_statement(part):
            found.append(part.strip())
            part = ""
    return found
