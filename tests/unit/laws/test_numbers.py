"""Numbers as people type them, units there and back, and what is refused. `units` stands below everything."""

import doctest

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from curvebank import units
from curvebank.errors import UnitError

EVERY = [(q, u) for q in units.QUANTITIES for u in units.known_units(q)]


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12", 12.0),
        (" 12.5 ", 12.5),
        ("12,5", 12.5),
        ("0,750", 0.75),
        (",5", 0.5),
        (".5", 0.5),
        ("5.", 5.0),
        ("-3.5", -3.5),
        ("−3,5", -3.5),
        ("+7", 7.0),
        ("1e3", 1000.0),
        ("2.5E-3", 0.0025),
        ("12 1/2", 12.5),
        ("12-1/2", 12.5),
        ("7/8", 0.875),
        ("-1 1/4", -1.25),
        ('12 3/8"', 12.375),
        ("12″", 12.0),
        ("1 450", 1450.0),
        ("1 450,5", 1450.5),
        ("1\u00a0450", 1450.0),
        ("1\u202f450", 1450.0),
        ("1 234 567.25", 1234567.25),
        (42, 42.0),
        (0.25, 0.25),
    ],
)
def test_parse_number_reads(text, value):
    assert units.parse_number(text) == value


@pytest.mark.parametrize(
    "text",
    ["", " ", "-", ".", ",", "abc", "1/0", "1/", "1.2.3", "1,2,3", "1 45", "12 mm", "nan", "inf", "0x10", "1_000", "--1", "1e", "½½"],
)
def test_parse_number_refuses(text):
    with pytest.raises(UnitError, match="is not a number"):
        units.parse_number(text)


def test_parse_number_asks_when_a_letter_was_meant_as_a_digit():
    with pytest.raises(UnitError, match=r"“12o” is not a number\. Did you mean 120\?"):
        units.parse_number("12o")


def test_a_comma_before_three_digits_is_refused_with_both_readings():
    with pytest.raises(UnitError, match=r"1\.450 or 1450"):
        units.parse_number("1,450")


@given(st.floats(min_value=-1e9, max_value=1e9, allow_nan=False))
def test_parse_number_reads_what_python_prints(x):
    assert units.parse_number(repr(x)) == x


@given(st.integers(min_value=0, max_value=400), st.integers(min_value=0, max_value=63))
def test_inch_fractions(whole, sixtyfourths):
    assert units.parse_number(f"{whole} {sixtyfourths}/64") == whole + sixtyfourths / 64


@pytest.mark.parametrize(("quantity", "unit"), EVERY)
@settings(max_examples=15)
@given(value=st.floats(min_value=-1e6, max_value=1e6, allow_nan=False, allow_subnormal=False))
def test_units_round_trip(quantity, unit, value):
    there = units.to_canonical(value, quantity, unit, density_kgm3=998.2)
    assert units.from_canonical(there, quantity, unit, density_kgm3=998.2) == pytest.approx(value, rel=1e-14, abs=1e-300)


@pytest.mark.parametrize("quantity", list(units.QUANTITIES))
def test_canonical_unit_is_known_and_has_factor_one(quantity):
    assert units.factor(quantity, units.CANONICAL[quantity]) == 1.0
    assert units.CANONICAL[quantity] in units.known_units(quantity)


@pytest.mark.parametrize("unit", ["gal/min", "gpm", "usgpm", "igpm"])
def test_a_bare_gallon_is_never_guessed(unit):
    with pytest.raises(UnitError, match="A gallon has two meanings"):
        units.factor("flow", unit)


@pytest.mark.parametrize("unit", ["PS", "cv"])
def test_metric_horsepower_by_its_old_names_is_explained(unit):
    with pytest.raises(UnitError, match=r"hp\(metric\)"):
        units.factor("power", unit)


def test_unknown_unit_and_quantity_list_what_is_known():
    with pytest.raises(UnitError, match=r"'furlong' is not a unit of head.*Known: m, ft, bar"):
        units.factor("head", "furlong")
    with pytest.raises(UnitError, match="'torque' is not a quantity"):
        units.factor("torque", "Nm")
    with pytest.raises(UnitError, match="'torque' is not a quantity"):
        units.known_units("torque")


def test_pressure_is_head_only():
    with pytest.raises(UnitError):
        units.factor("power", "bar", density_kgm3=1000.0)
    assert "bar" in units.known_units("npshr") and "bar" not in units.known_units("flow")


def test_arrays_convert_as_numbers_do():
    import numpy as np

    q = np.array([1.0, 2.0])
    assert units.to_canonical(q, "flow", "l/s").tolist() == [3.6, 7.2]


def test_examples_in_docstrings():
    failed, run = doctest.testmod(units)
    assert run > 0 and failed == 0
