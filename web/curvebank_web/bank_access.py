"""The bank as the app opens it: read-only for one request, or for writing for one change."""

from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from typing import Any

import curvebank


def make_if_missing(bank: Path) -> None:
    """Create the bank file, and its folder, where there is none; an existing bank is opened once, so that a bad one is named at once.

    Raises
    ------
    curvebank.errors.BankError
        Not a bank, locked, read-only, or from a newer curvebank.
    """
    if not bank.exists():
        bank.parent.mkdir(parents=True, exist_ok=True)
        curvebank.open(bank, write=True).close()
    with reading(bank):
        pass


@contextmanager
def reading(bank: Path) -> Iterator[Any]:
    """A reader, closed afterwards."""
    with closing(curvebank.open(bank)) as reader:
        yield reader


@contextmanager
def writing(bank: Path) -> Iterator[Any]:
    """A writer, closed afterwards."""
    with closing(curvebank.open(bank, write=True)) as store:
        yield store


def settings_of(bank: Path) -> dict[str, Any]:
    """The settings in force; they decide findings, so every run takes them along."""
    with reading(bank) as reader:
        return dict(reader.settings())
