"""The command line: each command opens, calls one use case, prints."""

from .app import main

__all__ = ["main"]
