"""A quick look while the user still clicks: in this process, on the prepared sheet, one at a time, the newest question first."""

import itertools
import threading
from collections import OrderedDict
from collections.abc import Callable
from typing import Any

from curvebank.errors import CurvebankError

from . import documents, prepared_cache
from .jobs import Job
from .page_store import PageKey
from .problems import Problem
from .services import Services

KEPT_OPEN = 4
"""Prepared pages held open; they are memory-mapped, so this costs little."""


class Previews:
    """Prepared pages that are open, and the queue of previews."""

    def __init__(self, services: Services) -> None:
        self.services = services
        self._open: OrderedDict[PageKey, Any] = OrderedDict()
        self._guard = threading.Lock()
        self._tracing = threading.Lock()
        self._tickets = itertools.count()
        self._newest: dict[tuple[str, ...], int] = {}

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

    def look(self, subject: tuple[str, ...], key: PageKey, doc: dict[str, Any], panel: dict[str, Any], curve: dict[str, Any] | None) -> Any:
        """Calibrate the panel and trace the curve. Gives ``{panel, curve}``, or the job that prepares the sheet.

        ``subject`` names what the question is about; of several waiting questions about one subject only the last is answered.
        """
        prepared = self.prepared(key)
        if prepared is None:
            job = self.ahead(key)
            if job is not None:
                return job
            prepared = self.prepared(key)
        return self._in_turn(subject, lambda: self._digitise(key, doc, panel, curve, prepared))

    def _digitise(self, key: PageKey, doc: dict[str, Any], panel: dict[str, Any], curve: dict[str, Any] | None, prepared: Any) -> Any:
        from curvebank import digitise

        try:
            return digitise.preview(panel, curve, prepared, self.services.pages.info(key), documents.pump_facts(doc))
        except CurvebankError as error:
            if error.path and not error.path.startswith(("$.panel", "$.curve")):
                error.path = error.path.replace("$", "$.panel", 1)  # as the question has it
            raise

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
