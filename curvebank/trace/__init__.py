"""Clicks to centreline: the ribbon trace. Knows pixels and ink, nothing of units or pumps."""

from .clicks import Clicks
from .panel import trace_panel

__all__ = ["Clicks", "trace_panel"]
