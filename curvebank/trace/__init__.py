"""Clicks to centreline: the ribbon trace. Knows pixels and ink, nothing of units or pumps."""

from .again import again
from .clicks import Clicks, Locked
from .panel import trace_panel

ALGORITHM = "ribbon-5"
"""Name of the tracing; changes whenever the same clicks on the same prepared sheet would give other numbers."""

__all__ = ["ALGORITHM", "Clicks", "Locked", "again", "trace_panel"]
