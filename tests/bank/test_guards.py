"""Known ways round an append-only bank, each tried from a plain connection with SQLite's default settings: refused, or shown by verify."""

import shutil
import sqlite3
import subprocess
import sys

import bank_samples as make
import pytest

from curvebank.bank.guards import guard_faults, statements
from curvebank.bank.store import Store
from curvebank.bank.verify import verify
from curvebank.errors import BankError

SHORT = {
    "NEXT": "(SELECT max(seq) + 1 FROM event)",
    "LAST": "(SELECT sha256 FROM event ORDER BY seq DESC LIMIT 1)",
    "REST": "body_sha256, read_rule, rule_json, stages, rated_rpm, density_kgm3, settings_json, made_by_json",
    "CURVE": "INSERT INTO curve (revision_id, local_id, quantity, applies_to, basis, kind, page, sha256)",
}


def named(text):
    """Name -> SQL from blocks that begin ``-- name``."""
    blocks = (block.strip().partition("\n") for block in text.format(**SHORT).split("-- ") if block.strip())
    return {name: sql for name, _, sql in blocks}


REFUSED = named("""
-- change a coefficient
UPDATE curve SET c0 = 1.0
-- change a coefficient back and forth by replace
INSERT OR REPLACE INTO curve SELECT * FROM curve WHERE id = 1
-- update or replace
UPDATE OR REPLACE curve SET local_id = 'H-280' WHERE local_id = 'H-320'
-- upsert
INSERT INTO meta VALUES ('uuid', 'x') ON CONFLICT (name) DO UPDATE SET value = 'x'
-- delete a curve
DELETE FROM curve WHERE id = 1
-- delete a revision
DELETE FROM revision
-- delete an event
DELETE FROM event WHERE seq = (SELECT max(seq) FROM event)
-- change who saved
UPDATE revision SET who = 'someone else'
-- replace a revision
INSERT OR REPLACE INTO revision SELECT * FROM revision WHERE id = 1
-- replace a revision by its save key
INSERT OR REPLACE INTO revision SELECT 77, pump_id, 9, parent_id, saved_at, who, why, save_key, {REST} FROM revision WHERE id =
1
-- replace a pump by its key
INSERT OR REPLACE INTO pump SELECT 77, key, maker_id, model, 9, rated_rpm FROM pump
-- swap kept bytes
INSERT OR REPLACE INTO blob SELECT sha256, kind, x'00' FROM blob LIMIT 1
-- move a draft's curve into the released revision
UPDATE curve SET revision_id = 1, local_id = 'X' WHERE revision_id = 2
-- add a curve to a saved revision
{CURVE} VALUES (1, 'late', 'head', 'this', 'catalogue', 'line', 1, zeroblob(32))
-- add a finding to a saved revision
INSERT INTO finding SELECT 99, revision_id, key, rule, severity, subject, json FROM finding LIMIT 1
-- add a recipe to a saved revision
INSERT INTO revision_recipe SELECT 99, revision_id, sheet_sha256, 7, recipe_sha256 FROM revision_recipe LIMIT 1
-- add a trace to a saved curve
INSERT INTO trace SELECT (SELECT id FROM curve WHERE local_id = 'T'), n, bytes FROM trace LIMIT 1
-- replace a trace
INSERT OR REPLACE INTO trace SELECT curve_id, 1, zeroblob(24) FROM trace LIMIT 1
-- orphan curve
{CURVE} VALUES (999, 'orphan', 'head', 'this', 'catalogue', 'line', 1, zeroblob(32))
-- orphan trace
INSERT INTO trace VALUES (999, 1, zeroblob(24))
-- orphan revision
INSERT INTO revision SELECT 99, 999, 1, NULL, saved_at, who, why, 'k', {REST} FROM revision LIMIT 1
-- text where a number belongs
INSERT INTO setting VALUES ('one', 'a', '1', 'me', '2026-01-01T00:00:00.000Z', zeroblob(32), zeroblob(32))
-- event out of line
INSERT INTO event SELECT 99, at, who, kind, pump_id, revision_id, why, json, previous_sha256, zeroblob(32) FROM event LIMIT 1
-- event into the past
INSERT INTO event SELECT {NEXT}, '2001-01-01T00:00:00.000Z', who, 'commented', pump_id, revision_id, why, json, {LAST},
zeroblob(32) FROM event LIMIT 1
-- release beside a release
INSERT INTO event SELECT {NEXT}, '2099-01-01T00:00:00.000Z', who, 'released', 1, 2, why, json, {LAST}, zeroblob(32) FROM event
LIMIT 1
-- span without an event
INSERT INTO release_span VALUES (2, 1, '2026-01-01T00:00:00.000Z', NULL)
-- reopen a span
UPDATE release_span SET valid_to = NULL
-- shift a span
UPDATE release_span SET valid_from = '2001-01-01T00:00:00.000Z'
-- close a span without an event
UPDATE release_span SET valid_to = '2099-01-01T00:00:00.000Z'
-- replace a span
INSERT OR REPLACE INTO release_span SELECT * FROM release_span
-- change the bank's identity
UPDATE meta SET value = 'x' WHERE name = 'uuid'
-- lower the contract
UPDATE meta SET value = '0' WHERE name = 'contract'
-- rewrite a setting
UPDATE setting SET value = '2'
-- alias without an event
INSERT INTO alias VALUES ('OTHER', 1, 999)
-- row ids moved
UPDATE curve SET id = id + 100
-- revision that skips a number
INSERT INTO revision SELECT 99, pump_id, 9, NULL, saved_at, who, why, 'k', {REST} FROM revision LIMIT 1
""")

SHOWN = named("""
-- trigger dropped
DROP TRIGGER guard_curve_update
-- trigger dropped, number changed, trigger put back by another hand
DROP TRIGGER guard_curve_update; UPDATE curve SET c1 = c1 * (1 + 1e-15) WHERE id = 1; CREATE TRIGGER guard_curve_update BEFORE
UPDATE ON curve BEGIN SELECT 1; END
-- checks switched off
PRAGMA ignore_check_constraints = ON; INSERT INTO setting SELECT 3, '', 'no json', '', 'never', sha256, zeroblob(32) FROM
setting WHERE seq = 2
-- setting changed, the trigger put back
PUT BACK guard_setting_update: UPDATE setting SET value = '9' WHERE seq = 1
-- maker changed, the trigger put back
PUT BACK guard_maker_update: UPDATE maker SET name = 'Another'
-- number changed, the trigger put back
PUT BACK guard_curve_update: UPDATE curve SET c1 = c1 * (1 + 1e-15) WHERE id = 1
-- point changed, the trigger put back
PUT BACK guard_trace_update: UPDATE trace SET bytes = zeroblob(24 * n)
-- reason changed, the trigger put back
PUT BACK guard_event_update: UPDATE event SET why = 'no reason' WHERE seq = 1
-- finding removed, the trigger put back
PUT BACK guard_finding_delete: DELETE FROM finding WHERE id = 1
-- sheet swapped, the trigger put back
PUT BACK guard_blob_update: UPDATE blob SET bytes = x'00' WHERE kind = 'sheet'
-- last event removed, the trigger put back
PUT BACK guard_event_delete: DELETE FROM event WHERE seq = 3
-- span shifted, the trigger put back
PUT BACK guard_release_span_update: UPDATE release_span SET valid_from = '2001-01-01T00:00:00.000Z'
-- revision forged outside
INSERT INTO revision SELECT 99, pump_id, 3, NULL, saved_at, who, why, 'k', {REST} FROM revision WHERE id = 2
-- event with a made-up hash
INSERT INTO event SELECT {NEXT}, '2099-01-01T00:00:00.000Z', who, 'withdrawn', 1, 1, why, json, {LAST}, zeroblob(32) FROM event
LIMIT 1
-- view of the contract dropped
DROP VIEW released_curve
-- column added
ALTER TABLE curve ADD COLUMN remark TEXT
-- table of another program
CREATE TABLE notes (text TEXT)
-- schema rewritten
PRAGMA writable_schema = ON; UPDATE sqlite_master SET sql = replace(sql, 'append-only', 'free') WHERE name = 'guard_blob_delete'
""")


@pytest.fixture(scope="module")
def template(tmp_path_factory):
    """A bank with a released revision, a draft, a curve without a trace, findings and a setting."""
    bare = make.renamed(make.curve("T", "head", make.HEAD_320, 310.0), points=make.frozen([], (0, 2)), sigma=make.frozen([], (0,)))
    curves = [*make.main_curves(), bare]
    path = tmp_path_factory.mktemp("template") / "bank.db"
    with Store.open(path) as store:
        make.save(store, make.digitised(curves, findings=[make.finding()]), release=True)
        make.save(store, make.digitised(curves, findings=[make.finding()]))
        store.set_settings({"a": 1, "b": 2}, who="R. Holt")
    assert verify(path).ok
    return path


@pytest.fixture
def filled(template, tmp_path):
    """A copy of it to tamper with."""
    return shutil.copy(template, tmp_path / "bank.db")


@pytest.mark.parametrize("how", REFUSED)
def test_bypass_is_refused(filled, how):
    """SQLite itself refuses, and nothing has changed afterwards."""
    with sqlite3.connect(filled) as raw:
        before = list(raw.iterdump())
        with pytest.raises(sqlite3.IntegrityError):
            raw.execute(REFUSED[how])
        raw.rollback()
        assert list(raw.iterdump()) == before
    raw.close()
    assert verify(filled).ok


@pytest.mark.parametrize("how", SHOWN)
def test_bypass_is_shown_by_verify(filled, how):
    """What a person with the file in hand can still do leaves a trace."""
    raw = sqlite3.connect(filled, isolation_level=None)
    put_back, _, act = SHOWN[how].rpartition(": ")
    if put_back:
        trigger = put_back.removeprefix("PUT BACK ")
        text = raw.execute("SELECT sql FROM sqlite_master WHERE name = ?", (trigger,)).fetchone()[0]
        raw.execute(f"DROP TRIGGER {trigger}")
    for statement in statements(act.replace("; ", ";\n") + ";\n"):
        raw.execute(statement)
    if put_back:
        assert raw.execute("SELECT changes()").fetchone()[0] > 0
        raw.execute(text)
        assert guard_faults(raw) == []
    raw.close()
    report = verify(filled)
    assert not report.ok and report.faults


def test_an_infinite_number_is_refused(filled):
    """A revision of one's own, still open, takes curves, but no infinite number (STRICT alone lets infinity in)."""
    raw = sqlite3.connect(filled, isolation_level=None)
    raw.execute("BEGIN")
    raw.execute(
        f"INSERT INTO revision SELECT 99, pump_id, 3, NULL, saved_at, who, why, 'k', {SHORT['REST']} FROM revision WHERE number = 2"
    )
    curve = SHORT["CURVE"].replace("sha256)", "sha256, level)") + " VALUES (99, ?, 'head', 'this', 'catalogue', 'line', 1, zeroblob(32), ?)"
    raw.execute(curve, ("finite", 1.0))
    for name, level in (("inf", float("inf")), ("minus inf", float("-inf")), ("huge", 1e301)):
        with pytest.raises(sqlite3.IntegrityError, match="CHECK"):
            raw.execute(curve, (name, level))
    raw.execute("ROLLBACK")
    raw.close()


def test_a_bank_without_its_guards_is_not_written_to(filled):
    """The writer refuses before it adds anything."""
    raw = sqlite3.connect(filled)
    raw.execute("DROP TRIGGER guard_event_chain")
    raw.close()
    with pytest.raises(BankError, match="guards are not whole") as refusal:
        Store.open(filled)
    assert refusal.value.code == "guards"


def test_a_trigger_made_empty_is_named(filled):
    """The guard check compares text, not names."""
    raw = sqlite3.connect(filled)
    raw.execute("DROP TRIGGER guard_curve_delete")
    raw.execute("CREATE TRIGGER guard_curve_delete BEFORE DELETE ON curve BEGIN SELECT 1; END")
    assert guard_faults(raw) == ["trigger guard_curve_delete was changed"]
    raw.close()


def test_every_table_has_its_guards(filled):
    """No table is left without a trigger against update, delete and replace."""
    raw = sqlite3.connect(filled)
    tables = [n for (n,) in raw.execute("SELECT name FROM sqlite_master WHERE type = 'table' AND name NOT LIKE '%sqlite_%'")]
    triggers = {n for (n,) in raw.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'")}
    raw.close()
    assert len(tables) == 15
    assert not {f"guard_{table}_{what}" for table in tables for what in ("update", "delete", "replace")} - triggers


def test_every_table_is_strict(filled):
    """STRICT refuses text in a number column in every table."""
    raw = sqlite3.connect(filled)
    rows = raw.execute(
        "SELECT name, strict FROM pragma_table_list WHERE schema = 'main' AND type = 'table' AND name NOT LIKE '%sqlite_%'"
    ).fetchall()
    raw.close()
    assert len(rows) == 15 and all(strict for _, strict in rows)


def test_header_states_what_the_file_is(filled):
    """application_id and user_version sit in the header, where `file` and other tools look (SQLite file format, offsets 68 and 60)."""
    head = filled.read_bytes()[:72]
    assert head[68:72] == b"CBNK" and int.from_bytes(head[60:64], "big") == 1


def test_sqlite_shell_is_refused_too(filled):
    """The same from another process, with no curvebank in it."""
    code = f"import sqlite3; sqlite3.connect({str(filled)!r}, isolation_level=None).execute('DELETE FROM curve')"
    done = subprocess.run([sys.executable, "-S", "-c", code], capture_output=True, text=True)
    assert "append-only" in done.stderr and verify(filled).ok
