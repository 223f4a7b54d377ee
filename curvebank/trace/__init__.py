"""Clicks to the sub-pixel centreline of a printed curve."""
