"""Shared fixtures."""

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent))

import chart  # noqa: E402


@pytest.fixture(scope="session")
def chart_png():
    """The drawn chart of tests/chart.py as PNG bytes."""
    return chart.png()


@pytest.fixture
def chart_recipe():
    """A fresh recipe for the drawn chart."""
    return chart.document()
