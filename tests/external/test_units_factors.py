"""Every conversion factor against pint's registry, and the exact ones against their definitions."""

from fractions import Fraction

import pint
import pytest

from curvebank import units

REGISTRY = pint.UnitRegistry()
PINT = {
    "m3/h": "m**3/hour",
    "m3/s": "m**3/s",
    "m3/min": "m**3/min",
    "m3/d": "m**3/day",
    "l/s": "l/s",
    "l/min": "l/min",
    "Ml/d": "megaliter/day",
    "gal/min(US)": "gallon/min",
    "gal/min(imp)": "imperial_gallon/min",
    "Mgal/d(US)": "1e6 gallon/day",
    "Mgal/d(imp)": "1e6 imperial_gallon/day",
    "ft3/s": "ft**3/s",
    "ft3/min": "ft**3/min",
    "m": "m",
    "ft": "ft",
    "kW": "kW",
    "W": "W",
    "hp": "ft * lbf / s * 550",
    "hp(metric)": "metric_horsepower",
    "%": "0.01",
    "1": "1",
    "mm": "mm",
    "in": "inch",
    "1/min": "1/min",
    "bar": "bar",
    "kPa": "kPa",
    "psi": "psi",
    "kgf/cm2": "kgf/cm**2",
}
SAME = [(q, u) for q, table in units.QUANTITIES.items() for u in table]


@pytest.mark.parametrize(("quantity", "unit"), SAME)
def test_factor_agrees_with_pint(quantity, unit):
    """pint's own definitions, an independent source of every factor."""
    want = REGISTRY.Quantity(f"1 * {PINT[unit]}").to(PINT[units.CANONICAL[quantity]]).magnitude
    assert units.factor(quantity, unit) == pytest.approx(float(want), rel=1e-14)


@pytest.mark.parametrize("unit", list(units.PRESSURE_PA))
def test_pressure_agrees_with_pint(unit):
    assert pytest.approx(REGISTRY.Quantity(1.0, PINT[unit]).to("Pa").magnitude, rel=1e-14) == units.PRESSURE_PA[unit]


def test_gallons_a_minute_are_exact():
    """231 in3 and 4.54609 l by definition, as exact fractions: 0.22712470704 and 0.2727654 m3/h."""
    us = Fraction(231) * Fraction(254, 10000) ** 3 * 60
    imperial = Fraction(454609, 100000000) * 60
    assert units.factor("flow", "gal/min(US)") == pytest.approx(float(us), rel=1e-15)
    assert units.factor("flow", "gal/min(imp)") == pytest.approx(float(imperial), rel=1e-15)
    assert (float(us), float(imperial)) == pytest.approx((0.22712470704, 0.2727654), rel=1e-15)


def test_psi_and_horsepower_are_exact():
    """lbf from 0.45359237 kg and 9.80665 m/s2 (NIST SP 811, appendix B): 6894.757293168361 Pa, 745.6998715822702 W, 735.49875 W."""
    pound_force = Fraction(45359237, 100000000) * Fraction(980665, 100000)
    psi = pound_force / Fraction(254, 10000) ** 2
    hp = 550 * Fraction(3048, 10000) * pound_force
    assert pytest.approx(float(psi), rel=1e-14) == units.PSI_PA
    assert pytest.approx(float(hp), rel=1e-14) == units.HORSEPOWER_W
    assert (units.PSI_PA, units.HORSEPOWER_W, units.HORSEPOWER_METRIC_W) == pytest.approx(
        (6894.757293168361, 745.6998715822702, 735.49875), rel=1e-14
    )


def test_us_and_imperial_gallon_differ_by_1_2009():
    """Ratio of the two definitions, as printed scales on one axis show it."""
    assert units.factor("flow", "gal/min(imp)") / units.factor("flow", "gal/min(US)") == pytest.approx(1.20095, abs=5e-6)


def test_pressure_as_head_needs_its_density():
    """p = rho g H: 10 m of 1000 kg/m3 is 98.0665 kPa (fluids `head_from_P` gives 10.000000000000002)."""
    assert units.to_canonical(98.0665, "head", "kPa", density_kgm3=1000.0) == pytest.approx(10.0, rel=1e-14)
    with pytest.raises(units.UnitError, match="needs the density"):
        units.factor("head", "kPa")


def test_shop_rules_of_thumb():
    """Ratios that betray a wrong unit: 3.6, 4.403, 3.281, 2.31 ft a psi, 10.2 m a bar, 1.341 hp a kW (exact by definition)."""
    f = units.factor
    assert f("flow", "l/s") == pytest.approx(3.6, rel=1e-15)
    assert 1 / f("flow", "gal/min(US)") == pytest.approx(4.403, abs=5e-4)
    assert 1 / f("head", "ft") == pytest.approx(3.281, abs=5e-4)
    assert f("head", "psi", density_kgm3=998.2) / f("head", "ft") == pytest.approx(2.31, abs=5e-3)
    assert f("head", "bar", density_kgm3=1000.0) == pytest.approx(10.2, abs=5e-3)
    assert 1 / f("power", "hp") == pytest.approx(1.341, abs=5e-4)
