"""What a script hands over where a number belongs: every kind of number is taken, nothing else is."""

from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest

from curvebank.errors import CurvebankError, LawError, NumberError


@pytest.mark.parametrize(
    "flow",
    [
        "150",
        b"150",
        None,
        True,
        np.True_,
        np.str_("50"),
        1j,
        ["50", "60"],
        np.array(["50", "60"]),
        np.array([b"50"]),
        np.array([True, False]),
        np.array([50.0, "60"], dtype=object),
        [50.0, None],
        np.array("50"),
        np.array([50j]),
        np.array(["2026-11-01"], dtype="datetime64[D]"),
        np.array([5], dtype="timedelta64[s]"),
        {"flow": 50.0},
        Ellipsis,
    ],
    ids=repr,
)
def test_what_is_no_number_is_not_read_as_one(pump, flow):
    """Text out of a table that was not parsed is a fault to see, not a flow; Python says TypeError for it, and so does this."""
    pump.head(50.0, 320.0)  # a reading that is already planned answers no differently
    for ask in (
        lambda: pump.head(flow_m3h=flow, diameter_mm=320.0),
        lambda: pump.head(flow, 320.0, outside="nan"),
        lambda: pump.head.uncertainty(flow, 320.0, of="print"),
        lambda: pump.power(flow, 320.0),
    ):
        with pytest.raises(TypeError, match=r"^flow_m3h is .* no number") as caught:
            ask()
        assert isinstance(caught.value, CurvebankError) and caught.value.code == "not-a-number"


@pytest.mark.parametrize("wrong", ["320", b"320", True, np.array(["320"]), [True]], ids=repr)
def test_diameter_and_speed_are_numbers_too(pump, wrong):
    """By name, in every way of asking."""
    for name in ("diameter_mm", "speed_rpm"):
        for ask in (pump.head, pump.efficiency):
            with pytest.raises(NumberError, match=f"^{name} is "):
                ask(50.0, **({"diameter_mm": 320.0} | {name: wrong}))
    if isinstance(wrong, str):
        for ask in (pump.head.domain, pump.head.plan):
            with pytest.raises(NumberError, match="^diameter_mm is '320'"):
                ask(wrong)


def test_questions_about_a_duty_take_numbers_only(pump, released):
    """The same for system, trim, choice and density."""
    for name, ask in {
        "static_head_m": lambda: pump.duty("20", 2e-3, 320.0),
        "friction_m_per_m3h2": lambda: pump.duty(20, "2e-3", 320.0),
        "exponent": lambda: pump.duty(20, 2e-3, 320.0, exponent="2"),
        "flow_m3h": lambda: pump.trim_for("50", 40.0),
        "head_m": lambda: pump.trim_for(50.0, "40"),
        "density_kgm3": lambda: pump.power(50.0, 320.0, density_kgm3="1000"),
    }.items():
        with pytest.raises(NumberError, match=f"^{name} is "):
            ask()
    with pytest.raises(NumberError, match="^flow_m3h is '50'"):
        pump.closure("50", 320.0)
    for name, asked in {"flow_m3h": ("50", 40.0), "head_m": (50.0, "40"), "npsha_m": (50.0, 40.0, "3")}.items():
        with pytest.raises(NumberError, match=f"^{name} is "):
            released.find(*asked[:2], npsha_m=(asked[2:] or (None,))[0])


def test_tables_with_uneven_rows_are_named(pump):
    """Numpy cannot make one array of them."""
    with pytest.raises(LawError, match="flow_m3h is not an even table"):
        pump.head([[10.0, 20.0], [30.0]], 320.0)


def test_exact_numbers_in_a_list_are_numbers(pump):
    """Decimal and Fraction come from careful scripts; 43.75 m is the curve's own polynomial at 50 m3/h."""
    assert pump.head([Decimal(50), Fraction(50), 50], 320.0) == pytest.approx([43.75] * 3)
    assert pump.head(Decimal(50), Decimal(320)) == pytest.approx(43.75) and pump.head.domain(Fraction(320)).hi_m3h == 100.0
