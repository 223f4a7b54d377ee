"""Are the guards of a bank whole? Compare every table, index, trigger and view of a file with what the schema's SQL text makes."""

import functools
import sqlite3
from collections.abc import Iterator

from . import guards_1, schema_1, views_1

SCHEMA_TEXTS = {1: (schema_1.TABLES, guards_1.GUARDS, views_1.VIEWS)}
"""Schema number -> the SQL text that leads to it from the one before."""


def statements(text: str) -> Iterator[str]:
    """Split SQL text into complete statements (a trigger holds semicolons of its own)."""
    held = ""
    for line in text.splitlines(keepends=True):
        held += line
        if sqlite3.complete_statement(held):
            yield held.strip()
            held = ""
    if held.strip():
        raise ValueError(f"Unfinished SQL: {held.strip()[:60]}")


def run_texts(connection: sqlite3.Connection, texts: tuple[str, ...]) -> None:
    """Run SQL text statement by statement, so that an open transaction stays open (``executescript`` would commit it)."""
    for text in texts:
        for statement in statements(text):
            connection.execute(statement)


def read_objects(connection: sqlite3.Connection) -> dict[tuple[str, str], str]:
    """(type, name) -> SQL of what a file holds; automatic indexes and the migrations' own table are left out."""
    rows = connection.execute("SELECT type, name, sql FROM sqlite_master WHERE sql IS NOT NULL AND tbl_name <> '_sqlite_migrations'")
    return {(kind, name): sql for kind, name, sql in rows}


@functools.cache
def expected_objects() -> dict[tuple[str, str], str]:
    """(type, name) -> SQL of everything that the newest schema holds."""
    fresh = sqlite3.connect(":memory:", isolation_level=None)
    try:
        for number in sorted(SCHEMA_TEXTS):
            run_texts(fresh, SCHEMA_TEXTS[number])
        return read_objects(fresh)
    finally:
        fresh.close()


def guard_faults(connection: sqlite3.Connection) -> list[str]:
    """What is missing from, changed in or foreign to the schema: the list is empty in a sound bank."""
    want, have = expected_objects(), read_objects(connection)
    faults = [f"{kind} {name} is missing" for kind, name in sorted(want.keys() - have.keys())]
    faults += [f"{kind} {name} was changed" for kind, name in sorted(want.keys() & have.keys()) if want[kind, name] != have[kind, name]]
    faults += [f"{kind} {name} does not belong here" for kind, name in sorted(have.keys() - want.keys())]
    return faults
