"""The writer of a bank: save a digitisation as a new revision, record events, change settings.

Every write is one BEGIN IMMEDIATE transaction. A ``save_key`` made by the caller makes a save safe to repeat: after a crash, the same key
returns the revision that the first attempt made.
"""

import contextlib
import json
import random
import re
import sqlite3
import time
import unicodedata
from collections.abc import Iterator
from typing import Any

from ..errors import BankError, NotFound
from ..laws.family import DEFAULT_RULE, RULES
from ..records import Digitised, PageInfo
from . import chain, pack, rows
from .connect import TIMEOUT_S, explain, open_write
from .guards import guard_faults
from .reader import Bank

KEY = re.compile(r"[A-Z0-9][A-Z0-9-]{0,79}")
STATE_EVENTS = ("submitted", "released", "withdrawn")
OTHER_EVENTS = ("commented", "waived")


def _text(value: Any, what: str) -> str:
    text = unicodedata.normalize("NFC", str(value or "")).strip()
    if not text:
        raise BankError(f"{what} is missing. Every change of a bank has a person and a reason.", code="who-why")
    return text


class Store:
    """A bank opened for writing, one per thread. A context manager; ``bank`` is its reader over the same connection."""

    def __init__(self, path: Any, *, timeout_s: float = TIMEOUT_S, create: bool = True) -> None:
        self.path = path
        self.timeout_s = timeout_s
        self.connection = open_write(path, timeout_s=timeout_s, create=create)
        try:
            faults = guard_faults(self.connection)
        except BaseException:
            self.connection.close()
            raise
        if faults:
            self.connection.close()
            raise BankError(f"{path} is not written to: its guards are not whole ({faults[0]}). Run verify.", code="guards")
        self.bank = Bank(path, connection=self.connection)

    @classmethod
    def open(cls, path: Any, *, timeout_s: float = TIMEOUT_S) -> "Store":
        """Open a bank for writing; makes it where there is none."""
        return cls(path, timeout_s=timeout_s)

    @classmethod
    def create(cls, path: Any) -> "Store":
        """Make a new bank; refuses a file that exists.

        Raises
        ------
        BankError
            ``exists``.
        """
        import os

        if os.path.exists(path) and os.path.getsize(path) > 0:
            raise BankError(f"{path} is there already. Choose another name, or open it.", code="exists")
        return cls(path)

    def __enter__(self) -> "Store":
        return self

    def __exit__(self, *exc: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; what was acknowledged stays."""
        self.connection.close()

    def pump(self, key: str, **how: Any) -> Any:
        """As `Bank.pump`."""
        return self.bank.pump(key, **how)

    def pumps(self) -> list[Any]:
        """As `Bank.pumps`."""
        return self.bank.pumps()

    def find(self, **duty: Any) -> list[Any]:
        """As `Bank.find`."""
        return self.bank.find(**duty)

    def settings(self) -> dict[str, Any]:
        """The settings in force."""
        return self.bank.settings()

    @contextlib.contextmanager
    def _writing(self) -> Iterator[sqlite3.Connection]:
        """One transaction, whole or not at all; SQLite's errors come out in words."""
        try:
            self._begin()
            try:
                yield self.connection
                self.connection.execute("COMMIT")
            finally:
                if self.connection.in_transaction:
                    self.connection.execute("ROLLBACK")
        except sqlite3.Error as error:
            raise explain(error, self.path, writing=True, timeout_s=self.timeout_s) from error

    def _begin(self) -> None:
        """BEGIN IMMEDIATE, asked again every few milliseconds: SQLite's own waiting grows to 0.1 s a step, so that late comers starve."""
        self.connection.execute("PRAGMA busy_timeout = 0")
        try:
            deadline = time.monotonic() + self.timeout_s
            while True:
                try:
                    self.connection.execute("BEGIN IMMEDIATE")
                    return
                except sqlite3.OperationalError as error:
                    if not error.sqlite_errorname.startswith("SQLITE_BUSY") or time.monotonic() >= deadline:
                        raise
                time.sleep(random.uniform(0.0005, 0.004))
        finally:
            self.connection.execute(f"PRAGMA busy_timeout = {int(1000 * self.timeout_s)}")

    def save(
        self,
        digitised: Digitised,
        recipe_bytes: bytes,
        sheet_bytes: bytes | None,
        *,
        key: str | None = None,
        who: str,
        why: str,
        save_key: str,
        release: bool = False,
    ) -> tuple[str, int]:
        """Store a digitisation as the next revision of a pump; with ``release`` also release it, in the same transaction.

        The curves of this sheet and page replace those that came from it before; everything else of the pump is carried forward.

        Parameters
        ----------
        digitised : Digitised
            Fresh from `digitise.run`. Curves with an error are named in the revision, not stored as curves.
        recipe_bytes, sheet_bytes : bytes
            Kept as they are, once per content. ``sheet_bytes`` is None for a recipe of typed tables alone.
        key : str, optional
            Catalogue key; the recipe's own where left out.
        who, why : str
            The person and the reason.
        save_key : str
            Made by the caller, new for every wanted save, the same for a retry.

        Returns
        -------
        (key, revision) : tuple of str and int

        Raises
        ------
        BankError
            Among others ``who-why``, ``save-key`` (used before for something else), ``not-digitised``, ``locked``, ``read-only``.
        """
        who, why, save_key = _text(who, "The name"), _text(why, "The reason"), _text(save_key, "The save key")
        if digitised.pump is None or digitised.error is not None:
            raise BankError("A digitisation that failed as a whole is not saved. Cure its error first.", code="not-digitised")
        key = key or digitised.pump.key
        if not KEY.fullmatch(key):
            raise BankError(f"“{key}” is not a catalogue key. Use capitals, digits and hyphens, like LARK-WM-150.", code="bad-key")
        recipe_sha = pack.sha256(recipe_bytes)
        source = self._source(digitised, sheet_bytes)
        parts, traces = rows.fresh_parts(digitised, source)
        with self._writing() as db:
            done = db.execute(
                "SELECT pump.key, number, EXISTS (SELECT 1 FROM revision_recipe WHERE revision_id = revision.id AND recipe_sha256 = ?)"
                " FROM revision JOIN pump ON pump.id = pump_id WHERE save_key = ?",
                (recipe_sha, save_key),
            ).fetchone()
            if done:
                if done[0] != self._resolve(key, default=key) or not done[2]:
                    raise BankError(
                        f"This save key was used before, for revision {done[1]} of {done[0]}. Make a new save key for a new save.",
                        code="save-key",
                    )
                return done[0], done[1]
            at = chain.next_at(db)
            pump_id, key = self._pump_id(db, key, digitised)
            body = self._body(db, pump_id, key, digitised, source, recipe_sha, parts, traces)
            body.update(saved_at=at, who=who, why=why, save_key=save_key)
            self._keep(db, recipe_sha, "recipe", recipe_bytes)
            if sheet_bytes and source[0]:
                self._keep(db, source[0], "sheet", sheet_bytes)
                self._keep_sheet(db, source[0], digitised)
            revision_id = self._insert(db, pump_id, body, traces)
            failed = [{"id": f["id"], "code": f["code"], "message": f["message"]} for f in body["failed"]]
            note = {"body_sha256": self._body_hash(db, revision_id), "curves": len(body["curves"]), "failed": failed}
            self._append(db, at, who, "saved", pump_id, revision_id, why, note)
            if release:
                self._release(db, at, who, why, pump_id, revision_id, body["number"])
        return key, body["number"]

    @staticmethod
    def _source(digitised: Digitised, sheet_bytes: bytes | None) -> tuple[bytes | None, int]:
        if digitised.page is None or not sheet_bytes:
            if digitised.page is not None and digitised.page.sha256:
                raise BankError("The scan that these curves came from is missing. Give its bytes with the save.", code="sheet")
            return None, 0
        sha = pack.sha256(sheet_bytes)
        if digitised.page.sha256 and digitised.page.sha256.lower() != sha.hex():
            raise BankError("The scan is not the one that was digitised: its SHA-256 differs. Digitise this scan, then save.", code="sheet")
        return sha, int(digitised.page.page)

    def _resolve(self, key: str, *, default: str | None = None) -> str:
        row = self.connection.execute(
            "SELECT key FROM pump WHERE key = ?1"
            " UNION ALL SELECT pump.key FROM alias JOIN pump ON pump.id = alias.pump_id WHERE alias.key = ?1",
            (key,),
        ).fetchone()
        if row is None and default is None:
            raise NotFound(f"There is no pump {key} in this bank. `pumps()` lists what there is.", code="not-found")
        return row[0] if row else str(default)

    def _pump_id(self, db: sqlite3.Connection, key: str, digitised: Digitised) -> tuple[int, str]:
        key = self._resolve(key, default=key)
        row = db.execute("SELECT id FROM pump WHERE key = ?", (key,)).fetchone()
        if row:
            return row[0], key
        pump = digitised.pump
        assert pump is not None
        maker, model = _text(pump.maker, "The maker"), _text(pump.model, "The model")
        found = db.execute("SELECT id FROM maker WHERE name = ?", (maker,)).fetchone()
        maker_id = (
            found[0]
            if found
            else db.execute("INSERT INTO maker (id, name) SELECT coalesce(max(id), 0) + 1, ? FROM maker RETURNING id", (maker,)).fetchone()[
                0
            ]
        )
        inserted = db.execute(
            "INSERT INTO pump (id, key, maker_id, model, stages, rated_rpm)"
            " SELECT coalesce(max(id), 0) + 1, ?, ?, ?, ?, ? FROM pump RETURNING id",
            (key, maker_id, model, pump.stages, pump.speed_rpm),
        )
        return inserted.fetchone()[0], key

    def _body(
        self,
        db: sqlite3.Connection,
        pump_id: int,
        key: str,
        digitised: Digitised,
        source: tuple[bytes | None, int],
        recipe_sha: bytes,
        parts: dict[str, list[dict[str, Any]]],
        traces: dict[bytes, bytes],
    ) -> dict[str, Any]:
        pump, page = digitised.pump, digitised.page
        assert pump is not None
        parent = db.execute(
            "SELECT revision.id, number, bytes FROM revision JOIN blob ON blob.sha256 = body_sha256"
            " WHERE pump_id = ? ORDER BY number DESC LIMIT 1",
            (pump_id,),
        ).fetchone()
        old = pack.unpack(parent[2]) if parent else {}
        kept = {
            name: [r for r in old.get(name, []) if (r["sheet_sha256"], r["page"]) != source]
            for name in ("sources", "panels", "curves", "failed", "findings")
        }
        if parent:
            for sha, raw in self._old_traces(db, parent[0]):
                traces.setdefault(sha, raw)
        taken = {c["id"] for c in kept["curves"]}
        for record in parts["curves"]:
            record["id"] = _free_name(record["recipe_id"], taken)
            taken.add(record["id"])
        size = page or PageInfo(sha256="", page=0, width=0, height=0, dpi_x=None, dpi_y=None, media="")
        entry = {
            "sheet_sha256": source[0],
            "page": source[1],
            "recipe_sha256": recipe_sha,
            "file_name": digitised.sheet_file or "",
            "width": int(size.width),
            "height": int(size.height),
            "dpi_x": size.dpi_x,
            "dpi_y": size.dpi_y,
            "turn": int(size.turn),
            "made_by": {k: str(v) for k, v in digitised.made_by.items()},
        }
        settings = {name: rows.canonical_json(value) for name, value in self.settings().items()}
        return {
            "key": key,
            "number": parent[1] + 1 if parent else 1,
            "parent": parent[1] if parent else None,
            "maker": _text(pump.maker, "The maker"),
            "model": _text(pump.model, "The model"),
            "stages": int(pump.stages),
            "rated_rpm": pump.speed_rpm if pump.speed_rpm is not None else old.get("rated_rpm"),
            "density_kgm3": float(pump.density_kgm3),
            "type": pump.type if pump.type is not None else old.get("type"),
            "inlet": pump.inlet if pump.inlet is not None else old.get("inlet"),
            "read_rule": DEFAULT_RULE,
            "rule": {quantity: list(exponents) for quantity, exponents in RULES[DEFAULT_RULE].items()},
            "settings": settings,
            "made_by": entry["made_by"],
            "sources": [*kept["sources"], entry],
            **{name: kept[name] + parts[name] for name in ("panels", "curves", "failed", "findings")},
        }

    @staticmethod
    def _old_traces(db: sqlite3.Connection, revision_id: int) -> Iterator[tuple[bytes, bytes]]:
        for (raw,) in db.execute("SELECT bytes FROM trace JOIN curve ON curve.id = curve_id WHERE revision_id = ?", (revision_id,)):
            yield pack.sha256(raw), raw

    @staticmethod
    def _keep(db: sqlite3.Connection, sha: bytes, kind: str, raw: bytes) -> None:
        if not db.execute("SELECT 1 FROM blob WHERE sha256 = ?", (sha,)).fetchone():
            db.execute("INSERT INTO blob (sha256, kind, bytes) VALUES (?, ?, ?)", (sha, kind, bytes(raw)))

    @staticmethod
    def _keep_sheet(db: sqlite3.Connection, sha: bytes, digitised: Digitised) -> None:
        page = digitised.page
        assert page is not None
        if not db.execute("SELECT 1 FROM sheet WHERE sha256 = ?", (sha,)).fetchone():
            row = (sha, digitised.sheet_file or "", page.media or "", max(int(page.pages), 1))
            db.execute("INSERT INTO sheet (sha256, file_name, media, pages) VALUES (?, ?, ?, ?)", row)

    @staticmethod
    def _body_hash(db: sqlite3.Connection, revision_id: int) -> str:
        return db.execute("SELECT body_sha256 FROM revision WHERE id = ?", (revision_id,)).fetchone()[0].hex()

    def _insert(self, db: sqlite3.Connection, pump_id: int, body: dict[str, Any], traces: dict[bytes, bytes]) -> int:
        raw = pack.pack(body)
        body = pack.unpack(raw)  # columns are made from what was packed, so that they cannot differ from it
        body_sha = pack.sha256(raw)
        self._keep(db, body_sha, "body", raw)
        parent = db.execute("SELECT id FROM revision WHERE pump_id = ? AND number = ?", (pump_id, body["parent"])).fetchone()
        revision = {
            "pump_id": pump_id,
            "number": body["number"],
            "parent_id": parent[0] if parent else None,
            "body_sha256": body_sha,
            "rule_json": rows.canonical_json(body["rule"]),
            "settings_json": rows.canonical_json({k: json.loads(v) for k, v in body["settings"].items()}),
            "made_by_json": rows.canonical_json(body["made_by"]),
        }
        revision |= {
            name: body[name] for name in ("saved_at", "who", "why", "save_key", "read_rule", "stages", "rated_rpm", "density_kgm3")
        }
        revision_id = _add(db, "revision", revision)
        for entry in body["sources"]:
            part = {name: entry[name] for name in ("sheet_sha256", "page", "recipe_sha256")}
            _add(db, "revision_recipe", {"revision_id": revision_id, **part})
        for record in body["curves"]:
            curve_id = _add(db, "curve", {"revision_id": revision_id, **rows.curve_columns(record)})
            if record["trace"]:
                row = (curve_id, record["trace"]["n"], traces[record["trace"]["sha256"]])
                db.execute("INSERT INTO trace (curve_id, n, bytes) VALUES (?, ?, ?)", row)
        for record in body["findings"]:
            part = {name: record[name] for name in ("key", "rule", "severity", "subject")}
            _add(db, "finding", {"revision_id": revision_id, **part, "json": rows.finding_json(record)})
        return revision_id

    @staticmethod
    def _append(
        db: sqlite3.Connection, at: str, who: str, kind: str, pump_id: int, revision_id: int | None, why: str, note: dict[str, Any]
    ) -> None:
        chain.append(db, at=at, who=who, kind=kind, pump_id=pump_id, revision_id=revision_id, why=why, json=rows.canonical_json(note))

    def _release(self, db: sqlite3.Connection, at: str, who: str, why: str, pump_id: int, revision_id: int, number: int) -> None:
        before = db.execute(
            "SELECT revision_id, number FROM release_span AS span JOIN revision ON revision.id = revision_id"
            " WHERE span.pump_id = ? AND valid_to IS NULL",
            (pump_id,),
        ).fetchone()
        if before:
            self._append(db, at, who, "superseded", pump_id, before[0], why, {"by": number})
        self._append(db, at, who, "released", pump_id, revision_id, why, {"supersedes": before[1] if before else None})

    def event(self, key: str, revision: int, kind: str, *, who: str, why: str, finding: str | None = None) -> int:
        """Record what happened to a revision. Returns the event's seq.

        ``kind`` is submitted, released (the one released before is superseded in the same step), withdrawn, commented, or waived
        (``finding`` is the key of the waived finding).

        Raises
        ------
        NotFound
            No such pump, revision or finding.
        BankError
            ``state``: the revision is not in a state that allows it; ``kind``; ``who-why``.
        """
        who, why = _text(who, "The name"), _text(why, "The reason")
        if kind not in STATE_EVENTS + OTHER_EVENTS:
            raise BankError(f"“{kind}” is not an event. Known: {', '.join(STATE_EVENTS + OTHER_EVENTS)}.", code="kind")
        with self._writing() as db:
            key = self._resolve(key)
            row = db.execute(
                "SELECT pump_id, revision_id, state FROM revision_state WHERE number = ? AND pump_id = (SELECT id FROM pump WHERE key = ?)",
                (revision, key),
            ).fetchone()
            if row is None:
                numbers = [
                    n
                    for (n,) in db.execute(
                        "SELECT number FROM revision JOIN pump ON pump.id = pump_id WHERE key = ? ORDER BY number", (key,)
                    )
                ]
                raise NotFound(f"{key} has no revision {revision}. It has {', '.join(map(str, numbers))}.", code="not-found")
            pump_id, revision_id, state = row
            allowed = {
                "submitted": ("draft",),
                "released": ("draft", "submitted"),
                "withdrawn": ("draft", "submitted", "released", "superseded"),
            }
            if kind in allowed and state not in allowed[kind]:
                raise BankError(f"Revision {revision} of {key} is {state}: it cannot be {kind}. {_instead(kind, state)}", code="state")
            at = chain.next_at(db)
            if kind == "released":
                self._release(db, at, who, why, pump_id, revision_id, revision)
            else:
                note = self._waiver(db, key, revision, revision_id, finding) if kind == "waived" else {}
                self._append(db, at, who, kind, pump_id, revision_id, why, note)
            return db.execute("SELECT max(seq) FROM event").fetchone()[0]

    @staticmethod
    def _waiver(db: sqlite3.Connection, key: str, revision: int, revision_id: int, finding: str | None) -> dict[str, Any]:
        found = db.execute("SELECT rule, subject FROM finding WHERE revision_id = ? AND key = ?", (revision_id, finding)).fetchone()
        if found is None:
            known = [k for (k,) in db.execute("SELECT DISTINCT key FROM finding WHERE revision_id = ? ORDER BY key", (revision_id,))]
            listed = f"Its findings: {', '.join(known)}." if known else "It has no findings."
            raise NotFound(f"Revision {revision} of {key} has no finding {finding}. {listed}", code="not-found")
        return {"finding": finding, "rule": found[0], "subject": found[1]}

    def set_settings(self, values: dict[str, Any], *, who: str) -> None:
        """Change settings that affect numbers, findings or rights; each is kept with who and when, the last one counts.

        A revision keeps the settings it was saved under. Values are anything JSON can hold.
        """
        who = _text(who, "The name")
        with self._writing() as db:
            for name, value in values.items():
                chain.append_setting(db, name=_text(name, "The setting's name"), value=rows.canonical_json(value), who=who)


def _instead(kind: str, state: str) -> str:
    if state == "withdrawn":
        return "Save a new revision instead."
    if state == "superseded":
        return "Save its curves as a new revision, then release that."
    return "It is already done." if state == kind else "Submit or release a draft instead."


def _free_name(name: str, taken: set[str]) -> str:
    """The curve's own id, or with a number where another sheet of the pump has used it."""
    if name not in taken:
        return name
    n = 2
    while f"{name} ({n})" in taken:
        n += 1
    return f"{name} ({n})"


def _add(db: sqlite3.Connection, table: str, row: dict[str, Any]) -> int:
    names = ", ".join(row)
    marks = ", ".join("?" * len(row))
    sql = f"INSERT INTO {table} (id, {names}) VALUES ((SELECT coalesce(max(id), 0) + 1 FROM {table}), {marks}) RETURNING id"
    return db.execute(sql, list(row.values())).fetchone()[0]
