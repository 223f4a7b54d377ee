"""Duty, trim and search against closed forms and an independent solver."""

import math

import bank_samples as make
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from curvebank.bank.duty import all_roots, bisect
from curvebank.bank.store import Store
from curvebank.errors import BankError, LawError, OutsideDomain


def horner(powers, q):
    """Plain powers, lowest first."""
    return np.polynomial.polynomial.polyval(q, powers)


def one_curve(store, powers, diameter=350.0, hi=100.0, speed=1450.0, key=make.KEY, **more):
    """A released pump with one head line."""
    make.save(store, make.digitised([make.curve("H", "head", powers, diameter, hi=hi, speed=speed)], key=key, **more), release=True)
    return store.pump(key)


def test_duty_of_quadratics(store):
    """H = 50 - 10000 Q^2 against 20 + 5000 Q^2 (m3/s): Q = sqrt(30/15000) = 160.996894 m3/h, H = 30 (exact)."""
    pump = one_curve(store, (50.0, 0.0, -10000.0 / 3600**2), hi=220.0)
    (duty,) = pump.duty(static_head_m=20, friction_m_per_m3h2=5000.0 / 3600**2)
    assert (duty.flow_m3h, duty.head_m) == pytest.approx((3600 * math.sqrt(30 / 15000), 40 - 10), rel=1e-9)
    assert duty.stable and duty.efficiency is None and duty.npshr_m is None and duty.power_kw is None


def test_duty_at_another_speed(store):
    """The same pump at 0.9 of the speed: Q = 0.0369684550 m3/s, H = 26.8333333 m (exact)."""
    pump = one_curve(store, (50.0, 0.0, -10000.0 / 3600**2), hi=220.0)
    (duty,) = pump.duty(20, 5000.0 / 3600**2, 350, 0.9 * 1450)
    assert (duty.flow_m3h / 3600, duty.head_m) == pytest.approx((0.0369684550, 26.8333333), rel=1e-8)


def test_drooping_curve_meets_the_system_twice(store):
    """H = 30 + 0.05 Q - 0.001 Q^2 is 30 at Q = 0 and 50 (textbook droop): at 30.5 m static two flows, the lower not stable."""
    pump = one_curve(store, (30.0, 0.05, -0.001))
    low, high = pump.duty(30.5, 0.0)
    want = sorted(np.roots([-0.001, 0.05, -0.5]))
    assert (low.flow_m3h, high.flow_m3h) == pytest.approx(want, rel=1e-9)
    assert (low.stable, high.stable) == (False, True)
    assert any("not stable" in c for c in low.cautions) and any("2 flows" in c for c in high.cautions)


def test_touching_curves_are_one_duty_and_not_stable(store):
    """Static head equal to the top of the droop, 30.625 m at 25 m3/h."""
    pump = one_curve(store, (30.0, 0.05, -0.001))
    (duty,) = pump.duty(30.625, 0.0)
    assert duty.flow_m3h == pytest.approx(25.0, abs=1e-3) and duty.stable is False


@settings(max_examples=60, deadline=None)
@given(
    h1=st.floats(-0.2, 0.2),
    h2=st.floats(-0.01, -0.001),
    h3=st.floats(-5e-5, 5e-5),
    static=st.floats(-5, 60),
    k=st.floats(0, 5e-3),
    e=st.floats(1, 2.5),
)
def test_every_duty_lies_on_both_curves_and_none_is_missed(h1, h2, h3, static, k, e):
    """Against brentq on a fine grid of sign changes."""
    powers = (40.0, h1, h2, h3)

    def gap(q):
        return float(horner(powers, q)) - static - k * q**e

    def slope(q):
        return h1 + 2 * h2 * q + 3 * h3 * q * q - k * e * q ** (e - 1)

    roots = all_roots(gap, slope, 0.0, 100.0, 60.0)
    assert all(abs(gap(q)) < 1e-7 for q in roots)
    grid = np.linspace(0, 100, 4001)
    signs = [gap(q) for q in grid]
    found = [brentq(gap, a, b) for a, b, s, t in zip(grid, grid[1:], signs, signs[1:], strict=False) if s * t < 0]
    for q in found:
        assert min(abs(q - r) for r in roots) < 1e-6
    assert len(roots) <= len(found) + 2


def test_no_duty_is_an_error_that_says_on_which_side(store):
    """Never an empty list, never an extrapolated point."""
    pump = one_curve(store, (50.0, -0.05, -0.0015))
    with pytest.raises(OutsideDomain, match="still gives 30 m more") as over:
        pump.duty(0.0, 0.0)
    with pytest.raises(OutsideDomain, match="10 m short") as short:
        pump.duty(60.0, 1e-3)
    assert over.value.code == short.value.code == "no-duty"


@pytest.mark.parametrize("system", [(float("nan"), 1e-3), (20.0, -1e-3), (20.0, float("inf"))])
def test_impossible_systems(store, system):
    """A system has finite numbers and friction of 0 or more."""
    with pytest.raises(LawError):
        one_curve(store, (50.0,)).duty(*system)
    with pytest.raises(LawError, match="exponent"):
        store.pump(make.KEY).duty(20.0, 1e-3, exponent=0.0)


def test_duty_tells_what_is_known(pump):
    """Efficiency and power at the duty; NPSHr is not on the paper and a caution says so."""
    (duty,) = pump.duty(static_head_m=12, friction_m_per_m3h2=4e-3, diameter_mm=311)
    assert duty.head_m == pytest.approx(12 + 4e-3 * duty.flow_m3h**2, rel=1e-10)
    assert duty.head_m == pump.head(duty.flow_m3h, 311) and duty.power_kw == pump.power(duty.flow_m3h, 311)
    assert duty.npshr_m is None and any(c.startswith("NPSH required is not on the paper") for c in duty.cautions)
    assert any("Efficiency is printed for Ø 320 alone" in c for c in duty.cautions)
    assert duty.cautions[-1].endswith("local codes and a licensed engineer decide.")
    dense = pump.duty(12, 4e-3, 311, density_kgm3=1100.0)[0]
    assert dense.power_kw == pytest.approx(duty.power_kw * 1100 / 998.2) and any("denser" in c for c in dense.cautions)


def test_speeding_up_cautions_overpressure(pump):
    """Head against a closed valve, by the square of the speed."""
    duty = pump.duty(20, 2e-3, 320, 1740)[0]
    assert any("72 m at 1740 1/min" in c and "pressure rating" in c for c in duty.cautions)
    assert not any("closed valve" in c for c in pump.duty(20, 2e-3, 320, 1450)[0].cautions)


def test_power_that_still_rises_cautions_the_motor(pump):
    """The power line climbs to its end: 6 + 7.5 - 1 = 12.5 kW."""
    assert any(c.startswith("Power still rises where the line ends, at 12.5 kW") for c in pump.cautions)


def test_non_overloading_power_has_no_such_caution(store):
    """An interior maximum."""
    curves = [make.curve("H", "head", make.HEAD_320, 320.0), make.curve("P", "power", (6.0, 0.2, -0.002), 320.0)]
    make.save(store, make.digitised(curves), release=True)
    assert not any("still rises" in c for c in store.pump(make.KEY).cautions)


def test_far_from_best_efficiency_is_said(pump):
    """BEP at 67 m3/h; a duty at 30 m3/h is 45 % of it."""
    duty = pump.duty(40, 6e-3, 320)[0]
    assert any("% of best-efficiency flow" in c for c in duty.cautions)
    near = pump.duty(10, 5e-3, 320)[0]
    assert 0.7 < near.flow_m3h / 67.14 < 1.2 and not any("best-efficiency" in c for c in near.cautions)


def test_best_efficiency_point(pump):
    """eta = aQ + bQ^2: Q = -a/2b = 67.142857 m3/h, eta = 0.788928571 (exact)."""
    best = pump.bep()
    assert (best.flow_m3h, best.efficiency) == pytest.approx((67.142857142857, 0.788928571428571), rel=1e-9)
    assert best.head_m == pytest.approx(horner(make.HEAD_320, best.flow_m3h)) and best.stable is None


def test_best_point_beyond_the_curve_is_said(store):
    """Efficiency still rises where its line ends."""
    curves = [make.curve("H", "head", make.HEAD_320, 320.0), make.curve("E", "efficiency", make.EFFICIENCY, 320.0, hi=50.0)]
    make.save(store, make.digitised(curves), release=True)
    best = store.pump(make.KEY).bep()
    assert best.flow_m3h == pytest.approx(50.0) and "beyond the curve" in best.cautions[0]


@pytest.mark.parametrize(("powers", "diameter"), [((50.0, -0.05, -0.0015), 315.0), ((50.0, 0.0, -0.002), 312.2659123)])
def test_trim_by_the_simple_law(store, powers, diameter):
    """Duty 70 m3/h at 30 m from D = 350: r = 0.9 exactly, and sqrt((30 + 0.002 x 70^2)/50) (derived in closed form)."""
    trim = one_curve(store, powers).trim_for(flow_m3h=70, head_m=30)
    assert trim.diameter_mm == pytest.approx(diameter, rel=1e-8) == trim.methods["simple law"]
    assert any("simple law alone" in c for c in trim.cautions)


@settings(max_examples=40, deadline=None)
@given(diameter=st.floats(280, 320), share=st.floats(0, 1))
def test_trim_inverts_head(trim_pump, diameter, share):
    """trim_for(Q, head(Q, D)) is D, over the whole traced range."""
    lo, hi = trim_pump.head.domain(diameter)
    q = lo + share * (hi - lo)
    assert trim_pump.trim_for(q, trim_pump.head(q, diameter)).diameter_mm == pytest.approx(diameter, rel=1e-7)


@pytest.fixture(scope="module")
def trim_pump(tmp_path_factory):
    """Four diameters with different ends."""
    curves = [make.curve(f"H-{d:g}", "head", (h, -0.04, -0.0015), d, lo=lo, hi=hi) for d, h, lo, hi in FAMILY]
    with Store.open(tmp_path_factory.mktemp("trim") / "bank.db") as store:
        make.save(store, make.digitised(curves), release=True)
        return store.pump(make.KEY)


FAMILY = ((280.0, 38.0, 0.0, 85.0), (295.0, 42.0, 2.0, 90.0), (310.0, 46.5, 0.0, 95.0), (320.0, 50.0, 4.0, 101.0))


def test_trim_at_a_traced_diameter_is_that_diameter(pump):
    """Not its neighbour by one rounding."""
    for d in (280.0, 320.0):
        assert pump.trim_for(60.0, pump.head(60.0, d)).diameter_mm == d


def test_trim_shows_its_methods_and_their_spread(pump):
    """The bank's rule, the simple law from the largest; the caution names the largest, rounded up."""
    trim = pump.trim_for(60, 33)
    assert set(trim.methods) == {"blend-1", "simple law"} and trim.diameter_mm == trim.methods["blend-1"]
    assert pump.head(60, trim.diameter_mm) == pytest.approx(33, rel=1e-9)
    r = trim.methods["simple law"] / 320
    assert r * r * horner(make.HEAD_320, 60 / r) == pytest.approx(33, rel=1e-9)
    assert f"rounded up to {math.ceil(max(trim.methods.values()))} mm" in trim.cautions[0] and "cut in steps" in trim.cautions[0]


def test_trim_out_of_reach_says_which_way(pump):
    """Too much, too little, too far."""
    with pytest.raises(OutsideDomain, match="largest head of LARK-WM-150 is 41.6 m"):
        pump.trim_for(60, 45)
    with pytest.raises(OutsideDomain, match="need a smaller wheel"):
        pump.trim_for(60, 20)
    with pytest.raises(OutsideDomain, match="reaches 150 m³/h"):
        pump.trim_for(150, 20)
    with pytest.raises(LawError, match="not possible"):
        pump.trim_for(60, float("nan"))


def test_find_ranks_by_efficiency(store):
    """Two pumps that can, one that cannot, one not released, one with too much NPSHr."""

    def fill(key, shift, *, release=True, npsh=2.0):
        curves = [
            make.curve("H-320", "head", (50.0 + shift, -0.05, -0.0015), 320.0),
            make.curve("H-280", "head", (38.0 + shift, -0.05, -0.0015), 280.0),
            make.curve("E-320", "efficiency", [c * (1 - shift / 100) for c in make.EFFICIENCY], 320.0),
            make.curve("N", "npshr", (npsh, 0.0, 0.0003), None, applies_to="all"),
        ]
        make.save(store, make.digitised(curves, key=key), release=release)

    fill("A-1", 2.0)
    fill("B-1", 0.0)
    fill("C-1", 60.0)
    fill("D-1", 1.0, release=False)
    fill("E-1", 1.0, npsh=9.0)
    hits = store.find(flow_m3h=60, head_m=33, npsha_m=6.0)
    assert [h.key for h in hits] == ["B-1", "A-1"] and hits[0].efficiency > hits[1].efficiency
    for hit in hits:
        assert store.pump(hit.key).head(60, hit.diameter_mm, hit.speed_rpm) == pytest.approx(33, rel=1e-9)
        assert hit.speed_rpm == 1450.0 and hit.cautions
    assert [h.key for h in store.find(flow_m3h=60, head_m=33)] == ["B-1", "E-1", "A-1"]
    assert len(store.find(flow_m3h=60, head_m=33, limit=1)) == 1
    assert store.find(flow_m3h=400, head_m=33) == []
    with pytest.raises((LawError, BankError)):
        store.find(flow_m3h=-1, head_m=33)


def test_find_keeps_pumps_of_unknown_npshr_with_a_caution(pump, released):
    """Not known is not the same as not enough."""
    (hit,) = released.find(flow_m3h=60, head_m=33, npsha_m=6.0)
    assert any("whether 6 m is enough is not known" in c for c in hit.cautions)


def test_find_equals_an_exhaustive_search(store):
    """Random pumps and duties: the same keys as trying every pump by brentq on the blend."""
    rng = np.random.default_rng(3)
    family = {}
    for i in range(12):
        h, hi = rng.uniform(20, 60), rng.uniform(60, 140)
        small, large = rng.uniform(250, 290), rng.uniform(300, 340)
        r = small / large
        at = {large: (h, -0.05, -0.001), small: (h * r * r, -0.05 * r, -0.001)}
        curves = [make.curve(f"H-{d:.0f}", "head", p, d, hi=hi * d / large) for d, p in at.items()]
        make.save(store, make.digitised(curves, key=f"P-{i}"), release=True)
        family[f"P-{i}"] = (small, large, at, hi)
    hits = 0
    for _ in range(40):
        q, wanted = rng.uniform(10, 140), rng.uniform(10, 60)
        expected = set()
        for key, (small, large, at, hi) in family.items():

            def gap(d, small=small, large=large, at=at, q=q, wanted=wanted):
                w = (d - small) / (large - small)
                r1, r2 = d / small, d / large
                return (1 - w) * r1**2 * horner(at[small], q / r1) + w * r2**2 * horner(at[large], q / r2) - wanted

            low = max(small, q / hi * large)
            if low <= large and gap(low) <= 0 <= gap(large):
                expected.add(key)
        found = {h.key for h in store.find(flow_m3h=q, head_m=wanted, limit=100)}
        assert found == expected
        hits += len(found)
    assert hits > 20


def test_bisect_reaches_the_last_bits():
    """sqrt(2)."""
    assert bisect(lambda x: x * x - 2, 1.0, 2.0) == pytest.approx(math.sqrt(2), rel=1e-15)
