"""Reading numbers: values, domains, outside, uncertainty, detail, pins and moments."""

import math
import warnings
from decimal import Decimal
from fractions import Fraction

import bank_samples as make
import numpy as np
import pytest

import curvebank
from curvebank.bank import chain
from curvebank.bank.reader import Bank
from curvebank.errors import BankError, ExtrapolationWarning, LawError, NotFound, OutsideDomain, WithdrawnWarning


def horner(powers, q):
    """Plain powers, lowest first."""
    return np.polynomial.polynomial.polyval(q, powers)


def test_open_reads_and_open_write_writes(released, path):
    """`curvebank.open` is the door to both."""
    with curvebank.open(path) as bank:
        assert isinstance(bank, Bank) and bank.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)
    with curvebank.open(path, write=True) as store:
        assert store.pump(make.KEY).head(50.0, 320.0) == pytest.approx(43.75)


def test_values_by_keyword_as_scripts_write_them(pump):
    """head, efficiency, power at a traced diameter are the stored polynomials."""
    q = 62.5
    assert pump.head(flow_m3h=q, diameter_mm=320, speed_rpm=1450) == pytest.approx(horner(make.HEAD_320, q), rel=1e-13)
    assert pump.efficiency(flow_m3h=q, diameter_mm=320) == pytest.approx(horner(make.EFFICIENCY, q), rel=1e-13)
    assert pump.power(flow_m3h=q, diameter_mm=320) == pytest.approx(horner(make.POWER_320, q), rel=1e-13)


def test_plain_in_float_out_array_in_array_out(pump):
    """Broadcast shape, float64; ints and numpy's own floats count as plain."""
    for q in (50, 50.0, np.float64(50.0)):
        assert type(pump.head(q, 320.0)) in (float, np.float64)
    for q in (Fraction(50), Decimal(50), np.float32(50), np.int64(50)):
        assert type(pump.head(q, 320.0)) is float and pump.head(q, 320.0) == pytest.approx(43.75)
    out = pump.head(np.array([[10.0], [20.0]]), np.array([280.0, 300.0, 320.0]))
    assert out.shape == (2, 3) and out.dtype == np.float64
    for i, q in enumerate((10.0, 20.0)):
        for j, d in enumerate((280.0, 300.0, 320.0)):
            assert out[i, j] == pytest.approx(pump.head(q, d), rel=1e-13)
    speeds = pump.head([10.0, 20.0], 320.0, [1450.0, 1160.0])
    assert speeds == pytest.approx([pump.head(10.0, 320.0, 1450.0), pump.head(20.0, 320.0, 1160.0)])
    assert pump.head(np.empty(0), 320.0).shape == (0,)
    assert pump.head(np.array(50.0), 320.0).shape == ()


def test_shapes_that_do_not_fit_are_named(pump):
    """Two flows, three diameters."""
    with pytest.raises(LawError, match="shapes"):
        pump.head(np.ones(2), np.full(3, 320.0))


def test_cached_and_fresh_readings_agree(pump):
    """The second call takes the short way."""
    assert [pump.head(33.3, 301.5, 1400.0) for _ in range(3)] == [pump.head(33.3, 301.5, 1400.0)] * 3


def test_domain_is_named_when_left(pump):
    """Flow and unit in the message, both ends of the domain."""
    assert pump.head.domain(diameter_mm=320) == (0.0, 100.0)
    assert pump.head.domain(300).hi_m3h == pytest.approx(min(90 * 300 / 280, 100 * 300 / 320))
    with pytest.raises(OutsideDomain, match="120 m³/h is outside .*0 to 100 m³/h"):
        pump.head(120.0, 320.0)
    with pytest.raises(OutsideDomain, match="2 of 3 flows"):
        pump.head(np.array([50.0, 101.0, 102.0]), 320.0)


def test_ends_of_the_domain_may_be_hit_with_rounding(pump):
    """A flow that misses the end by rounding alone is inside; a real step beyond is not."""
    hi = pump.head.domain(300.0).hi_m3h
    assert pump.head(math.nextafter(hi, 200.0), 300.0) == pytest.approx(pump.head(hi, 300.0))
    with pytest.raises(OutsideDomain):
        pump.head(hi * 1.0001, 300.0)


def test_outside_nan(pump):
    """NaN beyond the flow or the diameters, values elsewhere."""
    assert math.isnan(pump.head(120.0, 320.0, outside="nan")) and math.isnan(pump.head(50.0, 500.0, outside="nan"))
    got = pump.head(np.array([50.0, 120.0]), np.array([320.0, 320.0]), outside="nan")
    assert got[0] == pytest.approx(43.75) and math.isnan(got[1])
    assert math.isnan(pump.head(np.array([50.0]), np.array([500.0]), outside="nan")[0])


def test_outside_extrapolate_is_the_tangent_with_a_warning(pump):
    """At most a tenth of the domain, growing uncertainty, and detail() says that it is not inside."""
    slope = -0.05 - 2 * 0.0015 * 100
    with pytest.warns(ExtrapolationWarning, match="105 m³/h is outside"):
        value = pump.head(105.0, 320.0, outside="extrapolate")
    assert value == pytest.approx(horner(make.HEAD_320, 100.0) + 5 * slope, rel=1e-12)
    with pytest.warns(ExtrapolationWarning):
        detail = pump.head.detail(105.0, 320.0, outside="extrapolate")
    assert not detail.inside and detail.u["print"] > pump.head.uncertainty(100.0, 320.0, of="print")
    with pytest.warns(ExtrapolationWarning, match="1 of 2"):
        both = pump.head(np.array([50.0, 105.0]), 320.0, outside="extrapolate")
    assert both == pytest.approx([43.75, value])
    with pytest.raises(OutsideDomain, match="10 %"):
        pump.head(111.0, 320.0, outside="extrapolate")
    with pytest.raises(OutsideDomain, match="280 to 320"):
        pump.head(50.0, 330.0, outside="extrapolate")


def test_inside_extrapolate_does_not_warn(pump):
    """The warning is for what is outside."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert pump.head(50.0, 320.0, outside="extrapolate") == pytest.approx(43.75)


def test_unknown_word_for_outside(pump):
    """The three words are named."""
    with pytest.raises(LawError, match="extrapolate"):
        pump.head(200.0, 320.0, outside="clip")


@pytest.mark.parametrize("bad", [float("nan"), float("inf"), -1.0])
def test_impossible_flows_are_outside(pump, bad):
    """NaN, infinity and negative flow never give a number."""
    with pytest.raises(OutsideDomain):
        pump.head(bad, 320.0)
    assert math.isnan(pump.head(bad, 320.0, outside="nan"))


def test_diameter_left_out_is_an_error_unless_one_line_exists(pump):
    """Head has two diameters, efficiency one."""
    with pytest.raises(OutsideDomain, match="280, 320 mm"):
        pump.head(50.0)
    assert pump.efficiency(50.0) == pump.efficiency(50.0, 320.0)


def test_speed_left_out_is_the_printed_one(store):
    """One printed speed; of several the rated one; otherwise they are named."""
    curves = [make.curve("slow", "head", (20.0,), 300.0, speed=1450.0), make.curve("fast", "head", (80.0,), 300.0, speed=2900.0, hi=200.0)]
    make.save(store, make.digitised(curves), release=True)
    assert store.pump(make.KEY).head(50.0, 300.0) == 20.0
    make.save(store, make.digitised(curves, speed_rpm=None, key="B-1"), release=True)
    with pytest.raises(OutsideDomain, match="1450, 2900 1/min"):
        store.pump("B-1").head(50.0, 300.0)


def test_sheet_without_speed_is_not_carried_to_one(store):
    """No speed printed, none invented."""
    make.save(store, make.digitised([make.curve("H", "head", (20.0,), 300.0, speed=None)], speed_rpm=None), release=True)
    pump = store.pump(make.KEY)
    assert pump.head(50.0, 300.0) == 20.0
    with pytest.raises(LawError, match="states no speed"):
        pump.head(50.0, 300.0, 1450.0)


def test_power_by_density(pump):
    """P ~ density, from the density of the sheet (998.2 unless stated)."""
    base = pump.power(50.0, 320.0)
    assert pump.power(50.0, 320.0, density_kgm3=1100.0) == pytest.approx(base * 1100.0 / 998.2, rel=1e-12)
    assert pump.power.uncertainty(50.0, 320.0, of="print", density_kgm3=1996.4) == pytest.approx(
        2 * pump.power.uncertainty(50.0, 320.0, of="print")
    )
    with pytest.raises(LawError, match="density"):
        pump.power(50.0, 320.0, density_kgm3=0.0)


def test_sheet_drawn_for_another_density(store):
    """A sheet for 1020 kg/m3: power at 1020 is what is printed."""
    make.save(store, make.digitised(density_kgm3=1020.0), release=True)
    pump = store.pump(make.KEY)
    assert pump.power(50.0, 320.0, density_kgm3=1020.0) == pump.power(50.0, 320.0)


def test_uncertainty_needs_a_word(pump):
    """print or machine, no default."""
    with pytest.raises(TypeError):
        pump.head.uncertainty(50.0, 320.0)
    with pytest.raises(BankError, match="print"):
        pump.head.uncertainty(50.0, 320.0, of="both")


def test_print_uncertainty_is_the_stored_covariance(pump):
    """At the middle of the domain the covariance gives 0.02; at the end sqrt(3) as much (t = 1, three coefficients)."""
    assert pump.head.uncertainty(50.0, 320.0, of="print") == pytest.approx(0.02, rel=1e-9)
    assert pump.head.uncertainty(100.0, 320.0, of="print") == pytest.approx(0.02 * math.sqrt(3), rel=1e-9)
    got = pump.head.uncertainty(np.array([50.0, 100.0]), 320.0, of="print")
    assert got == pytest.approx([0.02, 0.02 * math.sqrt(3)])


def test_machine_uncertainty_is_print_plus_the_basis(pump):
    """Catalogue curve as grade 3B (9 % of flow, 7 % of head: seen in public text) as rectangular half-widths."""
    q, slope = 50.0, -0.05 - 2 * 0.0015 * 50
    want = math.sqrt(0.02**2 + (0.07 * 43.75) ** 2 / 3 + (slope * 0.09 * q) ** 2 / 3)
    assert pump.head.uncertainty(q, 320.0, of="machine") == pytest.approx(want, rel=1e-9)
    assert pump.head.uncertainty(np.array([q]), 320.0, of="machine")[0] == pytest.approx(want, rel=1e-9)


@pytest.mark.parametrize(("basis", "less"), [("guaranteed", True), ("works test", True), ("catalogue", False)])
def test_better_bases_deviate_less(store, basis, less):
    """A guarantee and a test say more of a machine than a catalogue."""
    make.save(store, make.digitised([make.curve("H", "head", make.HEAD_320, 320.0, basis=basis)]), release=True)
    u = store.pump(make.KEY).head.uncertainty(50.0, 320.0, of="machine")
    assert (u < 1.5) is less


def test_detail_tells_where_a_number_comes_from(pump):
    """Value, both uncertainties, inside, rule, revision, curves."""
    d = pump.head.detail(40.0, 300.0)
    assert d.value == pump.head(40.0, 300.0) and d.inside and d.rule == "blend-1" and d.revision == 1
    assert d.curves == ("H-280", "H-320") and d.u["machine"] > d.u["print"] > 0
    assert pump.head.detail(40.0, 300.0, of="print").u == d.u["print"]
    with pytest.raises(OutsideDomain):
        pump.head.detail(500.0, 300.0)


def test_borrowed_efficiency_carries_its_caution(pump):
    """Printed for the largest diameter alone."""
    assert pump.efficiency.detail(50.0, 320.0).cautions == ()
    assert "Ø 320 alone" in pump.efficiency.detail(50.0, 300.0).cautions[0]


def test_power_computed_where_it_is_not_traced(store):
    """P = rho g Q H / eta (100 m3/h, 32 m, 0.78, 998.2 kg/m3 -> 11.155553311 kW, arithmetic), said in the detail."""
    curves = [make.curve("H", "head", (32.0,), 320.0, hi=150.0), make.curve("E", "efficiency", (0.78,), 320.0, hi=150.0)]
    make.save(store, make.digitised(curves), release=True)
    pump = store.pump(make.KEY)
    assert pump.power(100.0, 320.0) == pytest.approx(11.155553311, rel=1e-9)
    assert pump.power(np.array([100.0]), 320.0)[0] == pytest.approx(11.155553311, rel=1e-9)
    detail = pump.power.detail(100.0, 320.0)
    assert "computed from head and efficiency" in detail.cautions[0] and "from head and efficiency" in detail.rule
    want = 11.155553311 * math.hypot(0.02 * 1 / 32, 0.02 / 0.78)
    assert detail.u["print"] == pytest.approx(want, rel=0.1)
    assert pump.power.plan(320.0, None).slope(100.0) == pytest.approx(0.11155553311, rel=1e-9)


def test_computed_power_stays_away_from_zero_efficiency(store):
    """At no flow the quotient is nothing over nothing: outside the domain."""
    make.save(
        store,
        make.digitised([make.curve("H", "head", make.HEAD_320, 320.0), make.curve("E", "efficiency", make.EFFICIENCY, 320.0)]),
        release=True,
    )
    pump = store.pump(make.KEY)
    assert pump.power.domain(320.0).lo_m3h > 0
    with pytest.raises(OutsideDomain):
        pump.power(0.0, 320.0)


def test_traced_power_is_the_primary_and_the_closure_is_told(pump):
    """Power from its own line; closure against rho g Q H / eta."""
    q = 60.0
    computed = 998.2 * 9.80665 * q * horner(make.HEAD_320, q) / 3.6e6 / horner(make.EFFICIENCY, q)
    assert pump.power(q, 320.0) == pytest.approx(horner(make.POWER_320, q))
    assert pump.closure(q, 320.0) == pytest.approx(horner(make.POWER_320, q) / computed - 1, rel=1e-9)
    assert pump.closure(np.array([q]), 320.0).shape == (1,)


def test_letters_without_millimetres_are_stored_and_never_read(store):
    """applies_to unknown: named in the error and in the cautions."""
    letter = make.curve("B", "head", make.HEAD_320, None, applies_to="unknown", label={"by": "letter", "printed": "B"})
    make.save(store, make.digitised([letter]), release=True)
    pump = store.pump(make.KEY)
    with pytest.raises(OutsideDomain, match="letter without a diameter: B"):
        pump.head(50.0)
    assert any("not read: head B." in c for c in pump.cautions) and pump.curves[0]["label"] == "B"


def test_curve_without_diameter_is_read_for_all(store):
    """At the same flow, at any traced diameter."""
    curves = [*make.main_curves(), make.curve("N", "npshr", make.NPSHR, None, applies_to="all")]
    make.save(store, make.digitised(curves), release=True)
    pump = store.pump(make.KEY)
    assert pump.npshr(50.0, 280.0) == pump.npshr(50.0, 311.0) == pump.npshr(50.0) == pytest.approx(2.75)


def test_castings_are_never_mixed(store):
    """Two castings of one quantity: say which."""
    curves = [make.curve("A", "head", (40.0,), 300.0, group="cast A"), make.curve("B", "head", (30.0,), 300.0, group="cast B")]
    make.save(store, make.digitised(curves), release=True)
    pump = store.pump(make.KEY)
    with pytest.raises(OutsideDomain, match="cast A, cast B"):
        pump.head(50.0, 300.0)
    assert pump.quantity("head", group="cast B")(50.0, 300.0) == 30.0


def test_lines_by_stages_are_read_by_the_pump_s_own(store):
    """One sheet for two, three and four stages: the pump has three; another number is asked for by name, none is ever mixed in."""
    curves = [
        make.curve(f"H-{n}", "head", (20.0 * n,), None, applies_to="all", label={"by": "stages", "printed": f"{n} stages"})
        for n in (2, 3, 4)
    ]
    make.save(store, make.digitised(curves, stages=3), release=True)
    pump = store.pump(make.KEY)
    assert pump.head(50.0) == 60.0 and pump.quantity("head", variant="4 stages")(50.0) == 80.0
    with pytest.raises(OutsideDomain, match="variant '9'"):
        pump.quantity("head", variant="9")(50.0)
    make.save(store, make.digitised(curves[2:], stages=3, key="B-1"), release=True)
    with pytest.raises(OutsideDomain, match="4 stages .stages"):
        store.pump("B-1").head(50.0)


def test_one_of_several_pumps_running_is_the_pump(store):
    """Lines for one and two pumps in parallel."""
    curves = [make.curve(f"H-{n}", "head", (20.0 + n,), 300.0, label={"by": "pumps_running", "printed": str(n)}) for n in (1, 2)]
    make.save(store, make.digitised(curves), release=True)
    assert store.pump(make.KEY).head(50.0, 300.0) == 21.0


def test_blade_angles_are_never_mixed(store):
    """Two angles at one diameter: say which; a single one needs no saying."""
    curves = [make.curve(f"H-{n}", "head", (20.0 + n,), 300.0, label={"by": "blade_angle", "printed": f"{n}°"}) for n in (10, 14)]
    make.save(store, make.digitised(curves), release=True)
    pump = store.pump(make.KEY)
    with pytest.raises(OutsideDomain, match="10°, 14° .blade angle"):
        pump.head(50.0, 300.0)
    assert pump.quantity("head", variant="14°")(50.0, 300.0) == 34.0
    make.save(store, make.digitised(curves[:1], key="B-1"), release=True)
    assert store.pump("B-1").head(50.0, 300.0) == 30.0


def test_the_type_is_read_before_one_machine_of_it(store):
    """A works test beside a catalogue curve does not change what the type answers."""
    curves = [make.curve("cat", "head", (40.0,), 300.0), make.curve("test", "head", (39.0,), 300.0, basis="works test")]
    make.save(store, make.digitised(curves), release=True)
    pump = store.pump(make.KEY)
    assert pump.head(50.0, 300.0) == 40.0 and pump.quantity("head", basis="works test")(50.0, 300.0) == 39.0


def test_electrical_values_are_kept_apart(store):
    """Input power is never shaft power."""
    make.save(
        store, make.digitised([make.curve("E", "input_power", (12.0,), 300.0), make.curve("H", "head", (40.0,), 300.0)]), release=True
    )
    pump = store.pump(make.KEY)
    assert pump.input_power(50.0, 300.0) == 12.0 and not pump.power
    with pytest.raises(OutsideDomain, match="no power line"):
        pump.power(50.0, 300.0)


def test_findings_waivers_and_cautions_travel_with_the_numbers(store, path):
    """An error that nobody waived is a caution; a waived one is not."""
    make.save(store, make.digitised(findings=[make.finding(severity="error")]), release=True)
    pump = store.pump(make.KEY)
    assert pump.findings[0]["severity"] == "error" and pump.findings[0]["where"] == {"panel": "main", "curves": ["H-320"]}
    assert any("nobody has cured or waived" in c for c in pump.cautions)
    assert pump.cautions[-1].endswith("local codes and a licensed engineer decide.")
    store.event(make.KEY, 1, "waived", who="A. Reed", why="agrees by eye", finding=pump.findings[0]["key"])
    assert not any("nobody has cured" in c for c in store.pump(make.KEY).cautions)


def test_printed_corrections_are_told_not_applied(store):
    """A margin note of the sheet stands among the cautions."""
    recipe = b'{"recipe": 1, "corrections": [{"quantity": "efficiency", "amount": -1.5, "condition": "per 5 % of trim"}]}'
    make.save(store, recipe=recipe, release=True)
    assert any("efficiency -1.5, per 5 % of trim" in c for c in store.pump(make.KEY).cautions)


def test_revision_pins_any_state(store):
    """Drafts too."""
    make.save(store)
    make.save(store, make.digitised([make.curve("H", "head", (60.0,), 320.0)]))
    assert [store.pump(make.KEY, revision=n).head(50.0, 320.0) for n in (1, 2)] == pytest.approx([43.75, 60.0])
    with pytest.raises(NotFound, match=r"revision 1 \(draft\), revision 2 \(draft\)"):
        store.pump(make.KEY, revision=3)


def test_as_of_answers_what_was_released_then(store, monkeypatch):
    """Half-open spans: the moment of a release belongs to the new revision."""
    clock = iter(f"2026-0{month}-01T00:00:00.000Z" for month in range(1, 8))
    monkeypatch.setattr(chain, "utc_now", lambda: next(clock))
    make.save(store, release=True)
    make.save(store, release=True)
    store.event(make.KEY, 2, "withdrawn", who="A. Reed", why="wrong scale")
    make.save(store, release=True)
    with pytest.raises(NotFound, match="released at 2025"):
        store.pump(make.KEY, as_of="2025-12-31T00:00:00Z")
    for moment, revision in (("2026-01-01T00:00:00Z", 1), ("2026-01-31T23:59:59.999Z", 1), ("2026-04-01T00:00:00Z", 3), ("2030-01-01", 3)):
        assert store.pump(make.KEY, as_of=moment).revision == revision
    with pytest.warns(WithdrawnWarning):
        assert store.pump(make.KEY, as_of="2026-02-01T01:00:00+01:00").revision == 2
    with pytest.raises(NotFound):
        store.pump(make.KEY, as_of="2026-03-15T00:00:00Z")
    with pytest.raises(BankError, match="not a moment"):
        store.pump(make.KEY, as_of="last week")
    with pytest.raises(BankError, match="not both"):
        store.pump(make.KEY, revision=1, as_of="2026-01-01")


def test_withdrawn_pin_answers_with_warning_reason_and_successor(store):
    """The number still comes, the warning says why not to use it."""
    make.save(store, release=True)
    store.event(make.KEY, 1, "withdrawn", who="A. Reed", why="The flow scale was misread.")
    with pytest.warns(WithdrawnWarning, match="flow scale was misread. Nothing is released"):
        assert store.pump(make.KEY, revision=1).head(50.0, 320.0) == pytest.approx(43.75)
    make.save(store, release=True)
    with pytest.warns(WithdrawnWarning, match="by A. Reed.*Revision 2 is released in its place"):
        store.pump(make.KEY, revision=1)


def test_no_such_pump_lists_others(released):
    """Keys that look alike first."""
    with pytest.raises(NotFound, match="LARK-WM-150"):
        released.pump("LARK-WM-15")


def test_pumps_lists_released_or_latest(store):
    """State and revision shown."""
    make.save(store, release=True)
    make.save(store)
    make.save(store, make.digitised(key="B-1"))
    assert [(p.key, p.revision, p.state) for p in store.pumps()] == [("B-1", 1, "draft"), (make.KEY, 1, "released")]


def test_pump_says_what_it_is(pump):
    """Attributes and repr."""
    assert (pump.maker, pump.model, pump.stages, pump.rated_rpm) == ("Lark & Söhne", "WM 150", 1, 1450.0)
    assert pump.diameters_mm == (280.0, 320.0) and pump.speeds_rpm == (1450.0,) and pump.quantities == ("head", "efficiency", "power")
    assert "LARK-WM-150 revision 1" in repr(pump) and "head" in repr(pump.head)


def test_closed_bank_and_other_thread_are_said(released):
    """In words, not in sqlite3's."""
    released.close()
    with pytest.raises(BankError, match="closed"):
        released.pumps()


def test_thousands_of_diameters_do_not_fill_memory(pump):
    """The store of readings is bounded."""
    from curvebank.bank.quantity import CACHE

    for i in range(CACHE + 10):
        pump.head(50.0, 280.0 + 40.0 * (i + 1) / (CACHE + 20))
    assert len(pump.head._plans) <= CACHE


def test_hourly_speeds_are_carried_over_the_whole_array(pump):
    """Thousands of distinct speeds and a few diameters: the same numbers as one by one, in one pass."""
    rng = np.random.default_rng(11)
    flow, speed, diameter = rng.uniform(10, 50, (300, 3)), rng.uniform(1000, 1600, (300, 1)), np.array([285.0, 300.0, 320.0])
    for quantity in (pump.head, pump.power, pump.efficiency):
        got = quantity(flow, diameter, speed)
        want = [
            [quantity(float(q), float(d), float(n)) for q, d in zip(row, diameter, strict=True)]
            for row, (n,) in zip(flow, speed, strict=True)
        ]
        np.testing.assert_allclose(got, want, rtol=1e-12)
    with pytest.raises(OutsideDomain, match="90 m³/h is outside .* to 68.* m³/h"):
        pump.head(np.full(300, 90.0), 320.0, np.linspace(1000, 1200, 300))
    assert np.isnan(pump.head(np.full(300, 90.0), 320.0, np.linspace(1000, 1200, 300), outside="nan")).all()


def test_npshr_over_many_speeds_takes_both_exponents(store):
    """n^1.3 below and n^2 above the printed speed, in one array; two printed speeds share the array."""
    curves = [make.curve("N", "npshr", (3.0,), 320.0, hi=300.0), make.curve("M", "npshr", (12.0,), 320.0, speed=2900.0, hi=300.0)]
    make.save(store, make.digitised(curves), release=True)
    n = np.linspace(1000, 3500, 101)
    npshr = store.pump(make.KEY).npshr
    np.testing.assert_allclose(npshr(np.full(101, 40.0), 320.0, n), [npshr(40.0, 320.0, float(x)) for x in n], rtol=1e-12)


@pytest.mark.parametrize("bad", [0.0, float("nan"), -300.0])
def test_impossible_diameters_and_speeds_in_arrays(pump, bad):
    """One bad entry refuses the array."""
    with pytest.raises(LawError, match="above 0 mm"):
        pump.head(50.0, np.array([320.0, bad]))
    with pytest.raises(LawError, match="above 0 1/min"):
        pump.head(50.0, 320.0, np.array([1450.0, bad]))
