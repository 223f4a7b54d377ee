"""Numbers on their way into JSON."""

import json

import numpy as np
import pytest

from curvebank.jsonable import clean, digits, places


def test_rounding_keeps_digits_at_any_size():
    assert digits([0.0, 123.4567891234, -9.87654321987e-7, 1e-320, 3e12]) == [
        0.0,
        123.456789,
        -9.87654322e-7,
        pytest.approx(0, abs=1e-300),
        3e12,
    ]


def test_seven_digits_are_all_a_stored_float32_has():
    """IEEE 754 binary32 has 24 bits of significand: half a unit in its last place is 2**-24 = 6e-8 of the value."""
    stored = np.float32([12.345678, 0.0098765432, 98765.43]).astype(float)
    assert digits(stored, 7) == pytest.approx(stored, rel=5e-7)


def test_places_keep_the_shape():
    assert places([[1.00004, 2.00006]]) == [[1.0, 2.0001]] and places(np.empty((0, 2))) == []


def test_clean_is_strict_json():
    made = clean({1: (np.float64(2.5), np.nan, -np.inf), "a": np.arange(2), "b": np.bool_(True), "c": np.int64(3), "d": None, "e": "x"})
    assert made == {"1": [2.5, None, None], "a": [0, 1], "b": True, "c": 3, "d": None, "e": "x"}
    assert json.loads(json.dumps(made, allow_nan=False)) == made and made["b"] is True
