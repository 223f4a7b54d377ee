"""Ordered, named migrations over SQL text, each in one transaction with its own record; the guards are re-checked after them.

A migration is never edited once released. Guarded tables are never rebuilt: rebuilding a table drops its triggers.
"""

import sqlite3
import uuid

import sqlite_utils
from sqlite_utils.migrations import Migrations

from ..errors import BankError
from .connect import APPLICATION_ID, CONTRACT, SCHEMA
from .guards import SCHEMA_TEXTS, guard_faults, run_texts

STEPS = Migrations("curvebank")


@STEPS()
def schema_1(db: sqlite_utils.Database) -> None:
    """Tables, guards and the read contract of the first release."""
    run_texts(db.conn, SCHEMA_TEXTS[1])
    rows = [("application_id", str(APPLICATION_ID)), ("schema", "1"), ("contract", str(CONTRACT)), ("uuid", str(uuid.uuid4()))]
    db.conn.executemany("INSERT INTO meta (name, value) VALUES (?, ?)", rows)


def upgrade(connection: sqlite3.Connection) -> None:
    """Bring a file to the newest schema inside the caller's transaction and re-check the guards.

    Raises
    ------
    BankError
        The guards are not whole afterwards; the caller rolls back.
    """
    STEPS.apply(sqlite_utils.Database(connection))
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute(f"PRAGMA user_version = {SCHEMA}")
    faults = guard_faults(connection)
    if faults:
        raise BankError(f"The bank was not upgraded, because its guards would not be whole: {faults[0]}.", code="guards")
