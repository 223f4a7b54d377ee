"""Saving what was digitised: one revision per wanted save, released in the same transaction when asked."""

from pathlib import Path
from typing import Any

from ..bank.store import Store
from .files import Done, make_folder


def save_file(bank: Path, done: Done, *, who: str, why: str, release: bool = False) -> dict[str, Any]:
    """Store one digitised recipe file; the same files saved again by the same person for the same reason give the first answer.

    Returns
    -------
    dict
        ``key``, ``revision`` and ``state``.

    Raises
    ------
    BankError
        The bank cannot be written; nothing was stored.
    """
    make_folder(bank.parent)
    with Store.open(bank) as store:
        key, revision = store.save(
            done.made, done.recipe_bytes, done.sheet_bytes, who=who, why=why, save_key=done.save_key(who, why), release=release
        )
        return {"key": key, "revision": revision, "state": store.pump(key, revision=revision).state}
