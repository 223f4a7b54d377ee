"""Opening a bank file: what is refused, and in which words. Cold path: standard library only.

Readers open ``mode=ro``, or ``immutable=1`` for a WAL file in a folder that cannot be written. Writers use WAL, synchronous FULL,
foreign keys, recursive triggers and BEGIN IMMEDIATE, so that a read is never turned into a write half way.
"""

import sqlite3

from ..errors import BankError

APPLICATION_ID = 0x4342_4E4B
"""Bytes 68 to 71 of the file: "CBNK"."""
SCHEMA = 1
CONTRACT = 1
TIMEOUT_S = 30.0


def _uri(path, query):
    for mark, code in (("%", "%25"), ("?", "%3f"), ("#", "%23"), ("\\", "/")):
        path = path.replace(mark, code)
    return f"file:{'/' if path[1:2] == ':' else ''}{path}?{query}"


def explain(error, path, *, writing, timeout_s=TIMEOUT_S):
    """Turn an error of SQLite into a ``BankError`` that says what to do; a refusal by a guard keeps the guard's words."""
    text = str(error)
    name = getattr(error, "sqlite_errorname", "") or ""
    lost = "Nothing was saved: " if writing else ""
    if name.startswith(("SQLITE_BUSY", "SQLITE_LOCKED")) or "locked" in text:
        again = "save again" if writing else "try again"
        held = f"another program has held the bank for {timeout_s:g} s. Close that program, then {again}."
        return BankError(lost + held if writing else held[0].upper() + held[1:], code="locked")
    if name.startswith("SQLITE_READONLY") or "readonly" in text:
        return BankError(
            f"{lost}{path} cannot be written. Ask for write access to the file and its folder, or work on a copy.", code="read-only"
        )
    if name.startswith("SQLITE_FULL") or "disk is full" in text:
        return BankError(f"{lost or 'Refused: '}the disk is full. Free some space, then save again.", code="disk-full")
    if name.startswith("SQLITE_NOTADB") or "not a database" in text:
        return BankError(f"{path} is not a bank: it is not an SQLite file. Check the path.", code="not-a-bank")
    if name.startswith(("SQLITE_CORRUPT", "SQLITE_IOERR")) or "malformed" in text:
        return BankError(
            f"{lost}{path} is damaged or was copied while in use ({text}). Keep a copy as it is, then run verify or go back to a backup.",
            code="damaged",
        )
    if name.startswith("SQLITE_CANTOPEN") or "unable to open" in text:
        return BankError(f"{path} cannot be opened. Check that the folder exists and that you may read it.", code="cannot-open")
    if name.startswith("SQLITE_CONSTRAINT"):
        return BankError(f"{lost or 'Refused: '}the bank refused the change ({text}).", code="refused")
    return BankError(f"{lost}{path}: {text}", code="bank")


def identify(connection, path):
    """The schema number of an open file, 0 for an empty one.

    Raises
    ------
    BankError
        ``not-a-bank`` or ``newer-version``.
    """
    application = connection.execute("PRAGMA application_id").fetchone()[0]
    schema = connection.execute("PRAGMA user_version").fetchone()[0]
    if application != APPLICATION_ID:
        if application == 0 and schema == 0 and connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0] == 0:
            return 0
        raise BankError(f"{path} is not a bank: it is an SQLite file of another program. Check the path.", code="not-a-bank")
    if schema > SCHEMA:
        raise BankError(
            f"{path} was written by a newer curvebank (schema {schema}; this one knows {SCHEMA}). Update curvebank, then open it again.",
            code="newer-version",
        )
    return schema


def open_read(path, *, timeout_s=TIMEOUT_S, any_thread=False):
    """A read-only connection to an existing bank; ``any_thread`` for a caller that does its own locking.

    Raises
    ------
    BankError
        ``missing``, ``not-a-bank``, ``newer-version``, ``locked``, ``damaged``, ``cannot-open``.
    """
    import os  # always loaded by the interpreter

    path = os.fspath(path)
    if not os.path.isfile(path):
        what = "is a folder" if os.path.isdir(path) else "is not there"
        raise BankError(f"The bank {path} {what}. Check the path, or make a bank by opening it for writing.", code="missing")
    full = os.path.abspath(path)

    def connect(query):
        connection = sqlite3.connect(_uri(full, query), uri=True, timeout=timeout_s, isolation_level=None, check_same_thread=not any_thread)
        try:
            if identify(connection, path) == 0:
                raise BankError(f"{path} is empty: it is not a bank yet. Open it for writing once, or check the path.", code="not-a-bank")
        except BaseException:
            connection.close()
            raise
        return connection

    try:
        return connect("mode=ro")
    except sqlite3.Error as error:
        refused = (getattr(error, "sqlite_errorname", "") or "").startswith(("SQLITE_CANTOPEN", "SQLITE_READONLY"))
        if not refused or not os.access(full, os.R_OK):
            raise explain(error, path, writing=False, timeout_s=timeout_s) from error
        if os.path.exists(full + "-wal") and os.path.getsize(full + "-wal") > 0:
            raise BankError(
                f"{path} has unfinished work beside it ({os.path.basename(full)}-wal) in a folder that cannot be written. "
                "Open the bank once where it can be written, then copy it again.",
                code="cannot-open",
            ) from error
    try:
        # a WAL file in a folder that cannot be written: nobody can be writing it, so it may be read as it stands
        return connect("mode=ro&immutable=1")
    except sqlite3.Error as error:
        raise explain(error, path, writing=False, timeout_s=timeout_s) from error


def open_write(path, *, timeout_s=TIMEOUT_S, create=True):
    """A read-write connection with the pragmas every writer must have, at the newest schema; makes a missing bank.

    Raises
    ------
    BankError
        As ``open_read``, and ``read-only``, ``guards`` (triggers were removed from the file).
    """
    import os

    path = os.fspath(path)
    if os.path.isdir(path):
        raise BankError(f"{path} is a folder. Give the path of a file, such as bank.db.", code="cannot-open")
    folder = os.path.dirname(os.path.abspath(path))
    if not os.path.exists(path):
        if not create:
            raise BankError(f"The bank {path} is not there. Check the path.", code="missing")
        if not os.path.isdir(folder):
            raise BankError(f"The folder {folder} is not there. Make it first, then open the bank.", code="cannot-open")
    connection = None
    try:
        connection = sqlite3.connect(
            _uri(os.path.abspath(path), "mode=rwc" if create else "mode=rw"), uri=True, timeout=timeout_s, isolation_level=None
        )
        if identify(connection, path) > 0 and os.path.exists(path) and not os.access(path, os.W_OK):
            raise BankError(f"{path} cannot be written. Ask for write access, work on a copy, or open it to read.", code="read-only")
        for pragma in ("foreign_keys = ON", "recursive_triggers = ON", "synchronous = FULL"):
            connection.execute(f"PRAGMA {pragma}")
        if connection.execute("PRAGMA journal_mode").fetchone()[0] != "wal":
            connection.execute("PRAGMA journal_mode = WAL")
        _bring_up_to_date(connection, path)
        return connection
    except sqlite3.Error as error:
        if connection is not None:
            connection.close()
        raise explain(error, path, writing=True, timeout_s=timeout_s) from error
    except BaseException:
        if connection is not None:
            connection.close()
        raise


def _bring_up_to_date(connection, path):
    if identify(connection, path) < SCHEMA:
        from .migrations import upgrade  # sqlite-utils is slow to load and only needed here

        connection.execute("BEGIN IMMEDIATE")
        try:
            if identify(connection, path) < SCHEMA:  # another writer may have been first
                upgrade(connection)
            connection.execute("COMMIT")
        except BaseException:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
            raise
