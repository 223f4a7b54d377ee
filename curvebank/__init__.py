"""Curvebank: pump performance charts on paper, turned into numbers with their uncertainty, source and history.

``curvebank.open(path)`` is the door for calculation scripts and loads nothing heavy. The rest is fetched on first use.
"""

from . import errors as _errors

CurvebankError = _errors.CurvebankError
ExtrapolationWarning = _errors.ExtrapolationWarning
__version__ = "0.1.0"
__all__ = ["CurvebankError", "ExtrapolationWarning", "__version__", "digitise_recipe", "open"]


def open(path, *, write=False):
    """Open a bank file for reading, or for writing with ``write=True``.

    Parameters
    ----------
    path : str or path-like
        The bank. Reading never creates a file; writing creates a missing bank.

    Returns
    -------
    curvebank.bank.reader.Bank, or curvebank.bank.store.Store when ``write`` is true
        Both are context managers and answer ``pump(key)``.

    Raises
    ------
    curvebank.errors.BankError
        No such file, not a bank, locked, or written by a newer curvebank.
    """
    if write:
        from .bank.store import Store

        return Store.open(path)
    from .bank.reader import Bank

    return Bank(path)


def digitise_recipe(recipe, sheet_bytes, *, settings=None, progress=None):
    """Turn a recipe (dict, JSON text or bytes) and the bytes of its sheet into curves, fits and findings (`curvebank.digitise.run`)."""
    from .digitise import run

    return run(recipe, sheet_bytes, settings, progress=progress)
