"""Reading a bank: the door of calculation scripts. Cold path: nothing heavy is loaded until an array or an uncertainty asks for it."""

import sqlite3
from collections import namedtuple

from ..errors import BankError, NotFound, WithdrawnWarning
from .connect import TIMEOUT_S, explain, open_read
from .pump import COLUMNS, Pump
from .quantity import number

Listed = namedtuple("Listed", "key maker model stages rated_rpm revision state")
"""One line of `Bank.pumps`: the released revision, or the latest where none is released."""

PUMP_SQL = """
SELECT revision.id, pump.id AS pump_id, pump.key, maker.name AS maker, pump.model, revision.number, revision.stages, revision.rated_rpm,
  revision.density_kgm3, revision.saved_at, revision.who, revision.why, revision.read_rule, revision.settings_json
FROM pump JOIN maker ON maker.id = pump.maker_id JOIN revision ON revision.pump_id = pump.id"""


class Bank:
    """A bank opened read-only. A context manager; one thread at a time.

    Parameters
    ----------
    path : str or path-like
        An existing bank file.
    timeout_s : float
        How long to wait for a writer [s].

    Raises
    ------
    BankError
        No such file, not a bank, locked, damaged, or written by a newer curvebank.
    """

    def __init__(self, path, *, timeout_s=TIMEOUT_S, connection=None, any_thread=False):
        self.path = path
        self.timeout_s = timeout_s
        self._owned = connection is None
        self.connection = open_read(path, timeout_s=timeout_s, any_thread=any_thread) if connection is None else connection

    def __enter__(self):
        return self

    def __exit__(self, *exc):
        self.close()

    def close(self):
        """Close the file. Pumps read before stay usable."""
        if self._owned:
            self.connection.close()

    def query(self, sql, values=()):
        """Rows of a read-only query as tuples; SQLite's errors come out in words."""
        try:
            return self.connection.execute(sql, values).fetchall()
        except OverflowError:
            return []  # a number that SQLite cannot hold is in no row
        except sqlite3.ProgrammingError as error:
            raise BankError(f"{self.path} is closed, or is used from another thread. Open it again there.", code="closed") from error
        except sqlite3.Error as error:
            raise explain(error, self.path, writing=False, timeout_s=self.timeout_s) from error

    @property
    def uuid(self):
        """The identity of this bank, the same in every copy."""
        return self.meta()["uuid"]

    @property
    def contract(self):
        """Version of the SQL read contract."""
        return int(self.meta()["contract"])

    def meta(self):
        """Identity and versions of the file, as a dict of text."""
        return dict(self.query("SELECT name, value FROM meta"))

    def settings(self):
        """The settings in force, name -> value; a revision keeps those it was saved under."""
        import json

        return {name: json.loads(value) for name, value in self.query("SELECT name, value FROM setting ORDER BY seq")}

    def resolve(self, key):
        """(pump id, present key) of a key or one of its aliases.

        Raises
        ------
        NotFound
            The message lists keys that look alike.
        """
        rows = self.query("SELECT id, key FROM pump WHERE key = ?", (key,)) or self.query(
            "SELECT pump.id, pump.key FROM alias JOIN pump ON pump.id = alias.pump_id WHERE alias.key = ?", (key,)
        )
        if rows:
            return rows[0]
        near = [k for (k,) in self.query("SELECT key FROM pump WHERE key LIKE ? ORDER BY key LIMIT 8", (str(key).split("-")[0] + "%",))]
        near = near or [k for (k,) in self.query("SELECT key FROM pump ORDER BY key LIMIT 8")]
        hint = f"There are, among others, {', '.join(near)}." if near else "The bank holds no pump yet."
        raise NotFound(f"There is no pump {key} in this bank. {hint}", code="not-found")

    def pump(self, key, *, revision=None, as_of=None):
        """One pump as numbers: the released revision unless told otherwise.

        Parameters
        ----------
        key : str
            Catalogue key, like ``LARK-WM-150``.
        revision : int, optional
            A revision of any state.
        as_of : str, optional
            A moment in UTC, ``2026-11-01T00:00:00Z``: what was released then.

        Raises
        ------
        NotFound
            No such pump or revision; nothing released (the drafts are listed).

        Warns
        -----
        WithdrawnWarning
            The revision was withdrawn; says why, and what replaced it.
        """
        pump_id, key = self.resolve(key)
        if revision is not None and as_of is not None:
            raise BankError("Give a revision or a moment, not both.", code="usage")
        if revision is not None:
            rows = self.query(PUMP_SQL + " WHERE pump.id = ? AND revision.number = ?", (pump_id, revision))
            if not rows:
                raise NotFound(f"{key} has no revision {revision}. It has {self._numbers(pump_id)}.", code="not-found")
        elif as_of is not None:
            moment = _moment(as_of)
            rows = self.query(
                PUMP_SQL + " JOIN release_span AS span ON span.revision_id = revision.id WHERE pump.id = ? AND span.valid_from <= ?"
                " AND (span.valid_to IS NULL OR span.valid_to > ?) ORDER BY span.valid_from DESC",
                (pump_id, moment, moment),
            )
            if not rows:
                raise NotFound(f"No revision of {key} was released at {as_of}. It has {self._numbers(pump_id)}.", code="not-released")
        else:
            rows = self.query(
                PUMP_SQL + " JOIN release_span AS span ON span.revision_id = revision.id WHERE pump.id = ? AND span.valid_to IS NULL",
                (pump_id,),
            )
            if not rows:
                raise NotFound(
                    f"No revision of {key} is released. It has {self._numbers(pump_id)}. Release one, or pin one with revision=n.",
                    code="not-released",
                )
        pump = Pump(self, rows[0])
        if revision is not None or as_of is not None:
            self._warn_withdrawn(pump)
        return pump

    def _numbers(self, pump_id):
        rows = self.query("SELECT number, state FROM revision_state WHERE pump_id = ? ORDER BY number", (pump_id,))
        return ", ".join(f"revision {number} ({state})" for number, state in rows) or "no revision"

    def _warn_withdrawn(self, pump):
        rows = self.query("SELECT at, who, why FROM event WHERE revision_id = ? AND kind = 'withdrawn'", (pump.revision_id,))
        if not rows:
            return
        import warnings

        now = self.query(
            "SELECT number FROM release_span AS span JOIN revision ON revision.id = span.revision_id"
            " WHERE span.pump_id = ? AND valid_to IS NULL",
            (pump.pump_id,),
        )
        after = f"Revision {now[0][0]} is released in its place." if now else "Nothing is released in its place."
        at, who, why = rows[0]
        text = f"Revision {pump.revision} of {pump.key} was withdrawn on {at[:10]} by {who}: {why.rstrip('.')}. {after}"
        warnings.warn(text, WithdrawnWarning, stacklevel=3)

    def pumps(self):
        """Every pump of the bank in the order of its key, as a list of `Listed`."""
        rows = self.query(
            "SELECT pump.key, maker.name, pump.model, revision.stages, revision.rated_rpm, revision.number, state"
            " FROM pump JOIN maker ON maker.id = maker_id"
            " JOIN revision ON revision.id = coalesce((SELECT revision_id FROM release_span WHERE pump_id = pump.id AND valid_to IS NULL),"
            "   (SELECT id FROM revision AS last WHERE last.pump_id = pump.id ORDER BY number DESC LIMIT 1))"
            " JOIN revision_state ON revision_state.revision_id = revision.id ORDER BY pump.key"
        )
        return [Listed(*row) for row in rows]

    def find(self, flow_m3h, head_m, *, npsha_m=None, limit=20):
        """Released pumps that can do a duty at their printed speeds, the most efficient first, as a list of `Hit`.

        Parameters
        ----------
        flow_m3h, head_m : float
            The duty [m3/h], [m].
        npsha_m : float, optional
            NPSH available [m]: pumps that are known to need more are left out.
        limit : int
            At most so many.
        """
        from .choice import find

        npsha = None if npsha_m is None else number(npsha_m, "npsha_m")
        return find(self, number(flow_m3h, "flow_m3h"), number(head_m, "head_m"), npsha, limit)

    def curve_rows(self, revision_id):
        """The curve rows of a revision in the order of `pump.COLUMNS`."""
        return self.query(f"SELECT {COLUMNS} FROM curve WHERE revision_id = ? ORDER BY id", (revision_id,))


def _moment(text):
    """A UTC moment as the bank writes it, so that text compares like time."""
    import datetime

    raw = str(text)
    try:
        t = datetime.datetime.fromisoformat(raw[:-1] + "+00:00" if raw.endswith("Z") else raw)
    except ValueError:
        raise BankError(f"“{text}” is not a moment. Write it like 2026-11-01T00:00:00Z.", code="usage") from None
    if t.tzinfo is None:
        t = t.replace(tzinfo=datetime.timezone.utc)  # noqa: UP017 - a plain name costs nothing
    return t.astimezone(datetime.timezone.utc).strftime("%Y-%m-%dT%H:%M:%S.%f")[:-3] + "Z"  # noqa: UP017
