"""The last trace of a curve, kept while its points are moved by hand: only what a move touches is traced anew."""

from dataclasses import dataclass
from typing import Any

from .. import trace
from ..errors import TraceError
from ..records import Trace


@dataclass(eq=False)
class Before:
    """What one curve was traced from last, and the trace; the caller keeps one for each curve and hands it in with every question."""

    panel_map: Any = None
    clicks: trace.Clicks | None = None
    made: Trace | None = None

    def traced(self, prepared: Any, panel_map: Any, clicks: trace.Clicks, *, live: bool) -> Trace | TraceError:
        """The trace of ``clicks``. ``live`` lets stay what they do not change of the trace before; else the whole line is traced."""
        if live and self.made is not None and self.clicks is not None and self.panel_map is panel_map:
            got = trace.again(prepared, panel_map, clicks, self.clicks, self.made)
        else:
            got = trace.trace_panel(prepared, panel_map, [clicks])[0]
        if isinstance(got, Trace):
            self.panel_map, self.clicks, self.made = panel_map, clicks, got
        return got
