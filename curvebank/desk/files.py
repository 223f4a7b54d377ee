"""Recipes on disk: each with its scan beside it, each to its result, one failure never stopping the others."""

import hashlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from .. import digitise, recipe
from ..errors import CurvebankError, RecipeError, SheetError
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
        return self.path.name.removesuffix(RECIPE_SUFFIX) if self.path.name.endswith(RECIPE_SUFFIX) else self.path.stem

    def save_key(self, who: str, why: str) -> str:
        """The same files, person and reason give the same key, so that a repeated command stores once."""
        parts = (self.recipe_bytes, self.sheet_bytes or b"", who.encode(), why.encode())
        return "file-" + hashlib.sha256(b"".join(hashlib.sha256(p).digest() for p in parts)).hexdigest()[:40]


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
        made = digitise.run(recipe_bytes, None, settings) if doc.panels else failed(e, recipe_bytes)
        return Done(path, with_error(made, e), recipe_bytes, None)
    return Done(path, digitise.run(recipe_bytes, sheet_bytes, settings, progress=progress), recipe_bytes, sheet_bytes)


def with_error(made: Digitised, error: CurvebankError) -> Digitised:
    """The same result with a better-informed error of the whole."""
    return Digitised(**{name: getattr(made, name) for name in made.__dataclass_fields__} | {"error": error.to_dict()})


def write_result(done: Done, folder: Path) -> Path:
    """Write NAME.result.json (through a temporary name, so that a reader never sees half a file)."""
    folder.mkdir(parents=True, exist_ok=True)
    target = folder / (done.name + RESULT_SUFFIX)
    temporary = target.with_suffix(".part")
    temporary.write_text(digitise.dumps(done.made), encoding="utf-8")
    temporary.replace(target)
    return target
