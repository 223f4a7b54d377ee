"""Power, specific speed, NPSHr and system curves against library values, exact arithmetic and a textbook."""

import math

import fluids.pump
import numpy as np
import pytest

from curvebank.errors import LawError
from curvebank.laws import power, specific, suction, system
from curvebank.units import factor


def test_hydraulic_and_shaft_power():
    """rho g Q H by arithmetic: 100 m3/h, 32 m, 998.2 kg/m3, g = 9.80665; eta = 0.78."""
    assert power.hydraulic_power_kw(100.0, 32.0, density_kgm3=998.2) == pytest.approx(8.701331582, rel=1e-9)
    assert power.shaft_power_kw(100.0, 32.0, 0.78, density_kgm3=998.2) == pytest.approx(11.155553311, rel=1e-9)


def test_the_printed_constants_of_power_formulas():
    """kW = Q H SG / 367.0978 and hp = gpm ft SG / 3954.27 at 1000 kg/m3 (exact units). Print says 3960: 0.2 % allowed."""
    kw = float(power.hydraulic_power_kw(1.0, 1.0, density_kgm3=1000.0))
    assert 1 / kw == pytest.approx(367.0978, abs=5e-5)
    hp = float(power.hydraulic_power_kw(factor("flow", "gal/min(US)"), factor("head", "ft"), density_kgm3=1000.0)) / factor("power", "hp")
    assert 1 / hp == pytest.approx(3954.272, abs=5e-4)
    assert 1 / hp == pytest.approx(3960, rel=2e-3)


def test_efficiency_with_uncertain_inputs():
    """Q = 100, H = 32, P = 11.2: 0.7769046 (computed with the uncertainties library)."""
    assert power.efficiency_of(100.0, 32.0, 11.2) == pytest.approx(0.7769046, abs=5e-8)


def test_power_at_zero_flow_has_a_finite_limit():
    """H = 50 - 0.002 Q^2, eta = 0.0156 Q - 7.8e-5 Q^2; values in kW by closed form."""
    assert power.shut_off_power_kw(50.0, 0.0156) == pytest.approx(8.715276, abs=5e-7)
    q = np.array([40.0, 80.0, 100.0])
    p = power.shaft_power_kw(q, 50 - 0.002 * q**2, 0.0156 * q - 7.8e-5 * q**2)
    assert p == pytest.approx([10.196873, 10.806942, 10.458331], abs=5e-7)
    with pytest.raises(LawError, match="shut_off_power_kw"):
        power.shaft_power_kw(0.0, 50.0, 0.0)


@pytest.mark.parametrize(("q", "h", "n", "nq"), [(0.0402, 100.0, 3550.0, 22.50823182748925), (0.05, 32.0, 1450.0, 24.098528283031982)])
def test_specific_speed_agrees_with_fluids(q, h, n, nq):
    """fluids 1.3.1 `specific_speed`; the first is its docstring example, credited to HI 1.3."""
    assert specific.specific_speed(q * 3600, h, n) == pytest.approx(nq, rel=1e-12)
    assert specific.specific_speed(q * 3600, h, n) == pytest.approx(fluids.pump.specific_speed(q, h, n), rel=1e-12)


def test_conversions_between_forms_of_specific_speed():
    """Exact from units: Ns(US) = 51.64523790 nq, nq = 52.91903166 K; and at 100 m3/h, 32 m, 1450 1/min."""
    assert specific.US_PER_METRIC == pytest.approx(51.64523790, rel=1e-9)
    assert specific.METRIC_PER_TYPE_NUMBER == pytest.approx(52.91903166, rel=1e-9)
    values = [float(specific.specific_speed(100.0, 32.0, 1450.0, form=f)) for f in ("metric", "us", "type")]
    assert values == pytest.approx([17.961982467, 927.650858, 0.339423869], rel=1e-8)


def test_type_number_from_its_own_definition():
    """K = omega sqrt(Q) / (g H)^0.75 with omega = 2 pi n / 60 (ISO 9906, from memory)."""
    k = 2 * math.pi * 1450 / 60 * math.sqrt(100 / 3600) / (9.80665 * 32) ** 0.75
    assert specific.specific_speed(100.0, 32.0, 1450.0, form="type") == pytest.approx(k, rel=1e-12)


def test_head_counts_per_stage():
    assert specific.specific_speed(100.0, 96.0, 1450.0, stages=3) == pytest.approx(17.961982467, rel=1e-9)
    assert specific.head_coefficient(108.0, 320.0, 1450.0, stages=3) == pytest.approx(float(specific.head_coefficient(36.0, 320.0, 1450.0)))


def test_head_coefficient_of_the_homologous_textbook_pump():
    """White, Fluid Mechanics ch. 11 (from memory): C_H = g H / (n D)^2 = 5, n in r/s, so psi = 5 / pi^2."""
    psi = specific.head_coefficient(297.21 * 0.3048, 21 * 25.4, 25 * 60)
    assert psi == pytest.approx(5 / math.pi**2, rel=2e-3)  # the book's g = 32.2 ft/s2 is 0.08 % off standard gravity


def test_npshr_exponent_takes_the_cautious_end():
    """ISO 9906:2012 cl. 6 (from memory): exponent 2 as first approximation, between 1.3 and 2."""
    assert suction.npshr_at_speed(4.0, 1.2) == pytest.approx(4 * 1.2**2)
    assert suction.npshr_at_speed(4.0, 0.8) == pytest.approx(4 * 0.8**1.3)
    assert suction.npshr_at_speed(4.0, 0.8) > suction.npshr_at_speed(4.0, 0.8, exponent=2.0)
    with pytest.raises(LawError, match="between 1.3 and 2.0"):
        suction.npshr_at_speed(4.0, 0.8, exponent=1.0)


def test_duty_points_of_quadratics_are_exact():
    """H = 50 - 10000 Q^2 (m3/s), system 20 + 5000 Q^2: Q = sqrt(30 / 15000) m3/s = 160.996894 m3/h, H = 30 (closed form)."""
    k = 3600.0**2
    (m,) = system.meetings([50.0, 0.0, -10000 / k], (0.0, 250.0), 20.0, 5000 / k)
    assert (m.flow_m3h, m.head_m) == pytest.approx((160.996894, 30.0), rel=1e-8)
    assert m.stable


def test_textbook_matching_of_pump_and_system():
    """White ch. 11 (from memory, book rounds to 24 900 gal/min): 490 - 0.26 Q^2 on 120 + 0.335 Q^2, Q in 1000 gal/min."""
    (m,) = system.meetings([490.0, 0.0, -0.26], (0.0, 40.0), 120.0, 0.335)
    assert (m.flow_m3h, m.head_m) == pytest.approx((24.936895, 328.319), rel=1e-6)


def test_a_drooping_curve_meets_a_flat_system_twice():
    """H = 30 + 0.05 Q - 0.001 Q^2 is 30 at Q = 0 and Q = 50, with its top of 30.625 at 25 (closed form)."""
    first, second = system.meetings([30.0, 0.05, -0.001], (0.0, 100.0), 30.3, 0.0)
    root = math.sqrt(0.05**2 - 4 * 0.001 * 0.3)
    assert first.flow_m3h == pytest.approx((0.05 - root) / 0.002, rel=1e-10)
    assert second.flow_m3h == pytest.approx((0.05 + root) / 0.002, rel=1e-10)
    assert (first.stable, second.stable) == (False, True)


def test_a_system_that_is_never_met_is_an_answer():
    assert system.meetings([30.0, 0.0, -0.001], (0.0, 100.0), 40.0, 0.0) == []
