"""The packed body: what goes in comes out, byte for byte the same each time, and broken bytes are named."""

import hashlib
import math
import struct
import unicodedata

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from curvebank.bank import pack
from curvebank.errors import BankError

numbers = st.floats(allow_nan=False, allow_infinity=False)
texts = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)


def values_of(kind):
    """A strategy for any value of a packed kind."""
    if kind is pack.NUMBER:
        return numbers
    if kind is pack.INTEGER:
        return st.integers(-(2**63), 2**63 - 1)
    if kind is pack.TEXT:
        return texts
    if kind is pack.FLAG:
        return st.booleans()
    if kind is pack.HASH:
        return st.binary(min_size=32, max_size=32)
    if kind is pack.ARRAY:
        shapes = st.lists(st.integers(0, 3), min_size=1, max_size=2)
        return shapes.flatmap(lambda s: st.lists(numbers, min_size=math.prod(s), max_size=math.prod(s)).map(lambda v: np.reshape(v, s)))
    if kind[0] == "optional":
        return st.none() | values_of(kind[1])
    if kind[0] == "many":
        return st.lists(values_of(kind[1]), max_size=2)
    if kind[0] == "pairs":
        return st.dictionaries(texts, values_of(kind[1]), max_size=2)
    return st.fixed_dictionaries({name: values_of(part) for name, part in kind})


def nfc(value):
    """The same with text composed and arrays as lists, for comparing."""
    if isinstance(value, str):
        return unicodedata.normalize("NFC", value)
    if isinstance(value, np.ndarray):
        return value.tolist()
    if isinstance(value, dict):
        return {nfc(k): nfc(v) for k, v in value.items()}
    if isinstance(value, list):
        return [nfc(v) for v in value]
    return value


def distinct_keys(value):
    """False where two keys of a dict are one when composed."""
    if isinstance(value, dict):
        return len({nfc(k) for k in value}) == len(value) and all(map(distinct_keys, value.values()))
    return all(map(distinct_keys, value)) if isinstance(value, list) else True


@settings(max_examples=25, deadline=None)
@given(values_of(pack.REVISION).filter(distinct_keys))
def test_round_trip(revision):
    """Any revision at all: unpack(pack(x)) is x in composed text, and packs to the same bytes again."""
    raw = pack.pack(revision)
    back = pack.unpack(raw)
    assert nfc(back) == nfc(revision)
    assert pack.pack(back) == raw


@settings(max_examples=60, deadline=None)
@given(values_of(pack.CURVE).filter(distinct_keys), st.data())
def test_shortened_bytes_are_named(curve, data):
    """Cut anywhere: an error, never a wrong value, never another exception."""
    raw = pack.pack_part(pack.CURVE, curve)
    cut = data.draw(st.integers(0, len(raw) - 1))
    with pytest.raises(BankError) as refusal:
        pack._Taker(raw[:cut]).take(pack.CURVE)
    assert refusal.value.code == "damaged"


def test_layout_is_what_the_module_says():
    """Little-endian float64, length-prefixed NFC text, uint32 counts: spelled out by hand."""
    kind = (("a", pack.NUMBER), ("b", pack.TEXT), ("c", pack.many(pack.INTEGER)), ("d", pack.optional(pack.NUMBER)))
    raw = pack.pack_part(kind, {"a": 1.5, "b": "Söhne", "c": [7], "d": None})
    text = "Söhne".encode()
    assert raw == struct.pack("<d", 1.5) + struct.pack("<I", len(text)) + text + struct.pack("<Iq", 1, 7) + b"\0"


def test_equal_text_in_two_spellings_packs_alike():
    """A composed and a decomposed umlaut are one text."""
    assert pack.pack_part(pack.TEXT, "S\u00f6hne") == pack.pack_part(pack.TEXT, "So\u0308hne")


def test_order_of_a_dict_does_not_matter():
    """Pairs are packed in the order of their keys."""
    kind = pack.pairs(pack.NUMBER)
    assert pack.pack_part(kind, {"b": 1.0, "a": 2.0}) == pack.pack_part(kind, {"a": 2.0, "b": 1.0})


@pytest.mark.parametrize("bad", [float("nan"), float("inf"), -float("inf")])
def test_numbers_must_be_finite(bad):
    """Alone and in an array; the message says where."""
    with pytest.raises(BankError, match="sigma"):
        pack.pack_part((("sigma", pack.NUMBER),), {"sigma": bad})
    with pytest.raises(BankError, match="finite"):
        pack.pack_part(pack.ARRAY, [1.0, bad])


def test_foreign_bytes_and_newer_forms_are_refused():
    """Magic, version and length are checked."""
    good = pack.MAGIC + struct.pack("<H", pack.VERSION)
    for raw, code in ((b"PNG\x89", "damaged"), (pack.MAGIC + struct.pack("<H", 2), "newer-version"), (good, "damaged"), (b"", "damaged")):
        with pytest.raises(BankError) as refusal:
            pack.unpack(raw)
        assert refusal.value.code == code


def test_sha256_is_sha256():
    """FIPS 180-4's example: SHA-256 of "abc"."""
    assert (
        pack.sha256(b"abc").hex()
        == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
        == hashlib.sha256(b"abc").hexdigest()
    )
