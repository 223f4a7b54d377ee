"""A quick look while the user still clicks: in this process, on the prepared sheet, one at a time, the newest question first."""

import itertools
import threading
from collections import OrderedDict
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from curvebank.errors import CurvebankError

from . import prepared_cache
from .jobs import Job
from .page_store import PageKey
from .problems import Problem
from .services import Services

KEPT_OPEN = 4
"""Prepared pages held open; they are memory-mapped, so this costs little."""


@dataclass(frozen=True, kw_only=True)
class Question:
    """What is looked at: a panel and perhaps a curve of it, on a page under its masks."""

    key: PageKey
    panel: dict[str, Any]
    curve: dict[str, Any] | None
    pump: dict[str, Any]
    masks: list[dict[str, Any]] = field(default_factory=list)
    live: bool = False


KEPT_TRACES = 64
"""Curves whose last trace is kept, so that a point under the hand re-traces only what it touches."""


class Previews:
    """Prepared pages that are open, and the queue of previews."""

    def __init__(self, services: Services) -> None:
        self.services = services
        self._open: OrderedDict[PageKey, Any] = OrderedDict()
        self._guard = threading.Lock()
        self._tracing = threading.Lock()
        self._tickets = itertools.count()
        self._newest: dict[tuple[str, ...], int] = {}
        self._traced: OrderedDict[tuple[str, ...], Any] = OrderedDict()

    def prepared(self, key: PageKey) -> Any:
        """The prepared page, or None while it is not made."""
        with self._guard:
            if key in self._open:
                self._open.move_to_end(key)
                return self._open[key]
        found = prepared_cache.read(self.services.cache, key)
        if found is not None:
            with self._guard:
                self._open[key] = found
                while len(self._open) > KEPT_OPEN:
                    self._open.popitem(last=False)
        return found

    def ahead(self, key: PageKey) -> Job | None:
        """Have a page prepared before it is asked for; None where it is ready."""
        if self.prepared(key) is not None:
            return None
        services = self.services
        arguments = {"desk": str(services.desk), "bank": str(services.bank), "cache": str(services.cache), "page": tuple(key)}
        return services.jobs.submit("prepare", f"prepare:{key.name}", arguments, first=True)

    def ready(self, key: PageKey) -> Any:
        """The prepared page, or the job that prepares it."""
        prepared = self.prepared(key)
        if prepared is not None:
            return prepared
        return self.ahead(key) or self.prepared(key)

    def look(self, subject: tuple[str, ...], question: Question) -> Any:
        """Calibrate the panel and trace the curve. Gives ``{panel, curve}``, or the job that prepares the sheet.

        ``subject`` names what the question is about; of several waiting questions about one subject only the last is answered.
        """
        prepared = self.ready(question.key)
        if isinstance(prepared, Job):
            return prepared
        return self._in_turn(subject, lambda: self._digitise(subject, question, prepared))

    def _digitise(self, subject: tuple[str, ...], question: Question, prepared: Any) -> Any:
        from curvebank import digitise

        page = self.services.pages.info(question.key)
        try:
            return digitise.preview(
                question.panel,
                question.curve,
                prepared,
                page,
                question.pump,
                masks=question.masks,
                before=self._before(subject, digitise.Before),
                live=question.live,
            )
        except CurvebankError as error:
            if error.path and not error.path.startswith(("$.panel", "$.curve", "$.sheet")):
                error.path = error.path.replace("$", "$.panel", 1)  # as the question has it
            raise

    def _before(self, subject: tuple[str, ...], make: Callable[[], Any]) -> Any:
        """The last trace of a curve, for the next question about it."""
        with self._guard:
            kept = self._traced.pop(subject, None) or make()
            self._traced[subject] = kept
            while len(self._traced) > KEPT_TRACES:
                self._traced.popitem(last=False)
        return kept

    def _in_turn(self, subject: tuple[str, ...], work: Callable[[], Any]) -> Any:
        ticket = next(self._tickets)
        with self._guard:
            self._newest[subject] = ticket
        try:
            with self._tracing:
                if self._newest.get(subject) != ticket:
                    raise Problem(409, "superseded", "A newer question took this one's place", "Nothing to do: the newer answer follows.")
                return work()
        finally:
            with self._guard:
                if self._newest.get(subject) == ticket:
                    del self._newest[subject]
