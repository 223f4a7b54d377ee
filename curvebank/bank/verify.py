"""Is a bank what it says it is? Hashes, chain, columns against bodies, release spans against events, guards, and re-derivation.

A chain proves that a bank agrees with its head: write the head down elsewhere (an edition, a printed release record) to prove more.
"""

import json
import sqlite3
from collections import namedtuple
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np

from ..errors import BankError, CurvebankError
from ..laws.family import RULES
from . import chain, pack, rows
from .connect import APPLICATION_ID, CONTRACT, SCHEMA, explain, open_read
from .guards import guard_faults

Fault = namedtuple("Fault", "code subject message")
"""One thing that is wrong (or, in ``notes``, worth knowing): what, where, in words."""
Report = namedtuple("Report", "ok faults notes counts head_sha256")
"""``ok`` is True where there is no fault; ``counts`` says how much was looked at; ``head_sha256`` is the head of the event chain (hex)."""

Progress = Callable[[float, str], None]
SAME_U, DRIFT_U, SAME_RANGE = 0.1, 1.0, 1e-9


def verify(
    path: Any, *, rederive: Callable[[bytes, bytes | None, dict[str, Any]], Any] | None = None, progress: Progress | None = None
) -> Report:
    """Check a bank file from end to end, reading only.

    Parameters
    ----------
    path : str or path-like
    rederive : callable, optional
        ``rederive(recipe_bytes, sheet_bytes, settings) -> records.Digitised``: digitises the recipes of each pump's newest and released
        revisions again and compares. A change over the common domain counts as the same up to 0.1 u + 1e-9 of the range,
        as a drift (a note) up to 1 u, and as a fault beyond.
    progress : callable, optional
        ``progress(share, text)``; it may raise `Cancelled`.

    Returns
    -------
    Report

    Raises
    ------
    BankError
        The file cannot be read as a bank at all.
    """
    say = progress or (lambda share, text: None)
    connection = open_read(path)
    try:
        return _verify(connection, rederive, say)
    except sqlite3.Error as error:
        raise explain(error, path, writing=False) from error
    finally:
        connection.close()


def _verify(db: sqlite3.Connection, rederive: Any, say: Progress) -> Report:
    faults: list[Fault] = []
    notes: list[Fault] = []
    steps: list[tuple[str, Callable[[], Iterator[Fault]]]] = [
        ("Reading the file", lambda: _file(db)),
        ("Looking at the guards", lambda: (Fault("guards", "schema", f"{text}.") for text in guard_faults(db))),
        ("Hashing what is kept", lambda: _blobs(db)),
        ("Walking the events", lambda: _events(db)),
        ("Walking the settings", lambda: _settings(db)),
        ("Comparing columns with bodies", lambda: _revisions(db)),
        ("Comparing releases with events", lambda: _spans(db)),
    ]
    share = 0.5 if rederive else 1.0
    for i, (text, step) in enumerate(steps):
        say(share * i / len(steps), text)
        try:
            faults.extend(step())
        except sqlite3.DatabaseError as error:
            faults.append(Fault("damaged", text, f"SQLite could not go on: {error}."))
    if rederive:
        _rederive(db, rederive, faults, notes, lambda part, text: say(share + (1 - share) * part, text))
    counts = {}
    for table in ("pump", "revision", "curve", "event", "blob"):
        counts[table] = db.execute(f"SELECT count(*) FROM {table}").fetchone()[0]
    head = db.execute("SELECT sha256 FROM event ORDER BY seq DESC LIMIT 1").fetchone()
    say(1.0, "Done")
    return Report(not faults, faults, notes, counts, head[0].hex() if head else "")


def _file(db: sqlite3.Connection) -> Iterator[Fault]:
    for (text,) in db.execute("PRAGMA integrity_check(20)"):
        if text != "ok":
            yield Fault("integrity", "file", f"SQLite finds: {text}.")
    for table, rowid, parent, _ in db.execute("PRAGMA foreign_key_check"):
        yield Fault("orphan", f"{table} {rowid}", f"Row {rowid} of {table} refers to a row of {parent} that is not there.")
    meta = dict(db.execute("SELECT name, value FROM meta"))
    for name, want in (("application_id", str(APPLICATION_ID)), ("schema", str(SCHEMA)), ("contract", str(CONTRACT))):
        if meta.get(name) != want:
            yield Fault("meta", f"meta {name}", f"{name} is {meta.get(name)}, not {want}.")
    if not meta.get("uuid"):
        yield Fault("meta", "meta uuid", "The bank has lost its identity (uuid).")


def _blobs(db: sqlite3.Connection) -> Iterator[Fault]:
    for sha, kind, raw in db.execute("SELECT sha256, kind, bytes FROM blob"):
        if pack.sha256(raw) != sha:
            yield Fault("hash", f"blob {sha.hex()[:12]}", f"A kept {kind} is not what its hash says: it was altered.")


def _events(db: sqlite3.Connection) -> Iterator[Fault]:
    previous, seq, at = bytes(32), 0, ""
    names = [name for name, _ in chain.FIELDS]
    for values in db.execute(f"SELECT {chain.NAMES}, sha256 FROM event ORDER BY seq"):
        row, sha = dict(zip(names, values, strict=False)), values[-1]
        here = f"event {row['seq']}"
        if row["seq"] != seq + 1:
            yield Fault("chain", here, f"Events {seq + 1} to {row['seq'] - 1} are missing.")
        if row["previous_sha256"] != previous:
            yield Fault("chain", here, "It does not follow the event before it: the chain is broken.")
        if row["at"] < at:
            yield Fault("chain", here, f"Time runs backwards, from {at} to {row['at']}.")
        if chain.event_hash(row) != sha:
            yield Fault("hash", here, "The event is not what its hash says: it was altered.")
        previous, seq, at = sha, row["seq"], row["at"]


def _settings(db: sqlite3.Connection) -> Iterator[Fault]:
    previous, seq = bytes(32), 0
    names = [name for name, _ in chain.SETTING]
    for values in db.execute(f"SELECT {chain.SETTING_NAMES}, sha256 FROM setting ORDER BY seq"):
        row, sha = dict(zip(names, values, strict=False)), values[-1]
        if row["seq"] != seq + 1 or row["previous_sha256"] != previous or chain.setting_hash(row) != sha:
            yield Fault("settings", f"setting {row['seq']}", f"The setting {row['name']!r} was altered, or one before it is missing.")
        previous, seq = sha, row["seq"]


# columns that repeat what the body says
REVISION_COLUMNS = ("saved_at", "who", "why", "save_key", "read_rule", "stages", "rated_rpm", "density_kgm3")


def _revisions(db: sqlite3.Connection) -> Iterator[Fault]:
    named = ", ".join(f"revision.{name}" for name in REVISION_COLUMNS)
    sql = (
        f"SELECT revision.id, pump.key, number, body_sha256, rule_json, settings_json, made_by_json, maker.name, model,"
        f" {named}, bytes,"
        " (SELECT json FROM event WHERE revision_id = revision.id AND kind = 'saved'),"
        " (SELECT number FROM revision AS parent WHERE parent.id = revision.parent_id)"
        " FROM revision JOIN pump ON pump.id = pump_id JOIN maker ON maker.id = maker_id"
        " LEFT JOIN blob ON blob.sha256 = body_sha256 ORDER BY revision.id"
    )
    for row in db.execute(sql):
        revision_id, key, number, body_sha, rule, settings, made_by, maker, model = row[:9]
        raw, saved, parent = row[-3:]
        here = f"{key} revision {number}"
        if raw is None:
            yield Fault("missing", here, "Its packed body is missing.")
            continue
        try:
            body = pack.unpack(raw)
        except BankError as error:
            yield Fault("damaged", here, error.message)
            continue
        if saved is None:
            yield Fault("events", here, "It was never recorded as saved: it did not come from curvebank.")
        elif json.loads(saved).get("body_sha256") != body_sha.hex():
            yield Fault("events", here, "The body is not the one that was recorded when it was saved.")
        if number == 1 and (maker, model) != (body["maker"], body["model"]):
            yield Fault("columns", here, f"The pump is filed as {maker} {model}, but was saved as {body['maker']} {body['model']}.")
        columns = dict(zip(REVISION_COLUMNS, row[9:-3], strict=True)) | {"key": key, "number": number, "parent": parent}
        yield from (
            Fault("columns", here, f"{name} is {columns[name]!r}, but {body[name]!r} was saved.")
            for name in columns
            if columns[name] != body[name]
        )
        exponents = {k: v.tolist() for k, v in body["rule"].items()}
        if json.loads(rule) != exponents or json.loads(made_by) != body["made_by"]:
            yield Fault("columns", here, "The read rule or the versions are not those that were saved.")
        if json.loads(settings) != {k: json.loads(v) for k, v in body["settings"].items()}:
            yield Fault("columns", here, "The settings are not those that were saved.")
        if {k: list(v) for k, v in RULES.get(body["read_rule"], {}).items()} != exponents:
            yield Fault("rule", here, f"This curvebank reads {body['read_rule']} with other exponents than were saved. Update curvebank.")
        yield from _children(db, revision_id, body, here)


def _children(db: sqlite3.Connection, revision_id: int, body: dict[str, Any], here: str) -> Iterator[Fault]:
    want = {record["id"]: record for record in body["curves"]}
    names = list(rows.curve_columns(body["curves"][0])) if body["curves"] else ["local_id"]
    have = {}
    sql = f"SELECT curve.id, n, trace.bytes, {', '.join(names)} FROM curve LEFT JOIN trace ON curve_id = curve.id WHERE revision_id = ?"
    for _, n, raw, *values in db.execute(sql, (revision_id,)):
        have[dict(zip(names, values, strict=True))["local_id"]] = (dict(zip(names, values, strict=True)), n, raw)
    for name in sorted(want.keys() ^ have.keys()):
        yield Fault(
            "columns", f"{here}, {name}", "The curve is missing." if name in want else "The curve was not saved with this revision."
        )
    for name in sorted(want.keys() & have.keys()):
        columns, n, raw = have[name]
        expected = rows.curve_columns(want[name])
        wrong = [column for column in names if columns[column] != expected[column]]
        if wrong:
            yield Fault("columns", f"{here}, {name}", f"{', '.join(wrong)} differ from what was saved.")
        trace = want[name]["trace"]
        if (trace is None) != (raw is None) or (trace is not None and (trace["n"] != n or pack.sha256(raw) != trace["sha256"])):
            yield Fault("columns", f"{here}, {name}", "The traced points differ from what was saved.")
    findings = db.execute(
        "SELECT key, rule, severity, subject, json FROM finding WHERE revision_id = ? ORDER BY id", (revision_id,)
    ).fetchall()
    if findings != [(f["key"], f["rule"], f["severity"], f["subject"], rows.finding_json(f)) for f in body["findings"]]:
        yield Fault("columns", here, "The findings differ from those that were saved.")
    sources = db.execute(
        "SELECT sheet_sha256, page, recipe_sha256 FROM revision_recipe WHERE revision_id = ? ORDER BY id", (revision_id,)
    ).fetchall()
    if sources != [(s["sheet_sha256"], s["page"], s["recipe_sha256"]) for s in body["sources"]]:
        yield Fault("columns", here, "The sheets and recipes differ from those that were saved.")


def _spans(db: sqlite3.Connection) -> Iterator[Fault]:
    want: dict[int, list[Any]] = {}
    for revision_id, pump_id, kind, at in db.execute(
        "SELECT revision_id, pump_id, kind, at FROM event WHERE kind IN ('released', 'superseded', 'withdrawn') ORDER BY seq"
    ):
        if kind == "released":
            want[revision_id] = [pump_id, at, None]
        elif revision_id in want and want[revision_id][2] is None:
            want[revision_id][2] = at
    have = {row[0]: list(row[1:]) for row in db.execute("SELECT revision_id, pump_id, valid_from, valid_to FROM release_span")}
    for revision_id in sorted(want.keys() | have.keys()):
        if want.get(revision_id) != have.get(revision_id):
            yield Fault("release", f"revision row {revision_id}", "When it was released does not follow from the events.")


def _rederive(db: sqlite3.Connection, rederive: Any, faults: list[Fault], notes: list[Fault], say: Progress) -> None:
    newest = db.execute(
        "SELECT pump.key, number, bytes FROM revision JOIN pump ON pump.id = pump_id JOIN blob ON blob.sha256 = body_sha256"
        " WHERE number = (SELECT max(number) FROM revision AS other WHERE other.pump_id = revision.pump_id)"
        " OR revision.id IN (SELECT revision_id FROM release_span WHERE valid_to IS NULL) ORDER BY pump.key, number DESC"
    ).fetchall()
    done = set()
    for i, (key, number, raw) in enumerate(newest):
        body = pack.unpack(raw)
        say(i / len(newest), f"Digitising {key} again")
        settings = {k: json.loads(v) for k, v in body["settings"].items()}
        for source in body["sources"]:
            here = f"{key} revision {number}, {source['file_name'] or 'typed table'}"
            job = (key, source["sheet_sha256"], source["page"], source["recipe_sha256"])
            if job in done:
                continue
            done.add(job)
            recipe = db.execute("SELECT bytes FROM blob WHERE sha256 = ?", (source["recipe_sha256"],)).fetchone()
            sheet = db.execute("SELECT bytes FROM blob WHERE sha256 = ?", (source["sheet_sha256"],)).fetchone()
            try:
                fresh = rederive(recipe[0], sheet[0] if sheet else None, settings)
                if fresh.pump is None or fresh.error is not None:
                    faults.append(Fault("rederive", here, f"It cannot be digitised again: {fresh.error}."))
                    continue
                origin = (source["sheet_sha256"], source["page"])
                new = {r["recipe_id"]: r for r in rows.fresh_parts(fresh, origin)[0]["curves"]}
            except CurvebankError as error:
                if error.code == "cancelled":
                    raise
                faults.append(Fault("rederive", here, f"It cannot be digitised again: {error.message}"))
                continue
            for old in body["curves"]:
                if (old["sheet_sha256"], old["page"]) == origin:
                    _compare(old, new.get(old["recipe_id"]), f"{here}, {old['id']}", faults, notes)


def _compare(old: dict[str, Any], new: dict[str, Any] | None, here: str, faults: list[Fault], notes: list[Fault]) -> None:
    if new is None or (old["fit"] is None) != (new["fit"] is None):
        faults.append(Fault("rederive", here, "The curve is not there when the recipe is digitised again."))
        return
    if old["fit"] is None:
        if old["trace"] and new["trace"] and old["trace"]["sha256"] != new["trace"]["sha256"]:
            notes.append(Fault("drift", here, "The traced points are not the same to the bit."))
        return
    a, b = old["fit"], new["fit"]
    lo, hi = max(a["lo"], b["lo"]), min(a["hi"], b["hi"])
    if not lo < hi:
        faults.append(Fault("rederive", here, "The old and the new curve share no flow."))
        return
    q = np.linspace(lo, hi, 101)

    def value(f: dict[str, Any]) -> np.ndarray:
        return np.polynomial.polynomial.polyval((q - f["mid"]) / f["half"], f["scaled"])

    first, second = value(a), value(b)
    phi = np.polynomial.polynomial.polyvander((q - a["mid"]) / a["half"], a["order"])
    u = np.sqrt(np.maximum(np.einsum("ij,jk,ik->i", phi, a["covariance"], phi), 0.0))
    change = np.abs(second - first) - SAME_RANGE * max(float(np.ptp(first)), float(np.abs(first).max()))
    worst = float(np.max(change / np.maximum(u, 1e-300)))
    moved = f"It moves by up to {float(np.abs(second - first).max()):.3g} when digitised again ({worst:.2g} of its uncertainty)."
    if worst > DRIFT_U:
        faults.append(Fault("rederive", here, moved))
    elif worst > SAME_U:
        notes.append(Fault("drift", here, moved))
