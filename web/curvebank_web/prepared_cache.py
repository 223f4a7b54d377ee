"""Prepared sheets on disk, memory-mapped: made once by a worker, then read by every preview in milliseconds."""

import shutil
import tempfile
from pathlib import Path
from typing import Any

import numpy as np

from .page_store import PageKey, publish

SMALL_BYTES = 65_536
"""Arrays below this are read, not mapped: a map costs a file handle."""


def folder_of(cache: Path, key: PageKey) -> Path:
    """Where a prepared page lives; the name changes with the algorithm."""
    from curvebank import sheet

    algorithm = "".join(c if c.isalnum() or c in "._-" else "-" for c in sheet.ALGORITHM)
    return cache / "prepared" / f"{key.name}-{algorithm}"


def read(cache: Path, key: PageKey) -> Any:
    """The prepared page, or None where it is not made yet."""
    from curvebank import sheet

    folder = folder_of(cache, key)
    if not folder.is_dir():
        return None
    try:
        arrays = {}
        for path in folder.glob("*.npy"):
            large = path.stat().st_size > SMALL_BYTES
            arrays[path.stem] = np.load(path, mmap_mode="r" if large else None, allow_pickle=False)
        return sheet.Prepared.from_arrays(arrays)
    except (KeyError, ValueError, IndexError, OSError, EOFError):  # damaged, or half tidied away: it is made again
        shutil.rmtree(folder, ignore_errors=True)
        return None


def write(cache: Path, key: PageKey, prepared: Any) -> None:
    """Keep a prepared page. It appears by one rename, so it is complete or absent."""
    folder = folder_of(cache, key)
    folder.parent.mkdir(parents=True, exist_ok=True)
    scratch = Path(tempfile.mkdtemp(prefix=".prepared-", dir=folder.parent))
    try:
        for name, array in prepared.arrays().items():
            np.save(scratch / f"{name}.npy", array, allow_pickle=False)
        publish(scratch, folder)
    finally:
        shutil.rmtree(scratch, ignore_errors=True)
