"""Power balance and head coefficient: which unit is named, and when nobody is accused."""

import re
from dataclasses import replace

import pytest
from closed_form import curve, family, sheet, whole

from curvebank import checks, units
from curvebank.records import frozen


def said(curves, rule, **pump):
    return [f for f in checks.run(sheet(curves, **pump), {}) if f.rule == rule]


def three(**power):
    return [curve("head"), curve("power", **power), curve("efficiency")]


def test_a_balanced_sheet_says_nothing():
    assert said(whole(), "energy-balance") == []


def test_power_in_horsepower_read_as_kilowatt():
    (f,) = said(three(scale=1 / 0.7456998715822702), "energy-balance")
    assert f.severity == "error" and f.subject == "curve:P-340"
    assert f.measured == pytest.approx(1.341, abs=0.002)
    assert re.match(r"Power, head and efficiency of Ø 340 do not agree: at 149 m³/h power is 34 % more than", f.message)
    assert "They would agree with the power axis in hp." in f.message
    assert "say which unit" in f.action


def test_power_in_kilowatt_read_as_horsepower():
    (f,) = said(three(read_as="hp"), "energy-balance")
    assert f.severity == "error" and "the power axis in kW" in f.message


@pytest.mark.parametrize(
    ("printed", "typed", "words"),
    [
        ("gal/min(US)", "m3/h", "US gal/min"),
        ("m3/h", "gal/min(US)", "m³/h"),
        ("l/s", "m3/h", "l/s"),
        ("gal/min(US)", "gal/min(imp)", "US gal/min"),
    ],
)
def test_a_wrong_flow_unit_is_named(printed, typed, words):
    k = units.factor("flow", typed) / units.factor("flow", printed)
    curves = [replace(c, points=frozen(c.points * [k, 1.0]), printed_x_unit=typed) for c in three()]
    (f,) = said(curves, "energy-balance")
    assert f.severity == "error" and f"the flow axis in {words}" in f.message


def test_head_printed_in_feet_read_as_metres():
    (f,) = said([curve("head", scale=1 / 0.3048), curve("power"), curve("efficiency")], "energy-balance")
    assert "the head axis in ft" in f.message


def test_head_per_stage_is_named_by_the_stage_count():
    (f,) = said([curve("head", scale=1 / 3), curve("power"), curve("efficiency")], "energy-balance", stages=3)
    assert "head printed per stage (3 stages)" in f.message


def test_a_line_drawn_at_a_factor_is_suspected():
    (f,) = said(three(scale=0.25), "energy-balance")
    assert "drawn at 1/4 of its value" in f.message and "give the line its factor" in f.action


def test_input_power_filed_as_shaft_power_is_suspected():
    (f,) = said(three(scale=1.15), "energy-balance")
    assert "motor input power" in f.message


def test_metric_horsepower_is_never_told_from_the_other():
    """1.4 % apart: only the nearer one is named, the words ask."""
    (f,) = said(three(scale=1 / 0.73549875), "energy-balance")
    assert f.message.count("hp") == 1 and "Look at the paper" in f.message


@pytest.mark.parametrize(("scale", "severity"), [(1.02, None), (1.055, "warning"), (0.95, "warning"), (1.13, "error")])
def test_severity_grows_with_the_disagreement(scale, severity):
    found = said(three(scale=scale), "energy-balance")
    assert [f.severity for f in found] == ([severity] if severity else [])


def test_each_diameter_is_balanced_for_itself():
    curves = [*family("head", (340, 310)), *family("efficiency", (340, 310)), curve("power", 340.0), curve("power", 310.0, scale=1.2)]
    (f,) = said(curves, "energy-balance")
    assert f.subject == "curve:P-310" and "Ø 310" in f.message


def test_another_density_is_believed():
    assert said(three(scale=1.2), "energy-balance", density_kgm3=998.2 * 1.2) == []


def test_curves_at_two_speeds_are_carried_to_one():
    r = 980 / 1450
    slow = replace(curve("power"), speed_rpm=980.0, points=frozen(curve("power").points * [r, r**3]))
    assert said([curve("head"), slow, curve("efficiency")], "energy-balance") == []


def test_a_stretch_that_leaves_the_balance_is_named():
    c = curve("power")
    p = c.points.copy()
    late = p[:, 0] > 130
    p[late, 1] *= 1 + 0.25 * (p[late, 0] - 130) / 60
    (f,) = said([curve("head"), replace(c, points=frozen(p)), curve("efficiency")], "energy-balance")
    assert f.severity == "warning"
    assert re.search(r"do not agree between 1[45]\d and 1[78]\d m³/h: power is up to 2\d % more than", f.message)


# ------------------------------------------------------------------------------------------------- head coefficient


def test_a_usual_head_coefficient_says_nothing():
    assert said(family("head"), "plausible-head-coefficient") == []


@pytest.mark.parametrize(
    ("fields", "pump", "words"),
    [
        ({"scale": 1 / 0.3048}, {}, "head in ft"),
        ({"scale": 0.3048}, {}, None),
        ({"rpm": 2900.0}, {"speed_rpm": 2900.0}, "1450 1/min"),
        ({"rpm": 725.0}, {"speed_rpm": 725.0}, "1450 1/min"),
        ({"scale": 4.0}, {}, "4 stages"),
        ({}, {"stages": 4}, "one stage"),
    ],
)
def test_wrong_unit_speed_or_stages_are_named(fields, pump, words):
    (f,) = said([curve("head", **fields)], "plausible-head-coefficient", **pump)
    assert f.severity == "error" and f.subject == "family:head"
    assert "head coefficient of" in f.message and "±" in f.message
    assert words is None or words in f.message


def test_metres_read_as_feet():
    (f,) = said([curve("head", read_as="ft")], "plausible-head-coefficient")
    assert "head in m" in f.message


def test_a_pressure_axis_offers_other_pressures():
    (f,) = said([curve("head", scale=10.0, printed_y_unit="bar")], "plausible-head-coefficient")
    assert "head in m" in f.message


def test_a_diameter_in_inches_is_suspected():
    (f,) = said([curve("head", 13.4, true=340.0)], "plausible-head-coefficient")
    assert "the diameter in in" in f.message


def test_somewhat_unusual_is_a_warning_only():
    (f,) = said([curve("head", scale=1.45)], "plausible-head-coefficient")
    assert f.severity == "warning"


@pytest.mark.parametrize("kind", ["side channel", "Axial flow", "regenerative"])
def test_other_wheels_are_left_alone(kind):
    assert said([curve("head", scale=4.0)], "plausible-head-coefficient", type=kind) == []


def test_a_curve_that_begins_far_from_zero_flow_is_not_carried_back():
    assert said([curve("head", scale=4.0, lo=120.0)], "plausible-head-coefficient") == []


def test_shut_off_head_is_found_from_the_lowest_flows():
    from curvebank.checks.coefficient import shut_off_head
    from curvebank.checks.context import series_of

    h0, u = shut_off_head(series_of(curve("head", lo=40.0), 1450.0), 0.35)
    assert h0 == pytest.approx(40.0, abs=0.05) and 0 < u < 0.6
