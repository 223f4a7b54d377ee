"""Schema steps: whole or not at all, guards re-checked, and banks of each released schema still open and answer the same."""

import gzip
import sqlite3
from pathlib import Path

import bank_samples as make
import pytest
from sqlite_utils.migrations import Migrations

from curvebank.bank import connect, guards, migrations, verify
from curvebank.bank.reader import Bank
from curvebank.bank.store import Store
from curvebank.errors import BankError

KEPT = Path(__file__).parent / "banks"


def state(path):
    """Everything in a file, as text."""
    with sqlite3.connect(path) as raw:
        text = list(raw.iterdump())
    version = raw.execute("PRAGMA user_version").fetchone()[0]
    raw.close()
    return text, version


@pytest.fixture
def next_schema(monkeypatch, store, path):
    """A bank of schema 1 under a curvebank that knows schema 2, whose step a test supplies."""
    make.save(store, release=True)
    store.close()

    def know(step, texts):
        steps = Migrations("curvebank")
        steps()(migrations.schema_1)
        steps(name="schema_2")(step)
        monkeypatch.setattr(migrations, "STEPS", steps)
        for module in (connect, migrations, verify):
            monkeypatch.setattr(module, "SCHEMA", 2)
        monkeypatch.setattr(guards, "SCHEMA_TEXTS", guards.SCHEMA_TEXTS | {2: texts})
        guards.expected_objects.cache_clear()

    yield know
    guards.expected_objects.cache_clear()


NOTE = """
CREATE TABLE note (id INTEGER PRIMARY KEY CHECK (id > 0), text TEXT NOT NULL) STRICT;
CREATE TRIGGER guard_note_update BEFORE UPDATE ON note
BEGIN SELECT RAISE(ABORT, 'note is append-only: no row is changed'); END;
"""


def test_a_step_adds_and_keeps(next_schema, path):
    """An old bank is brought up to date on opening for writing; its numbers and guards stay."""

    def step(db):
        guards.run_texts(db.conn, (NOTE,))
        db.conn.execute("UPDATE meta SET value = '2' WHERE name = 'schema'")

    next_schema(step, (NOTE,))
    with Bank(path) as old:
        assert old.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)
    with Store.open(path) as store:
        assert store.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)
        with pytest.raises(sqlite3.IntegrityError):
            store.connection.execute("UPDATE curve SET c0 = 1")
    assert state(path)[1] == 2 and verify.verify(path).ok


def test_a_step_that_fails_leaves_the_bank_as_it_was(next_schema, path):
    """Half of the step had run."""

    def step(db):
        guards.run_texts(db.conn, (NOTE,))
        raise ValueError("power cut")

    next_schema(step, (NOTE,))
    before = state(path)
    with pytest.raises(ValueError, match="power cut"):
        Store.open(path)
    assert state(path) == before


@pytest.mark.parametrize("loss", ["DROP TRIGGER guard_curve_update", "ALTER TABLE finding RENAME TO finding_old"])
def test_a_step_that_loses_a_guard_is_refused(next_schema, path, loss):
    """The check after the step sees it, the bank stays as it was."""

    def step(db):
        guards.run_texts(db.conn, (NOTE,))
        db.conn.execute(loss)

    next_schema(step, (NOTE,))
    before = state(path)
    with pytest.raises(BankError, match="guards would not be whole") as refusal:
        Store.open(path)
    assert refusal.value.code == "guards" and state(path) == before


def test_rebuilding_a_guarded_table_is_caught(next_schema, path):
    """sqlite-utils' transform() drops the triggers of a table without a word; the check after the step does not let it pass."""

    def step(db):
        guards.run_texts(db.conn, (NOTE,))
        db["setting"].transform(rename={"who": "person"})

    next_schema(step, (NOTE,))
    before = state(path)
    with pytest.raises(BankError, match="setting"):
        Store.open(path)
    assert state(path) == before


PINNED = {
    ("head", 50.0, 320.0, 1450.0): 43.75,
    ("head", 50.0, 300.0, 1480.0): 39.57465299,
    ("efficiency", 50.0, 300.0, 1450.0): 0.7435843267441277,
    ("power", 50.0, 305.0, 1480.0): 8.751021101,
    ("npshr", 50.0, 300.0, 1300.0): 2.544891187,
}


def old_banks():
    """Schema -> kept file."""
    return {int(path.name.split("-")[1].split(".")[0]): path for path in sorted(KEPT.glob("schema-*.db.gz"))}


def test_one_bank_of_every_schema_is_kept():
    """Schemas 1 to the newest."""
    assert sorted(old_banks()) == list(range(1, connect.SCHEMA + 1))


@pytest.mark.parametrize("schema", old_banks())
def test_kept_bank_answers_as_on_the_day_it_was_made(schema, path):
    """A pinned number never changes: the values were written down when the bank was made, to ten figures."""
    path.write_bytes(gzip.decompress(old_banks()[schema].read_bytes()))
    with Bank(path) as bank:
        pump = bank.pump("LARK-WM-150")
        for (quantity, flow, diameter, speed), value in PINNED.items():
            assert pump.quantity(quantity)(flow, diameter, speed) == pytest.approx(value, rel=1e-9)
        with pytest.warns(UserWarning, match="withdrawn"):
            assert bank.pump("LARK-WM-150", revision=1).head(50.0, 320.0) == pytest.approx(43.75)
    assert verify.verify(path).ok
    with Store.open(path) as store:
        assert make.save(store)[1] == 4
    assert verify.verify(path).ok
