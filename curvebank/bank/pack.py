"""The packed body of a revision: what its hash is taken over.

Layout: magic ``CVBK``, version (uint16), then the fields of ``REVISION`` in their fixed order. Little-endian throughout; float64 numbers;
text as uint32 length and UTF-8 of its NFC form; a list as uint32 count and its items; an optional value as one byte, then the value.
New fields mean a new version for new rows; old versions stay readable. Numbers must be finite.
"""

import hashlib
import math
import struct
import unicodedata
from typing import Any

import numpy as np

from ..errors import BankError

MAGIC = b"CVBK"
VERSION = 1

NUMBER, INTEGER, TEXT, FLAG, HASH, ARRAY = "number", "integer", "text", "flag", "hash", "array"


def optional(kind: Any) -> tuple[str, Any]:
    """A value that may be None."""
    return ("optional", kind)


def many(kind: Any) -> tuple[str, Any]:
    """A list."""
    return ("many", kind)


def pairs(kind: Any) -> tuple[str, Any]:
    """A dict with text keys, packed in the order of its keys."""
    return ("pairs", kind)


NOTICE = (("code", TEXT), ("message", TEXT), ("stretch", optional(many(INTEGER))))
STRETCH = (("first", INTEGER), ("last", INTEGER), ("reason", TEXT))
FIT = (
    ("order", INTEGER),
    ("lo", NUMBER),
    ("hi", NUMBER),
    ("mid", NUMBER),
    ("half", NUMBER),
    ("scaled", ARRAY),
    ("covariance", ARRAY),
    ("plain", ARRAY),
    ("sigma", NUMBER),
    ("max_miss", NUMBER),
    ("max_miss_pct", NUMBER),
    ("through_zero", FLAG),
)
TRACE = (
    ("n", INTEGER),
    ("sha256", HASH),
    ("traced", INTEGER),
    ("closed", FLAG),
    ("confidence", NUMBER),
    ("flagged", FLAG),
    ("source", TEXT),
    ("line_width_px", optional(NUMBER)),
    ("hint_click", optional(many(NUMBER))),
    ("stretches", many(STRETCH)),
    ("warnings", many(NOTICE)),
)
CURVE = (
    ("id", TEXT),
    ("recipe_id", TEXT),
    ("sheet_sha256", optional(HASH)),
    ("page", INTEGER),
    ("quantity", TEXT),
    ("panel", optional(TEXT)),
    ("x_axis", optional(TEXT)),
    ("y_axis", optional(TEXT)),
    ("diameter_mm", optional(NUMBER)),
    ("speed_rpm", optional(NUMBER)),
    ("level", optional(NUMBER)),
    ("label", optional(pairs(TEXT))),
    ("applies_to", TEXT),
    ("group", optional(TEXT)),
    ("basis", TEXT),
    ("head_is", TEXT),
    ("kind", TEXT),
    ("printed_x_unit", TEXT),
    ("printed_y_unit", TEXT),
    ("factor", NUMBER),
    ("spread", pairs(NUMBER)),
    ("warnings", many(NOTICE)),
    ("trace", optional(TRACE)),
    ("fit", optional(FIT)),
)
PANEL = (
    ("id", TEXT),
    ("sheet_sha256", optional(HASH)),
    ("page", INTEGER),
    ("outline", ARRAY),
    ("map_pixels", ARRAY),
    ("map_values", pairs(ARRAY)),
    ("covariance", ARRAY),
    ("residual_px", NUMBER),
    ("worst_px", NUMBER),
    ("grid_used", FLAG),
    ("grid_lines", INTEGER),
    ("grid_residual_px", optional(NUMBER)),
    ("grid_why", TEXT),
    ("warnings", many(NOTICE)),
)
FINDING = (
    ("rule", TEXT),
    ("severity", TEXT),
    ("subject", TEXT),
    ("message", TEXT),
    ("measured", optional(NUMBER)),
    ("limit", optional(NUMBER)),
    ("unit", TEXT),
    ("source", TEXT),
    ("action", TEXT),
    ("where", TEXT),
    ("key", TEXT),
    ("sheet_sha256", optional(HASH)),
    ("page", INTEGER),
)
SOURCE = (
    ("sheet_sha256", optional(HASH)),
    ("page", INTEGER),
    ("recipe_sha256", HASH),
    ("file_name", TEXT),
    ("width", INTEGER),
    ("height", INTEGER),
    ("dpi_x", optional(NUMBER)),
    ("dpi_y", optional(NUMBER)),
    ("turn", INTEGER),
    ("made_by", pairs(TEXT)),
)
FAILED = (("id", TEXT), ("quantity", TEXT), ("code", TEXT), ("message", TEXT), ("sheet_sha256", optional(HASH)), ("page", INTEGER))
REVISION = (
    ("key", TEXT),
    ("number", INTEGER),
    ("parent", optional(INTEGER)),
    ("saved_at", TEXT),
    ("who", TEXT),
    ("why", TEXT),
    ("save_key", TEXT),
    ("maker", TEXT),
    ("model", TEXT),
    ("stages", INTEGER),
    ("rated_rpm", optional(NUMBER)),
    ("density_kgm3", NUMBER),
    ("type", optional(TEXT)),
    ("inlet", optional(TEXT)),
    ("read_rule", TEXT),
    ("rule", pairs(ARRAY)),
    ("settings", pairs(TEXT)),
    ("made_by", pairs(TEXT)),
    ("sources", many(SOURCE)),
    ("panels", many(PANEL)),
    ("curves", many(CURVE)),
    ("failed", many(FAILED)),
    ("findings", many(FINDING)),
)


def _put(kind: Any, value: Any, out: list[bytes], where: str) -> None:
    if kind is NUMBER:
        if not math.isfinite(value):
            raise BankError(f"{where} is {value}: only finite numbers are stored. Look at the curve it belongs to.", code="not-finite")
        out.append(struct.pack("<d", value))
    elif kind is INTEGER:
        out.append(struct.pack("<q", value))
    elif kind is FLAG:
        out.append(b"\x01" if value else b"\x00")
    elif kind is TEXT:
        raw = unicodedata.normalize("NFC", value).encode("utf-8")
        out.append(struct.pack("<I", len(raw)) + raw)
    elif kind is HASH:
        if len(value) != 32:
            raise ValueError(f"{where}: a SHA-256 has 32 bytes")
        out.append(value)
    elif kind is ARRAY:
        a = np.asarray(value, dtype="<f8", order="C")
        if not np.isfinite(a).all():
            raise BankError(f"{where} holds a number that is not finite. Look at the curve it belongs to.", code="not-finite")
        out.append(struct.pack(f"<B{a.ndim}I", a.ndim, *np.shape(value)) + a.tobytes())
    elif kind[0] == "optional":
        out.append(b"\x00" if value is None else b"\x01")
        if value is not None:
            _put(kind[1], value, out, where)
    elif kind[0] == "many":
        out.append(struct.pack("<I", len(value)))
        for i, item in enumerate(value):
            _put(kind[1], item, out, f"{where}[{i}]")
    elif kind[0] == "pairs":
        items = sorted((unicodedata.normalize("NFC", k), v) for k, v in value.items())
        out.append(struct.pack("<I", len(items)))
        for name, item in items:
            _put(TEXT, name, out, where)
            _put(kind[1], item, out, f"{where}.{name}")
    else:
        for name, part in kind:
            _put(part, value[name], out, f"{where}.{name}" if where else name)


class _Taker:
    def __init__(self, raw: bytes) -> None:
        self.raw, self.at = memoryview(raw), 0

    def bytes(self, n: int) -> bytes:
        if n < 0 or self.at + n > len(self.raw):
            raise BankError("A packed body ends too early: the bank is damaged. Run verify.", code="damaged")
        part = bytes(self.raw[self.at : self.at + n])
        self.at += n
        return part

    def unpack(self, form: str) -> tuple[Any, ...]:
        return struct.unpack(form, self.bytes(struct.calcsize(form)))

    def take(self, kind: Any) -> Any:
        if kind is NUMBER:
            return self.unpack("<d")[0]
        if kind is INTEGER:
            return self.unpack("<q")[0]
        if kind is FLAG:
            return self.bytes(1) != b"\x00"
        if kind is TEXT:
            return self.bytes(self.unpack("<I")[0]).decode("utf-8")
        if kind is HASH:
            return self.bytes(32)
        if kind is ARRAY:
            shape = self.unpack(f"<{self.unpack('<B')[0]}I")
            a = np.frombuffer(self.bytes(8 * math.prod(shape)), dtype="<f8").reshape(shape)
            return a
        if kind[0] == "optional":
            return self.take(kind[1]) if self.bytes(1) != b"\x00" else None
        if kind[0] == "many":
            return [self.take(kind[1]) for _ in range(self.unpack("<I")[0])]
        if kind[0] == "pairs":
            return {self.take(TEXT): self.take(kind[1]) for _ in range(self.unpack("<I")[0])}
        return {name: self.take(part) for name, part in kind}


def pack_part(kind: Any, value: Any) -> bytes:
    """One record without the header, for instance a curve, whose hash is kept beside its columns."""
    out: list[bytes] = []
    _put(kind, value, out, "")
    return b"".join(out)


def pack(revision: dict[str, Any]) -> bytes:
    """Pack a whole revision (a dict with the keys of ``REVISION``).

    Raises
    ------
    BankError
        A number is not finite (code ``not-finite``).
    """
    return MAGIC + struct.pack("<H", VERSION) + pack_part(REVISION, revision)


def unpack(raw: bytes) -> dict[str, Any]:
    """Read a packed revision back. Arrays come as read-only float64.

    Raises
    ------
    BankError
        Not a packed body, from a newer version, or cut short.
    """
    taker = _Taker(raw)
    if taker.bytes(4) != MAGIC:
        raise BankError("A packed body does not begin as one: the bank is damaged. Run verify.", code="damaged")
    version = taker.unpack("<H")[0]
    if version != VERSION:
        raise BankError(f"A revision is packed in form {version}; this curvebank knows {VERSION}. Update curvebank.", code="newer-version")
    try:
        value = taker.take(REVISION)
    except UnicodeDecodeError as error:
        raise BankError("A packed body holds broken text: the bank is damaged. Run verify.", code="damaged") from error
    if taker.at != len(raw):
        raise BankError("A packed body is longer than it says: the bank is damaged. Run verify.", code="damaged")
    return value


def sha256(raw: bytes) -> bytes:
    """The 32 bytes of SHA-256."""
    return hashlib.sha256(raw).digest()
