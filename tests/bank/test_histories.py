"""Whatever is done to a bank in whatever order, its rules hold: a state machine of saves, releases and withdrawals."""

import shutil
import tempfile
from pathlib import Path

import bank_samples as make
from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, precondition, rule

from curvebank.bank.store import Store
from curvebank.bank.verify import verify
from curvebank.errors import BankError, NotFound

SHEETS = {"main": make.SHEET, "suction": make.SECOND_SHEET}
NEXT = {
    "submitted": ("draft",),
    "released": ("draft", "submitted"),
    "withdrawn": ("draft", "submitted", "released", "superseded"),
}


class History(RuleBasedStateMachine):
    """A bank beside a model of it: revision -> (state, sheet -> heads)."""

    def __init__(self):
        super().__init__()
        self.folder = Path(tempfile.mkdtemp())
        self.path = self.folder / "bank.db"
        self.store = Store.create(self.path)
        self.states = []
        self.contents = []

    def teardown(self):
        """The whole file is checked once at the end of each history."""
        self.store.close()
        assert verify(self.path).ok
        shutil.rmtree(self.folder)

    def _release(self, number):
        self.states = ["superseded" if s == "released" else s for s in self.states]
        self.states[number - 1] = "released"

    @rule(sheet=st.sampled_from(list(SHEETS)), height=st.integers(20, 60), count=st.integers(0, 3), release=st.booleans())
    def save(self, sheet, height, count, release):
        """A sheet saved: its curves replaced, the other sheet's carried forward."""
        curves = [make.curve(f"{sheet}-{i}", "head", (float(height + i),), 300.0 + i, n=5) for i in range(count)]
        made = make.digitised(curves, sheet=SHEETS[sheet])
        number = make.save(self.store, made, sheet=SHEETS[sheet], release=release)[1]
        content = dict(self.contents[-1]) if self.contents else {}
        content[sheet] = [float(height + i) for i in range(count)]
        self.contents.append(content)
        self.states.append("draft")
        assert number == len(self.states)
        if release:
            self._release(number)

    @precondition(lambda self: self.states)
    @rule(kind=st.sampled_from(list(NEXT)), pick=st.integers(0, 99))
    def event(self, kind, pick):
        """An event on any revision: recorded where the state allows it, refused where not."""
        number = pick % len(self.states) + 1
        allowed = self.states[number - 1] in NEXT[kind]
        try:
            self.store.event(make.KEY, number, kind, who="A. Reed", why="as drawn")
        except BankError as refusal:
            assert not allowed and refusal.code == "state"
            return
        assert allowed
        if kind == "released":
            self._release(number)
        else:
            self.states[number - 1] = kind

    @invariant()
    def bank_agrees_with_the_model(self):
        """States, released revision and the curves of every revision."""
        rows = self.store.connection.execute("SELECT number, state FROM revision_state ORDER BY number").fetchall()
        assert rows == list(enumerate(self.states, 1))
        assert self.states.count("released") <= 1
        for number, content in enumerate(self.contents, 1):
            want = sorted(v for heads in content.values() for v in heads)
            sql = "SELECT c0 FROM curve JOIN revision ON revision.id = revision_id WHERE number = ?"
            assert sorted(v for (v,) in self.store.connection.execute(sql, (number,))) == want
        if not self.states:
            return
        try:
            assert self.store.pump(make.KEY).revision == self.states.index("released") + 1
        except NotFound:
            assert "released" not in self.states


TestHistory = History.TestCase
TestHistory.settings = settings(max_examples=8, stateful_step_count=12, deadline=None)
