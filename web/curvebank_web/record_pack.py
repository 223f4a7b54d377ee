"""Records to bytes and back, exactly: what the person saw at a step is what is saved, to the last bit.

One ``.npz`` holds the arrays and a JSON tree that refers to them. No pickle: a desk file from elsewhere can hold wrong
numbers, but no program. Only records of ``curvebank.records`` are made again.
"""

import dataclasses
import io
import json
import zipfile
from typing import Any

import numpy as np

from curvebank import records
from curvebank.errors import CurvebankError

FORM = 1
KINDS = {kind.__name__: kind for kind in vars(records).values() if dataclasses.is_dataclass(kind) and isinstance(kind, type)}


class PackError(CurvebankError):
    """The bytes are not a packed record, or of another form."""

    code = "result-form"


def pack(record: Any) -> bytes:
    """A record, with all it holds, as bytes.

    Examples
    --------
    >>> from curvebank.records import Notice
    >>> unpack(pack(Notice(code="a", message="b", stretch=(1, 2))))
    Notice(code='a', message='b', stretch=(1, 2))
    """
    arrays: list[Any] = []
    tree = {"form": FORM, "root": _tree(record, arrays)}
    out = io.BytesIO()
    text = np.frombuffer(json.dumps(tree).encode(), dtype=np.uint8)
    np.savez_compressed(out, tree=text, **{f"a{i}": a for i, a in enumerate(arrays)})
    return out.getvalue()


def unpack(data: bytes) -> Any:
    """The record that ``pack`` was given; arrays are read-only.

    Raises
    ------
    PackError
        The bytes are damaged, or another version of curvebank wrote them.
    """
    try:
        with np.load(io.BytesIO(data), allow_pickle=False) as file:
            tree = json.loads(file["tree"].tobytes())
            if tree["form"] != FORM:
                raise ValueError(f"form {tree['form']}")
            return _record(tree["root"], file)
    except (ValueError, KeyError, TypeError, OSError, EOFError, zipfile.BadZipFile) as error:
        raise PackError(f"This result was kept by another version of curvebank ({error}). Run the sheet again, then save.") from error


def _tree(value: Any, arrays: list[Any]) -> Any:
    if isinstance(value, np.ndarray):
        arrays.append(value)
        return {"array": len(arrays) - 1}
    if isinstance(value, np.generic):
        return value.item()
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        fields = {f.name: _tree(getattr(value, f.name), arrays) for f in dataclasses.fields(value)}
        return {"record": type(value).__name__, "fields": fields}
    if isinstance(value, dict):
        return {"dict": {k: _tree(v, arrays) for k, v in value.items()}}
    if isinstance(value, tuple):
        return {"tuple": [_tree(v, arrays) for v in value]}
    if isinstance(value, list):
        return [_tree(v, arrays) for v in value]
    if value is None or isinstance(value, bool | int | float | str):
        return value
    raise TypeError(f"{type(value).__name__} cannot be kept")


def _record(tree: Any, file: Any) -> Any:
    if isinstance(tree, list):
        return [_record(v, file) for v in tree]
    if not isinstance(tree, dict):
        return tree
    if "array" in tree:
        array = file[f"a{tree['array']}"]
        array.setflags(write=False)
        return array
    if "tuple" in tree:
        return tuple(_record(v, file) for v in tree["tuple"])
    if "dict" in tree:
        return {k: _record(v, file) for k, v in tree["dict"].items()}
    return KINDS[tree["record"]](**{k: _record(v, file) for k, v in tree["fields"].items()})
