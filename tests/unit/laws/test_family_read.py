"""The read rules against an independent numpy implementation, published arithmetic and properties that must hold."""

import doctest
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from curvebank.errors import LawError, OutsideDomain
from curvebank.laws import family
from curvebank.laws.family import Line, plan

EXPONENTS = {"head": (1, 2), "power": (1, 3), "efficiency": (1, 0), "npshr": (0, 0)}


def line(plain, diameter=None, speed=1450.0, lo=0.0, hi=100.0, name="L", cov=None, sigma=0.1):
    """A line from plain powers of flow."""
    mid, half = (lo + hi) / 2, (hi - lo) / 2
    scaled = np.polynomial.Polynomial(plain)(np.polynomial.Polynomial([mid, half])).coef
    return Line(
        name, diameter, speed, lo, hi, mid, half, [float(c) for c in scaled], sigma, None if cov is None else np.asarray(cov).tobytes()
    )


def blend_by_numpy(quantity, flow, diameter, first, second):
    """Rule blend-1 straight from its formula, on plain powers: (D1, powers), (D2, powers)."""
    a, b = EXPONENTS[quantity]
    (d1, p1), (d2, p2) = first, second
    w = (diameter - d1) / (d2 - d1)
    r1, r2 = diameter / d1, diameter / d2
    v1 = np.polynomial.polynomial.polyval(flow / r1**a, p1)
    v2 = np.polynomial.polynomial.polyval(flow / r2**a, p2)
    return (1 - w) * r1**b * v1 + w * r2**b * v2


def horner(powers, x):
    """Plain powers, lowest first."""
    return np.polynomial.polynomial.polyval(x, powers)


powers = st.lists(st.floats(-1, 1), min_size=1, max_size=6).map(lambda cs: [40.0 + cs[0]] + [c / 50.0**k for k, c in enumerate(cs[1:], 1)])


@settings(max_examples=80, deadline=None)
@given(quantity=st.sampled_from(list(EXPONENTS)), p1=powers, p2=powers, share=st.floats(0.01, 0.99), at=st.floats(0, 1))
def test_blend_1_is_its_formula(quantity, p1, p2, share, at):
    """Any two neighbours, any diameter between, any flow of the overlap; scalars and arrays alike."""
    d1, d2 = 280.0, 320.0
    diameter = d1 + share * (d2 - d1)
    reading = plan(quantity, [line(p1, d1, hi=90.0, lo=5.0), line(p2, d2)], diameter, 1450.0)
    a = EXPONENTS[quantity][0]
    assert reading.lo == pytest.approx(max(5.0 * (diameter / d1) ** a, 0.0), abs=1e-12)
    assert reading.hi == pytest.approx(min(90.0 * (diameter / d1) ** a, 100.0 * (diameter / d2) ** a), rel=1e-12)
    flow = reading.lo + at * (reading.hi - reading.lo)
    want = blend_by_numpy(quantity, flow, diameter, (d1, p1), (d2, p2))
    assert reading.value(flow) == pytest.approx(want, rel=1e-11)
    assert reading.values(np.array([flow]))[0] == pytest.approx(want, rel=1e-11)
    assert reading.rule == "blend-1"


def test_traced_diameter_returns_its_own_line_to_the_bit():
    """No blending, no carrying, its own whole domain."""
    lines = [line((38.0, -0.04, -0.0015), 280.0, hi=90.0, name="small"), line((50.0, -0.05, -0.0015), 320.0, name="large")]
    for own in lines:
        reading = plan("head", lines, own.diameter_mm, 1450.0)
        assert (reading.lo, reading.hi, reading.curves) == (own.lo, own.hi, (own.curve,))
        for q in np.linspace(own.lo, own.hi, 7):
            t = float(q) * (1 / own.half) - own.mid / own.half
            v = own.scaled[-1]
            for c in own.scaled[-2::-1]:
                v = v * t + c
            assert reading.value(float(q)) == v


def test_blend_meets_the_traced_lines_at_its_ends():
    """Just beside a traced diameter the blend is that line: no step in the diameter."""
    lines = [line((38.0, -0.04, -0.0015), 280.0), line((50.0, -0.05, -0.0015), 320.0)]
    for diameter, own in ((math.nextafter(280.0, 300), lines[0]), (math.nextafter(320.0, 300), lines[1])):
        assert plan("head", lines, diameter, 1450.0).value(40.0) == pytest.approx(
            plan("head", [own], own.diameter_mm, 1450.0).value(40.0), rel=1e-12
        )


def test_neighbours_are_the_nearest_two():
    """With four diameters only the two around the one asked take part."""
    lines = [line((h,), d, name=str(d)) for d, h in ((260.0, 30.0), (280.0, 36.0), (300.0, 43.0), (320.0, 50.0))]
    assert plan("head", lines, 290.0, 1450.0).curves == ("280.0", "300.0")


def test_three_exact_affine_lines_blend_exactly():
    """Lines that are one affinity family (h_k' = h_k r^(2 - k), REFERENCES closed form) are reproduced at any diameter between."""
    base = (50.0, -0.05, -0.0015)
    at = {d: [h * (d / 350.0) ** (2 - k) for k, h in enumerate(base)] for d in (300.0, 325.0, 350.0, 310.0)}
    lines = [line(at[d], d, hi=100.0 * d / 350.0) for d in (300.0, 325.0, 350.0)]
    q = np.linspace(0, 80, 9)
    np.testing.assert_allclose(plan("head", lines, 310.0, 1450.0).values(q), horner(at[310.0], q), rtol=1e-12)


def test_trim_factors_of_a_single_line():
    """Trim 350 -> 300, simple law, Q = 100, H = 50, P = 20: 85.7142857, 36.7346939, 12.5947522 (arithmetic of the simple law)."""
    for quantity, value, want in (("head", 50.0, 36.7346939), ("power", 20.0, 12.5947522)):
        weight, factor = family.carried(line((value,), 350.0), quantity, 300.0, 1450.0)
        assert (100.0 / factor, value * weight) == pytest.approx((85.7142857, want), rel=1e-8)


def test_speed_laws():
    """3500 -> 1700 1/min: 400 gpm, 126 ft, 17.5 hp become 194.285714, 29.7257143, 2.00530612 (arithmetic of the affinity laws)."""
    head = plan("head", [line((126.0,), 300.0, 3500.0, hi=400.0)], 300.0, 1700.0)
    power = plan("power", [line((17.5,), 300.0, 3500.0, hi=400.0)], 300.0, 1700.0)
    assert head.hi == pytest.approx(194.285714, rel=1e-8)
    assert head.value(50.0) == pytest.approx(29.7257143, rel=1e-8)
    assert power.value(50.0) == pytest.approx(2.00530612, rel=1e-8)


def test_efficiency_keeps_its_value_with_speed():
    """Efficiency moves with the flow and keeps its height."""
    reading = plan("efficiency", [line((0.0, 0.0235, -0.000175), 320.0)], 320.0, 1160.0)
    r = 1160.0 / 1450.0
    assert reading.value(50.0 * r) == pytest.approx(0.0235 * 50 - 0.000175 * 2500, rel=1e-12)


def test_npshr_takes_the_higher_end_of_the_range():
    """n^2 speeding up, n^1.3 slowing down (ISO 9906:2012 names 1.3 to 2, from memory): never the optimistic one."""
    npshr = [line((3.0,), 320.0)]
    assert plan("npshr", npshr, 320.0, 1740.0).value(10.0) == pytest.approx(3.0 * 1.2**2)
    assert plan("npshr", npshr, 320.0, 1160.0).value(10.0) == pytest.approx(3.0 * 0.8**1.3)
    faster, slower = plan("npshr", npshr, 320.0, 1740.0), plan("npshr", npshr, 320.0, 1160.0)
    assert faster.uncertainty(10.0) > faster.terms[0][2].sigma * 1.2**2 and slower.uncertainty(10.0) > 0.1 * 0.8**1.3


@settings(max_examples=60, deadline=None)
@given(p=powers, n=st.floats(700, 3000), at=st.floats(0, 1), quantity=st.sampled_from(["head", "power", "efficiency"]))
def test_speed_there_and_back_is_the_identity(p, n, at, quantity):
    """Carry to another speed, make a line of the result, carry it back."""
    first = plan(quantity, [line(p, 320.0)], 320.0, n)
    weight, factor, own = first.terms[0]
    moved = Line("m", 320.0, n, first.lo, first.hi, own.mid / factor, own.half / factor, [weight * c for c in own.scaled])
    q = 100.0 * at
    assert plan(quantity, [moved], 320.0, 1450.0).value(q) == pytest.approx(horner(p, q), rel=1e-9)


def test_nearest_printed_speed_is_carried():
    """A family at two speeds: the nearer by ratio; a printed speed returns its own line."""
    lines = [line((20.0,), 300.0, 1450.0, name="slow"), line((81.0,), 300.0, 2900.0, hi=200.0, name="fast")]
    assert plan("head", lines, 300.0, 2900.0).value(50.0) == 81.0
    assert plan("head", lines, 300.0, 1500.0).curves == ("slow",)
    assert plan("head", lines, 300.0, 2500.0).value(50.0) == pytest.approx(81.0 * (2500 / 2900) ** 2)


def test_speed_whose_diameters_reach_comes_first():
    """Ø 310 is only within the 1450 family, so that family answers at 2900 too."""
    lines = [line((40.0,), 280.0), line((50.0,), 320.0), line((150.0,), 260.0, 2900.0, hi=200.0), line((180.0,), 300.0, 2900.0, hi=200.0)]
    assert {li.speed_rpm for _, _, li in plan("head", lines, 310.0, 2900.0).terms} == {1450.0}


def test_line_without_diameter_is_read_at_equal_flow_for_all():
    """No carrying by diameter; but only within the pump's traced diameters."""
    lines = [line((2.0, 0.0, 0.0003), None)]
    for d in (280.0, 301.0, 320.0):
        assert plan("npshr", lines, d, 1450.0, span=(280.0, 320.0)).value(50.0) == pytest.approx(2.75)
    with pytest.raises(OutsideDomain, match="280 to 320 mm"):
        plan("npshr", lines, 200.0, 1450.0, span=(280.0, 320.0))


def test_borrowed_npshr_is_at_equal_flow_with_a_caution_and_a_wider_band():
    """Printed at the largest diameter alone."""
    lines = [line((2.0, 0.0, 0.0003), 320.0)]
    own, other = (plan("npshr", lines, d, 1450.0, span=(280.0, 320.0)) for d in (320.0, 290.0))
    assert other.value(50.0) == own.value(50.0) and (other.lo, other.hi) == (own.lo, own.hi)
    assert own.notes == () and "Ø 320 alone" in other.notes[0]
    assert other.uncertainty(50.0) > own.uncertainty(50.0)


def test_borrowed_efficiency_steps_down_with_the_trim():
    """Equal relative flow; 10 % of trim costs the peak 2 points and no flow nothing."""
    lines = [line((0.0, 0.0235, -0.000175), 320.0, sigma=0.004)]
    own, other = (plan("efficiency", lines, d, 1450.0, span=(280.0, 320.0)) for d in (320.0, 288.0))
    assert other.value(0.9 * 67.142857142857) == pytest.approx(0.788928571428571 - 0.02, rel=1e-12)
    assert other.value(0.0) == pytest.approx(0.0, abs=1e-12)
    assert other.uncertainty(54.0) > own.uncertainty(60.0) and "borrowed" in other.notes[0]


def test_borrowed_power_follows_the_cube():
    """P ~ r^3 at Q ~ r, with a band as wide as the published exponents."""
    lines = [line((6.0, 0.08), 320.0)]
    own, other = (plan("power", lines, d, 1450.0, span=(280.0, 320.0)) for d in (320.0, 288.0))
    assert other.value(45.0) == pytest.approx(own.value(50.0) * 0.9**3, rel=1e-12)
    assert other.uncertainty(45.0) > own.uncertainty(50.0) * 0.9**3


def test_head_is_never_borrowed():
    """One head line: another diameter is an error that names the one there is."""
    with pytest.raises(OutsideDomain, match="320 mm"):
        plan("head", [line((50.0,), 320.0)], 300.0, 1450.0, span=(280.0, 320.0))


def test_diameter_outside_names_the_range():
    """Neither above nor below."""
    lines = [line((38.0,), 280.0), line((50.0,), 320.0)]
    for d in (279.9, 320.1):
        with pytest.raises(OutsideDomain, match="280 to 320 mm"):
            plan("head", lines, d, 1450.0)


def test_neighbours_without_common_flow_are_refused():
    """The domain is the overlap of the carried domains."""
    lines = [line((38.0,), 280.0, lo=0.0, hi=20.0), line((50.0,), 320.0, lo=60.0, hi=100.0)]
    with pytest.raises(OutsideDomain, match="share no flow"):
        plan("head", lines, 300.0, 1450.0)


@pytest.mark.parametrize("bad", [0.0, -5.0, float("nan"), float("inf")])
def test_impossible_diameter_or_speed(bad):
    """The value and its unit are in the message."""
    with pytest.raises(LawError, match="mm"):
        plan("head", [line((50.0,), 320.0)], bad, 1450.0)
    with pytest.raises(LawError, match="1/min"):
        plan("head", [line((50.0,), 320.0)], 320.0, bad)


def test_electrical_quantities_are_not_carried_to_another_speed():
    """The motor follows no pump law."""
    with pytest.raises(LawError, match="printed speed"):
        plan("input_power", [line((10.0,), 320.0)], 320.0, 1400.0)


def test_unknown_rule_is_refused():
    """A pinned number is never read by another rule than its own."""
    with pytest.raises(LawError, match="blend-9"):
        plan("head", [line((50.0,), 320.0)], 320.0, 1450.0, rule="blend-9")


def test_of_two_lines_at_one_diameter_the_surer_is_read():
    """Two sheets with the same curve."""
    lines = [line((50.0,), 320.0, name="rough", sigma=0.5), line((51.0,), 320.0, name="fine", sigma=0.1)]
    assert plan("head", lines, 320.0, 1450.0).curves == ("fine",)


def test_uncertainty_is_the_quadratic_form_of_the_covariance():
    """sqrt(phi V phi') (JCGM 100 eq. 13) against numpy, scalar and array."""
    rng = np.random.default_rng(7)
    root = rng.normal(size=(4, 4))
    cov = root @ root.T * 1e-3
    own = line((50.0, -0.05, -0.0015, 1e-6), 320.0, cov=cov)
    q = np.linspace(0, 100, 11)
    phi = np.polynomial.polynomial.polyvander((q - own.mid) / own.half, 3)
    want = np.sqrt(np.einsum("ij,jk,ik->i", phi, cov, phi))
    np.testing.assert_allclose(own.uncertainty(q), want, rtol=1e-9)
    assert [own.uncertainty(float(x)) for x in q] == pytest.approx(want, rel=1e-9)


def test_uncertainty_grows_between_the_traced_diameters():
    """No more than the lines' own at the ends, more in the middle where the two carried lines differ."""
    lines = [line((36.0,), 280.0, sigma=0.1), line((50.0,), 320.0, sigma=0.1)]
    u = [plan("head", lines, d, 1450.0).uncertainty(40.0) for d in (280.0, 290.0, 300.0, 310.0, 320.0)]
    assert u[0] == u[4] == 0.1 and u[2] == max(u) and u[2] > 0.1


def test_far_speeds_are_cautioned_and_widened():
    """Outside 50 to 120 % of the printed speed (ISO 9906:2012 test speeds, from memory)."""
    lines = [line((50.0,), 320.0)]
    near, far = plan("head", lines, 320.0, 1740.0), plan("head", lines, 320.0, 2900.0)
    assert near.notes == () and "50 to 120 %" in far.notes[0]
    assert far.uncertainty(40.0) / far.value(40.0) > near.uncertainty(40.0) / near.value(40.0)


def test_beyond_is_the_tangent_for_a_tenth_and_no_further():
    """Never the raw polynomial: a cubic that turns up beyond its domain continues straight."""
    cubic = (50.0, -0.05, -0.004, 3e-5)
    reading = plan("head", [line(cubic, 320.0)], 320.0, 1450.0)
    slope = -0.05 - 0.008 * 100 + 9e-5 * 100**2
    value, u = reading.beyond(108.0)
    assert value == pytest.approx(horner(cubic, 100.0) + 8 * slope, rel=1e-9)
    assert abs(value - horner(cubic, 108.0)) > 0.05
    assert u > reading.beyond(104.0)[1] > reading.uncertainty(100.0)
    assert reading.beyond(-5.0)[0] == pytest.approx(50.0 + 0.25, rel=1e-9)
    for q in (110.1, -10.1, float("inf")):
        with pytest.raises(OutsideDomain, match="10 %"):
            reading.beyond(q)


def test_slope_and_bend_are_derivatives():
    """Against the derivative of the plain powers, through carrying and blending."""
    p1, p2 = (38.0, -0.04, -0.0015), (50.0, -0.05, -0.0015)
    reading = plan("head", [line(p1, 280.0), line(p2, 320.0)], 305.0, 1500.0)
    step = 1e-3
    middle = (reading.value(40 + step) - reading.value(40 - step)) / (2 * step)
    assert reading.slope(40.0) == pytest.approx(middle, rel=1e-7)
    assert reading.bend(40.0) == pytest.approx((reading.slope(40 + step) - reading.slope(40 - step)) / (2 * step), rel=1e-6)


def test_large_arrays_in_blocks_equal_the_scalar():
    """More than one block, odd length, two terms."""
    lines = [line((38.0, -0.04, -0.0015), 280.0), line((50.0, -0.05, -0.0015), 320.0)]
    reading = plan("head", lines, 305.0, 1450.0)
    q = np.linspace(reading.lo, reading.hi, 2 * family.BLOCK + 17)
    got = reading.values(q)
    assert [got[i] for i in (0, family.BLOCK, q.size - 1)] == pytest.approx(
        [reading.value(float(q[i])) for i in (0, family.BLOCK, q.size - 1)]
    )


def test_examples_in_the_docstrings():
    """They run as printed."""
    assert doctest.testmod(family).failed == 0
