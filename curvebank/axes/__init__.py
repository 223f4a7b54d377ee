"""Marks and printed grid to an invertible map between pixels and values."""
