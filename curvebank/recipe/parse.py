"""Reading a recipe: strict JSON, typed models, and every fault named by its JSON path in words."""

import difflib
import hashlib
import json
import re
from typing import Any

from pydantic import ValidationError

from .. import units
from ..errors import RecipeError, UnitError
from . import model
from .model import CurveModel, Node, PanelModel, Recipe

MAX_BYTES = 20_000_000
"""A recipe is clicks and names; anything larger is another kind of file."""

HALF_CHARACTER = re.compile(r"\\u[dD][89a-fA-F]|[\ud800-\udfff]")
"""Where a text may hold half of a surrogate pair, escaped or bare: looked at closely only then."""


def to_bytes(doc: bytes | str | dict[str, Any]) -> bytes:
    """The bytes a recipe is stored and hashed as: given bytes unchanged, a dict as compact UTF-8 JSON in its own order."""
    if isinstance(doc, bytes):
        return doc
    if isinstance(doc, str):
        try:
            return doc.encode()
        except UnicodeEncodeError:
            raise _half_character() from None
    try:
        return json.dumps(doc, ensure_ascii=False, separators=(",", ":"), allow_nan=False).encode()
    except (TypeError, ValueError) as e:
        raise RecipeError(f"The recipe cannot be written as JSON: {e}.", path="$") from None


def sha256(doc: bytes | str | dict[str, Any]) -> str:
    """The identity of a recipe: SHA-256 over its bytes."""
    return hashlib.sha256(to_bytes(doc)).hexdigest()


def load_json(data: bytes | str) -> Any:
    """Strict JSON: UTF-8 (a byte-order mark is tolerated), no NaN or Infinity, no key twice in one object.

    Raises
    ------
    RecipeError
        With the line and column of a syntax error.
    """
    if len(data) > MAX_BYTES:
        raise RecipeError(f"The recipe is {len(data) / 1e6:.0f} MB; a recipe is text of at most 20 MB.", path="$", code="recipe-json")

    def pairs(items: list[tuple[str, Any]]) -> dict[str, Any]:
        out: dict[str, Any] = {}
        for k, v in items:
            if k in out:
                raise RecipeError(f"The key “{k}” stands twice in one object. Keep one of them.", path="$", code="recipe-json")
            out[k] = v
        return out

    def refuse(name: str) -> Any:
        raise RecipeError(f"{name} is not a JSON number. Write a finite number.", path="$", code="recipe-json")

    try:
        text = data.decode("utf-8-sig") if isinstance(data, bytes) else data
        if HALF_CHARACTER.search(text):
            _refuse_halves(json.loads(text, parse_int=float))
        return json.loads(text, object_pairs_hook=pairs, parse_constant=refuse, parse_int=_whole)
    except UnicodeDecodeError as e:
        raise RecipeError(f"The recipe is not UTF-8 text (byte {e.start}). Save it as UTF-8.", path="$", code="recipe-json") from None
    except json.JSONDecodeError as e:
        raise RecipeError(f"The recipe is not JSON: {e.msg} at line {e.lineno}, column {e.colno}.", path="$", code="recipe-json") from None
    except RecursionError:
        raise RecipeError("The recipe is nested too deeply to be a recipe.", path="$", code="recipe-json") from None


def _whole(digits: str) -> int:
    if len(digits) > 400:
        raise RecipeError(f"A number of {len(digits)} digits begins {digits[:12]}. Write it in fewer.", path="$", code="recipe-json")
    return int(digits)


def _half_character() -> RecipeError:
    message = "The recipe holds half a character (a lone \\ud800 to \\udfff), which no file can keep. Type the text again."
    return RecipeError(message, path="$", code="recipe-json")


def _refuse_halves(value: Any) -> None:
    try:
        json.dumps(value, ensure_ascii=False).encode()
    except UnicodeEncodeError:
        raise _half_character() from None


def parse(doc: bytes | str | dict[str, Any]) -> Recipe:
    """Validate a recipe.

    Parameters
    ----------
    doc : bytes, str or dict
        JSON, or the object it holds.

    Returns
    -------
    Recipe

    Raises
    ------
    RecipeError
        ``path`` and message of the first fault; ``details["errors"]`` holds ``{path, message}`` of every fault.
    """
    data = load_json(doc) if isinstance(doc, (bytes, str)) else doc
    if not isinstance(data, dict):
        raise RecipeError('A recipe is a JSON object that begins {"recipe": 1, …}.', path="$")
    if data.get("recipe") not in (None, 1) or isinstance(data.get("recipe"), bool):
        raise RecipeError(
            f"This recipe is of version {data.get('recipe')!r}; this curvebank reads version 1.", path="$.recipe", code="recipe-version"
        )
    try:
        recipe = Recipe.model_validate(data)
    except ValidationError as e:
        raise _error([(_path(x["loc"]), _words(x)) for x in e.errors()]) from None
    faults = list(_cross_faults(recipe))
    if faults:
        raise _error(faults)
    return recipe


def validate_part(kind: type[Node], doc: dict[str, Any], path: str) -> Any:
    """Validate one part of a recipe (a panel, a curve) that stands at ``path``; RecipeError as in `parse`."""
    try:
        return kind.model_validate(doc)
    except ValidationError as e:
        raise _error([(_path(x["loc"], path), _words(x)) for x in e.errors()]) from None


def _error(faults: list[tuple[str, str]]) -> RecipeError:
    path, message = faults[0]
    more = f" ({len(faults) - 1} more faults follow.)" if len(faults) > 1 else ""
    return RecipeError(f"{path}: {message}{more}", path=path, details={"errors": [{"path": p, "message": m} for p, m in faults]})


def _path(loc: tuple[Any, ...], root: str = "$") -> str:
    out = root
    for part in loc:
        if isinstance(part, int):
            out += f"[{part}]"
        elif part != "[key]":
            out += f".{part}" if str(part).replace("_", "").replace("-", "").isalnum() else f"[{json.dumps(str(part))}]"
    return out


def _known_keys() -> set[str]:
    kinds = [k for k in vars(model).values() if isinstance(k, type) and issubclass(k, Node)]
    return {name for k in kinds for name in k.model_fields}


def _words(fault: Any) -> str:
    """A pydantic fault in plain words."""
    kind, ctx, got = fault["type"], fault.get("ctx", {}), fault.get("input")
    shown = json.dumps(got, ensure_ascii=False, default=str)[:60]
    if kind == "extra_forbidden":
        near = difflib.get_close_matches(str(fault["loc"][-1]), _known_keys(), 1, 0.7)
        return f"Unknown key.{f' Did you mean “{near[0]}”?' if near else ''} Keys of your own begin with x-."
    if kind == "missing":
        return "This key is missing."
    if kind == "literal_error":
        return f"{shown} is not one of {ctx['expected']}."
    if kind == "value_error":
        return str(ctx["error"])
    if kind == "string_pattern_mismatch":
        what = "64 hex digits" if "64" in ctx["pattern"] else "capital letters, digits and hyphens"
        return f"{shown} is not made of {what}."
    if kind in ("float_type", "int_type"):
        return f"{shown} is not a number."
    if kind == "string_type":
        return f"{shown} is not text."
    if kind == "string_too_short":
        return "This text is empty."
    if kind == "finite_number":
        return f"{shown} is not a finite number."
    if kind in ("too_short", "too_long"):
        least = kind == "too_short"
        wanted = f"at {'least' if least else 'most'} {ctx['min_length' if least else 'max_length']}"
        count = ctx.get("actual_length")
        has = "is empty" if count == 0 else f"has {count or 'more'} item{'s' if count != 1 else ''}"
        one = ctx["min_length" if least else "max_length"] == 1
        return f"{shown} {has}; {wanted} belong{'s' if one else ''} here."
    if kind == "string_too_long":
        return f"This text is longer than {ctx['max_length']} characters."
    if kind in ("greater_than", "greater_than_equal", "less_than_equal"):
        word = {"greater_than": "above", "greater_than_equal": "at least", "less_than_equal": "at most"}[kind]
        return f"{shown} must be {word} {ctx.get('gt', ctx.get('ge', ctx.get('le'))):g}."
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        return f"{shown} is not an object with keys."
    if kind in ("tuple_type", "list_type"):
        return f"{shown} is not a list."
    return f"{fault['msg']} (found {shown})."


def _cross_faults(recipe: Recipe) -> Any:
    """Faults that need more than one part of the document to be seen."""
    if recipe.pump.catalogue_key == "":
        yield "$.pump.key", "Maker and model hold no letter a-z or digit. Give a key of capitals, digits and hyphens."
    seen: set[str] = set()
    for i, p in enumerate(recipe.panels):
        if p.id in seen:
            yield f"$.panels[{i}].id", f"Two panels are called “{p.id}”. Give each its own id."
        seen.add(p.id)
        yield from _axis_faults(p, f"$.panels[{i}].axes")
        if not any(a.quantity == "flow" for a in p.axes.values()):
            yield f"$.panels[{i}].axes", "A panel needs one flow axis."
        if all(a.quantity == "flow" for a in p.axes.values()):
            yield f"$.panels[{i}].axes", "A panel needs a value axis beside its flow axis."
    seen = set()
    for i, c in enumerate(recipe.curves):
        at = f"$.curves[{i}]"
        if c.id in seen:
            yield f"{at}.id", f"Two curves are called “{c.id}”. Give each its own id."
        seen.add(c.id)
        yield from _table_faults(c, at) if c.kind == "table" else _drawn_faults(recipe, c, at)
        if c.is_contour and c.value is None:
            yield f"{at}.value", "A contour needs the value it stands for."
        if c.quantity == "efficiency_contour" and c.value is not None and not 0 < c.value <= 1:
            yield f"{at}.value", f"An efficiency contour is a fraction between 0 and 1, like 0.75, not {c.value:g}."
        if not c.is_contour and c.value is not None:
            yield f"{at}.value", "Only contours carry a value; this curve is not one."
    drawn = any(c.kind != "table" for c in recipe.curves) or not recipe.curves
    if recipe.sheet is None and (drawn or recipe.panels):
        yield "$.sheet", "This key is missing. Only a recipe of tables alone may leave the sheet out."


def _axis_faults(panel: PanelModel, at: str) -> Any:
    for name, axis in panel.axes.items():
        place = _path((name,), at)
        try:
            units.factor(axis.quantity, axis.unit, density_kgm3=axis.density_kgm3)
        except UnitError as e:
            pressure = axis.unit in units.PRESSURE_PA and axis.unit in units.known_units(axis.quantity)
            yield f"{place}.{'density_kgm3' if pressure else 'unit'}", e.message


def _table_faults(c: CurveModel, at: str) -> Any:
    for key in ("x_unit", "y_unit"):
        unit = getattr(c, key)
        if unit is None:
            yield f"{at}.{key}", "A typed table needs its units."
            continue
        try:
            units.factor("flow" if key == "x_unit" else c.quantity, unit)
        except UnitError as e:
            yield f"{at}.{key}", e.message
    if c.is_contour:
        yield f"{at}.kind", "A contour is drawn, not typed as a table."
    for key in ("clicks", "guides", "locked"):
        if getattr(c, key):
            yield f"{at}.{key}", f"A typed table has rows, not {key if key != 'locked' else 'locked stretches'}."


def _drawn_faults(recipe: Recipe, c: CurveModel, at: str) -> Any:
    if c.rows:
        yield f"{at}.rows", "Rows belong to kind “table”."
    if c.panel is None:
        yield f"{at}.panel", "This key is missing."
        return
    panel = recipe.panel(c.panel)
    if panel is None:
        known = ", ".join(p.id for p in recipe.panels) or "none"
        yield f"{at}.panel", f"There is no panel “{c.panel}”. Panels: {known}."
        return
    for key in ("x", "y"):
        axis = getattr(c, key)
        if axis is None:
            yield f"{at}.{key}", "This key is missing."
        elif axis not in panel.axes:
            yield f"{at}.{key}", f"Panel “{panel.id}” has no axis “{axis}”. Axes: {', '.join(panel.axes)}."
        elif (panel.axes[axis].quantity == "flow") != (key == "x"):
            what = "a flow axis" if key == "x" else "a value axis, not flow"
            yield f"{at}.{key}", f"“{axis}” must be {what}."
    y = panel.axes.get(c.y or "")
    if c.is_contour and y is not None and y.quantity not in ("head", "flow"):
        yield f"{at}.y", "A contour is read on the head axis of its panel."
