"""The demonstration bank: the sample sheets digitised, checked, stored, and released where no check speaks against it."""

import concurrent.futures
import multiprocessing
import os
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from ..errors import CurvebankError
from . import files, storing

WHO = "Demo"
WHY = "sample sheet of an invented station"


def find_samples(named: Path | None = None) -> Path:
    """The folder with the sample recipes: the named one, ``samples`` here, or beside an editable install.

    Raises
    ------
    CurvebankError
        None of them holds a recipe.
    """
    here = Path(__file__).resolve().parents[2] / "samples"
    for folder in [named] if named else [Path.cwd() / "samples", here]:
        if any(folder.glob("*" + files.RECIPE_SUFFIX)):
            return folder
    place = f"in {named}" if named else "here"
    raise CurvebankError(f"No sample sheets {place}. Run demo in the project's folder, or give --samples DIR.", code="no-samples")


def fresh_bank(named: Path | None, default_folder: Path) -> Path:
    """A path for a new bank; an existing file is never touched.

    Raises
    ------
    CurvebankError
        The named file exists.
    """
    if named is not None:
        if named.exists():
            raise CurvebankError(f"{named} exists already. A demo makes a fresh bank: give another name.", code="exists")
        return named
    number = next(n for n in range(1, 100_000) if not (default_folder / f"demo-{n}.db").exists())
    return default_folder / f"demo-{number}.db"


def build(samples: Path, bank: Path, *, progress: Callable[[int, int, str], None] | None = None) -> Iterator[dict[str, Any]]:
    """Digitise every sample and store it; yields one row a sheet, in the order of the names.

    A sheet is released when it was traced without an error finding; otherwise it stays a draft, and the row's ``state`` and ``why`` say so.
    Two processes at most share the work, started fresh (spawn) so that nothing of the caller leaks into the numbers.
    """
    recipes = sorted(samples.glob("*" + files.RECIPE_SUFFIX))
    workers = max(1, min(2, os.cpu_count() or 1))
    with concurrent.futures.ProcessPoolExecutor(workers, mp_context=multiprocessing.get_context("spawn")) as pool:
        try:
            for i, done in enumerate(pool.map(files.digitise_file, recipes)):
                if progress:
                    progress(i + 1, len(recipes), done.name)
                yield _store(bank, done)
        except BaseException:
            pool.shutdown(wait=False, cancel_futures=True)
            raise


def _store(bank: Path, done: files.Done) -> dict[str, Any]:
    made = done.made
    findings = {s: sum(f.severity == s for f in made.findings) for s in ("error", "warning", "note")}
    row: dict[str, Any] = {
        "sheet": done.name,
        "key": made.pump.key if made.pump else None,
        "curves": sum(c.error is None for c in made.curves),
        "failed": sum(c.error is not None for c in made.curves),
        "findings": findings,
        "revision": None,
        "state": "not stored",
        "why": made.error["message"] if made.error else None,
    }
    if made.error is not None:
        return row
    saved = storing.save_file(bank, done, who=WHO, why=WHY, release=findings["error"] == 0)
    first = next((f.message for f in made.findings if f.severity == "error"), None)
    return row | {"revision": saved["revision"], "state": saved["state"], "why": first}
