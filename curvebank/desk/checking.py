"""What the checks find in a recipe file, a result file, or a pump of the bank."""

from pathlib import Path
from typing import Any

import curvebank

from .. import digitise, recipe
from ..errors import RecipeError
from .files import RESULT_SUFFIX, digitise_file


def findings_of(subject: str, bank: Path) -> list[dict[str, Any]]:
    """Findings as dicts (rule, severity, subject, message, measured, limit, source, action).

    ``subject`` is the path of a recipe (it is digitised now), the path of a result (what was found then), or a catalogue key.

    Raises
    ------
    CurvebankError
        The file is neither, the recipe cannot be digitised, or there is no such pump.
    """
    path = Path(subject)
    if path.is_file():
        return _of_file(path)
    if path.suffix == ".json":
        raise RecipeError(f"There is no file {subject}.", path="$", code="no-such-file")
    with curvebank.open(bank) as reader:
        found: list[dict[str, Any]] = reader.pump(subject).findings
        return found


def _of_file(path: Path) -> list[dict[str, Any]]:
    data = recipe.load_json(path.read_bytes())
    if isinstance(data, dict) and data.get("result") == 1:
        if data.get("error"):
            raise RecipeError(data["error"]["message"], path=data["error"].get("path"), code=data["error"]["code"])
        return list(data.get("findings", []))
    if path.name.endswith(RESULT_SUFFIX):
        raise RecipeError(f"{path.name} is not a result of this version.", path="$.result")
    made = digitise_file(path).made
    if made.error:
        raise RecipeError(made.error["message"], path=made.error["path"], code=made.error["code"])
    return [digitise.finding_json(f) for f in made.findings]
