"""Recipes on disk: each with its scan beside it, each to its result, one failure never stopping the others."""

import contextlib
import hashlib
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from .. import digitise, recipe
from ..errors import CurvebankError, OutputError, RecipeError, SheetError
from ..records import Digitised

Progress = Callable[[float, str], None]
RECIPE_SUFFIX = ".recipe.json"
RESULT_SUFFIX = ".result.json"


@dataclass(frozen=True)
class Done:
    """One recipe file after its run; the bytes are those the result came from."""

    path: Path
    made: Digitised
    recipe_bytes: bytes
    sheet_bytes: bytes | None

    @property
    def name(self) -> str:
        """NAME of NAME.recipe.json."""
        return result_name(self.path).removesuffix(RESULT_SUFFIX)

    def save_key(self, who: str, why: str) -> str:
        """The same files, person and reason give the same key, so that a repeated command stores once."""
        parts = (self.recipe_bytes, self.sheet_bytes or b"", who.encode(), why.encode())
        return "file-" + hashlib.sha256(b"".join(hashlib.sha256(p).digest() for p in parts)).hexdigest()[:40]


def result_name(path: Path) -> str:
    """NAME.result.json of NAME.recipe.json; of any other file its name without the last ending."""
    return (path.name.removesuffix(RECIPE_SUFFIX) if path.name.endswith(RECIPE_SUFFIX) else path.stem) + RESULT_SUFFIX


def failed(error: CurvebankError, recipe_bytes: bytes = b"", file: str | None = None) -> Digitised:
    """A result that only says why there is none."""
    return Digitised(
        recipe_sha256=recipe.sha256(recipe_bytes), page=None, pump=None, made_by=digitise.made_by(), error=error.to_dict(), sheet_file=file
    )


def digitise_file(path: Path, settings: dict[str, Any] | None = None, *, progress: Progress | None = None) -> Done:
    """Digitise one recipe file; the scan is the bare name it gives, in the same folder. Never raises for a bad recipe or scan.

    Raises
    ------
    Cancelled
        From ``progress``.
    """
    try:
        recipe_bytes = path.read_bytes()
    except OSError as e:
        error = RecipeError(f"The recipe {path.name} cannot be read: {e.strerror or e}.", path="$", code="no-such-file")
        return Done(path, failed(error), b"", None)
    sheet_bytes: bytes | None = None
    try:
        doc = recipe.parse(recipe_bytes)
        if doc.sheet is not None:
            scan = path.parent / doc.sheet.file
            try:
                sheet_bytes = scan.read_bytes()
            except OSError as e:
                raise SheetError(
                    f"The scan {doc.sheet.file} cannot be read: {e.strerror or e}. It must lie beside {path.name}.",
                    path="$.sheet.file",
                    code="no-such-file",
                ) from None
    except RecipeError as e:
        return Done(path, failed(e, recipe_bytes), recipe_bytes, None)
    except SheetError as e:
        return Done(path, with_error(digitise.run(recipe_bytes, None, settings), e), recipe_bytes, None)
    return Done(path, digitise.run(recipe_bytes, sheet_bytes, settings, progress=progress), recipe_bytes, sheet_bytes)


def with_error(made: Digitised, error: CurvebankError) -> Digitised:
    """The same result with a better-informed error of the whole, also in the curves that failed by it."""
    told = error.to_dict()
    curves = tuple(replace(c, error=told) if c.error is not None and c.error == made.error else c for c in made.curves)
    return replace(made, curves=curves, error=told)


def write_result(done: Done, folder: Path) -> Path:
    """Write NAME.result.json; OutputError where that cannot be done, and then no part of it is left."""
    target = folder / result_name(done.path)
    write_text(target, digitise.dumps(done.made))
    return target


def make_folder(folder: Path) -> None:
    """The folder and those above it; OutputError says what stands in the way."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as e:
        raise OutputError(f"The folder {folder} cannot be made: {e.strerror or e}. Give another folder.") from None


def write_text(target: Path, text: str) -> None:
    """Write a text file (UTF-8, line ends as they are) as `write_bytes` does."""
    write_bytes(target, text.encode())


def write_bytes(target: Path, data: bytes) -> None:
    """Write a file through a temporary name, so that a reader never sees half of it, whatever interrupts the writing."""
    make_folder(target.parent)
    temporary = target.with_name(target.name + ".part")
    try:
        temporary.write_bytes(data)
        temporary.replace(target)
    except OSError as e:
        raise OutputError(f"{target} cannot be written: {e.strerror or e}. Free some space or give another folder.") from None
    finally:
        with contextlib.suppress(OSError):
            temporary.unlink(missing_ok=True)
