"""Files that are no usable bank: each a BankError with a code and a next step, and nothing is changed."""

import os
import shutil
import sqlite3
import subprocess
import sys
import threading

import bank_samples as make
import pytest

from curvebank.bank import connect
from curvebank.bank.reader import Bank
from curvebank.bank.store import Store
from curvebank.bank.verify import verify
from curvebank.errors import BankError


def refused(open_it, code, words):
    """Opening fails with this code and these words."""
    with pytest.raises(BankError, match=words) as refusal:
        open_it()
    assert refusal.value.code == code
    return refusal.value


def test_missing_file(path):
    """Reading never makes a file."""
    refused(lambda: Bank(path), "missing", "is not there")
    assert not path.exists()
    refused(lambda: Store(path, create=False), "missing", "is not there")


def test_missing_folder(tmp_path):
    """Writing makes a file, not a folder."""
    refused(lambda: Store.open(tmp_path / "no" / "bank.db"), "cannot-open", "Make it first")


def test_folder_instead_of_a_file(tmp_path):
    """A folder is no bank."""
    refused(lambda: Bank(tmp_path), "missing", "is a folder")
    refused(lambda: Store.open(tmp_path), "cannot-open", "is a folder")


@pytest.mark.parametrize("content", [b"not a bank, a letter to the editor " * 40, b"\x89PNG\r\n\x1a\n" + bytes(2000)])
def test_file_that_is_no_database(path, content):
    """Its bytes stay as they are."""
    path.write_bytes(content)
    refused(lambda: Bank(path), "not-a-bank", "is not a bank")
    refused(lambda: Store.open(path), "not-a-bank", "is not a bank")
    assert path.read_bytes() == content


def test_database_of_another_program(path):
    """An SQLite file with tables of its own is left alone."""
    other = sqlite3.connect(path)
    other.execute("CREATE TABLE notes (text TEXT)")
    other.commit()
    other.close()
    before = path.read_bytes()
    refused(lambda: Bank(path), "not-a-bank", "another program")
    refused(lambda: Store.open(path), "not-a-bank", "another program")
    assert path.read_bytes() == before


def test_empty_file(path):
    """Nothing to read; writing makes it a bank."""
    path.touch()
    refused(lambda: Bank(path), "not-a-bank", "is empty")
    with Store.open(path) as store:
        make.save(store)
    assert verify(path).ok


def test_bank_from_a_newer_version(store, path):
    """Neither read nor written."""
    store.close()
    raw = sqlite3.connect(path)
    raw.execute("PRAGMA user_version = 99")
    raw.close()
    for open_it in (lambda: Bank(path), lambda: Store.open(path)):
        refused(open_it, "newer-version", "newer curvebank .schema 99.*Update curvebank")


def test_damaged_file(store, path):
    """Pages overwritten in the middle: opening or verifying says that it is damaged."""
    for _ in range(3):
        make.save(store, release=True)
    store.close()
    raw = bytearray(path.read_bytes())
    raw[4096 : 4096 * 20] = os.urandom(4096 * 19)
    path.write_bytes(raw)
    with pytest.raises(BankError) as refusal:
        with Bank(path) as bank:
            bank.pump(make.KEY).head(50.0, 320.0)
    assert refusal.value.code == "damaged" and "backup" in str(refusal.value)


def test_truncated_file(store, path):
    """Half a bank."""
    make.save(store)
    store.close()
    path.write_bytes(path.read_bytes()[:9000])
    with pytest.raises(BankError) as refusal:
        report = verify(path)
        assert report.ok
    assert refusal.value.code == "damaged"


def test_locked_bank_says_who_and_what_to_do(store, path):
    """Another writer holds it: nothing was saved, in the words of the house."""
    holder = sqlite3.connect(path, isolation_level=None)
    holder.execute("BEGIN IMMEDIATE")
    with Store(path, timeout_s=0.05) as other:
        error = refused(lambda: make.save(other), "locked", "Nothing was saved: another program has held the bank for 0.05 s.")
        assert "Close that program, then save again." in str(error)
        refused(lambda: other.set_settings({"a": 1}, who="me"), "locked", "Nothing was saved")
    holder.execute("ROLLBACK")
    holder.close()
    assert make.save(store) == (make.KEY, 1)


def test_locked_bank_can_still_be_read(store, path):
    """WAL: a writer does not keep readers out."""
    make.save(store, release=True)
    store.connection.execute("BEGIN IMMEDIATE")
    with Bank(path, timeout_s=0.05) as bank:
        assert bank.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)
    store.connection.execute("ROLLBACK")


AS_ANOTHER_USER = """
import os, sys
sys.path[:0] = {paths!r}
from curvebank.bank.reader import Bank
from curvebank.bank.store import Store
from curvebank.errors import BankError
if hasattr(os, "setuid") and os.getuid() == 0:
    os.setgid(65534); os.setuid(65534)  # root may write anywhere
path = {path!r}
print(round(Bank(path).pump({key!r}).head(50.0, 320.0), 6))
try:
    Store.open(path)
except BankError as error:
    print(error.code, "-", error)
"""


def test_read_only_folder(store, path, tmp_path):
    """A bank left in WAL mode in a folder nobody may write: read through immutable, refused for writing."""
    make.save(store, release=True)
    store.close()
    folder = tmp_path / "published"
    folder.mkdir()
    copy = shutil.copy(path, folder / "bank.db")
    os.chmod(copy, 0o444)
    os.chmod(folder, 0o555)
    for parent in [folder, *folder.parents]:
        if parent.stat().st_uid == os.getuid() and not parent.stat().st_mode & 0o005:
            os.chmod(parent, parent.stat().st_mode | 0o055)
    code = AS_ANOTHER_USER.format(paths=sys.path, path=str(copy), key=make.KEY)
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    os.chmod(folder, 0o755)
    assert done.returncode == 0, done.stderr
    first, second = done.stdout.splitlines()
    assert first == "43.75"
    assert second.startswith("read-only - ") and "write access" in second
    assert sorted(p.name for p in folder.iterdir()) == ["bank.db"]


def test_unfinished_work_beside_a_read_only_bank_is_not_skipped(monkeypatch, store, path):
    """immutable would not see the -wal file: better an error than old numbers."""
    make.save(store, release=True)
    assert os.path.getsize(f"{path}-wal") > 0
    real = sqlite3.connect

    def cannot(where, **more):
        if "immutable" in where:
            return real(where, **more)
        error = sqlite3.OperationalError("unable to open database file")
        error.sqlite_errorname = "SQLITE_CANTOPEN"
        raise error

    monkeypatch.setattr(connect.sqlite3, "connect", cannot)
    refused(lambda: Bank(path), "cannot-open", "unfinished work beside it")


def test_strange_file_names(tmp_path):
    """Characters that mean something in a URI."""
    path = tmp_path / "a bank?mode=rw#50%.db"
    with Store.open(path) as store:
        make.save(store, release=True)
    with Bank(path) as bank:
        assert bank.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)
    assert path.is_file()


def test_two_writers_may_make_the_bank_at_once(path):
    """One makes it, the other finds it made."""
    errors = []

    def make_it():
        try:
            Store.open(path).close()
        except BaseException as error:  # noqa: BLE001 - told to the test below
            errors.append(error)

    threads = [threading.Thread(target=make_it) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert errors == [] and verify(path).ok


@pytest.mark.parametrize(
    ("name", "text", "code"),
    [
        ("SQLITE_BUSY", "database is locked", "locked"),
        ("SQLITE_FULL", "database or disk is full", "disk-full"),
        ("SQLITE_READONLY_DIRECTORY", "attempt to write a readonly database", "read-only"),
        ("SQLITE_IOERR_READ", "disk I/O error", "damaged"),
        ("SQLITE_CONSTRAINT_TRIGGER", "curve is append-only: no row is changed", "refused"),
        ("SQLITE_ERROR", "something else", "bank"),
    ],
)
def test_every_sqlite_error_has_words(name, text, code):
    """A code for programs, a sentence for people."""
    error = sqlite3.OperationalError(text)
    error.sqlite_errorname = name
    for writing in (True, False):
        told = connect.explain(error, "bank.db", writing=writing)
        assert (
            told.code == code
            and str(told).startswith("Nothing was saved" if writing else "")
            and str(told)[0].isupper() | str(told).startswith("bank")
        )
