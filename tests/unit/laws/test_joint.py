"""The joint fit on curves whose scales are known, and its verdicts on families made by hand."""

import doctest

import numpy as np
import pytest

from curvebank.errors import LawError
from curvebank.laws import affinity, joint, labels, power, specific, suction, system, trim
from curvebank.laws.joint import FamilyCurve, joint_scales, thin
from curvebank.laws.labels import judge_family


def curve(true, printed=None, *, full=340.0, a=1.0, b=2.0, lo=5.0, hi=100.0, speed=None, head=1.0, flow=1.0, sigma=0.1, name=None):
    """H = 50 - 0.05 Q - 0.0015 Q^2 at the full wheel, carried to ``true`` and labelled ``printed``."""
    r = true / full
    q = np.linspace(lo, hi, 80)
    return FamilyCurve(
        id=name or f"{printed or true:g}",
        flow=q * r**a * flow,
        value=r**b * (50 - 0.05 * q - 0.0015 * q**2) * head,
        sigma=sigma,
        diameter_mm=float(printed or true),
        speed_rpm=speed,
    )


def test_scales_of_exact_curves_are_recovered():
    cs = [curve(d, a=1.2, b=2.1) for d in (340, 320, 300)]
    s = joint_scales(cs, [0, 0, 0], [0, 0, 0])
    x = np.log(np.array([340, 320, 300]) / 340)
    assert s.flow == pytest.approx(1.2 * x, abs=2e-4)
    assert s.value == pytest.approx(2.1 * x, abs=2e-4)
    assert np.all(s.misfit < 0.1) and s.inflation == 1.0


def test_different_flow_ranges_do_not_move_the_scales():
    cs = [curve(340), curve(320, lo=30, hi=100), curve(300, lo=5, hi=60)]
    s = joint_scales(cs, [0, 0, 0], [0, 0, 0])
    assert s.value == pytest.approx(2 * np.log(np.array([340, 320, 300]) / 340), abs=2e-3)


def test_a_tail_on_the_neighbours_line_has_no_say():
    """The last tenth of the middle curve follows the smaller one: the redescending weights leave it out."""
    cs = [curve(d) for d in (340, 320, 300)]
    q, v = cs[1].flow.copy(), cs[1].value.copy()
    tail = (q > np.quantile(q, 0.88)) & (q < cs[2].flow.max())
    v[tail] = np.interp(q[tail], cs[2].flow, cs[2].value)
    cs[1] = FamilyCurve(id="320", flow=q, value=v, sigma=0.1, diameter_mm=320.0)
    x = np.log(np.array([340, 320, 300]) / 340)
    kept = joint_scales(cs, x, 2 * x)
    assert kept.value == pytest.approx(2 * x, abs=2e-3)
    assert judge_family(cs).verdict == "sound"
    pulled = joint_scales(cs, x, 2 * x, robust=False)
    assert abs(pulled.flow[1] - x[1]) > 3 * abs(kept.flow[1] - x[1])


def test_the_common_shape_is_the_curve_itself():
    cs = [curve(340), curve(300)]
    s = joint_scales(cs, [0, -0.12], [0, -0.25])
    assert s.curve_value(cs[1].flow, s.flow[1], s.value[1]) == pytest.approx(cs[1].value, abs=0.02)


def test_covariance_grows_with_the_declared_uncertainty():
    loose = joint_scales([curve(340, sigma=0.4), curve(300, sigma=0.4)], [0, 0], [0, 0]).covariance[3, 3]
    tight = joint_scales([curve(340, sigma=0.1), curve(300, sigma=0.1)], [0, 0], [0, 0]).covariance[3, 3]
    assert 2 < np.sqrt(loose / tight) < 4.5


@pytest.mark.parametrize("k", range(5))
@pytest.mark.parametrize("factor", [0.97, 1.03])
def test_one_label_off_is_named_wherever_it_stands(k, factor):
    true = [340, 326, 309, 296, 280]
    printed = [float(d) for d in true]
    printed[k] = round(true[k] * factor, 1)
    v = judge_family([curve(t, p, name=str(i)) for i, (t, p) in enumerate(zip(true, printed, strict=True))])
    assert v.verdict == "mislabelled"
    best = v.best
    assert best is not None and best.kind == "diameter" and best.printed == printed[k]
    assert best.agrees == pytest.approx(true[k], rel=0.01)
    assert best.agrees_low < true[k] < best.agrees_high


@pytest.mark.parametrize(("a", "b"), [(1.0, 1.95), (1.0, 2.35), (1.35, 2.0), (1.35, 2.35), (2.0, 2.0)])
@pytest.mark.parametrize("count", [2, 3, 4, 5])
def test_no_sound_family_is_accused(a, b, count):
    v = judge_family([curve(d, a=a, b=b) for d in (340, 326, 309, 296, 280)[:count]])
    assert v.verdict == ("cannot tell" if count == 2 else "sound")
    assert not v.alternatives and not v.unexplained and v.best is None


def test_measured_exponents_carry_their_uncertainty():
    v = judge_family([curve(d, a=1.3, b=2.2) for d in (340, 320, 300, 280)])
    (a, sa), (b, sb) = v.exponents["diameter"]["flow"], v.exponents["diameter"]["value"]
    assert abs(a - 1.3) < sa and abs(b - 2.2) < sb
    assert 0 < sb < 0.1 and 0 < sa < 0.15


def test_two_curves_that_contradict_are_one_of_these():
    v = judge_family([curve(340), curve(320, 330)])
    assert v.verdict == "one of these"
    assert {a.curve for a in v.alternatives} == {0, 1}


def test_exchanged_labels_are_recognised():
    v = judge_family([curve(340), curve(320, 300, name="a"), curve(300, 320, name="b"), curve(280)])
    assert v.verdict == "exchanged"
    assert {v.scales.curves[v.best.curve].id, v.scales.curves[v.best.other].id} == {"a", "b"}


def test_a_flow_scale_alone_is_a_displaced_curve_not_a_label():
    v = judge_family([curve(340), curve(325), curve(310, flow=1.08), curve(295), curve(280)])
    assert v.verdict == "displaced"
    assert v.best.kind == "flow" and v.scales.curves[v.best.curve].id == "310"
    assert v.best.shift == pytest.approx(np.log(1.08), abs=0.01)


def test_a_head_scale_alone_is_a_displaced_curve_not_a_label():
    v = judge_family([curve(340), curve(325), curve(310, head=1.10), curve(295), curve(280)])
    assert v.best.kind == "value" and v.scales.curves[v.best.curve].id == "310"
    assert v.best.shift == pytest.approx(np.log(1.10), abs=0.01)


def test_a_constant_factor_on_everything_changes_nothing():
    plain = judge_family([curve(d) for d in (340, 320, 300)])
    scaled = judge_family([curve(d, head=3.28, flow=4.4, sigma=0.328) for d in (340, 320, 300)])
    assert scaled.verdict == plain.verdict == "sound"
    assert scaled.exponents["diameter"]["value"][0] == pytest.approx(plain.exponents["diameter"]["value"][0], abs=1e-3)


def speeds(*pairs, diameter=320.0):
    out = []
    for true, printed in pairs:
        c = curve(true, printed, full=2900.0)
        out.append(FamilyCurve(id=f"{printed}", flow=c.flow, value=c.value, sigma=0.1, diameter_mm=diameter, speed_rpm=float(printed)))
    return out


def test_one_diameter_at_several_speeds_is_a_sound_family():
    v = judge_family(speeds((2900, 2900), (2400, 2400), (1900, 1900), (1450, 1450)))
    assert v.verdict == "sound"
    assert v.exponents["speed"]["value"][0] == pytest.approx(2.0, abs=0.02)


def test_a_wrong_speed_label_is_named():
    v = judge_family(speeds((2900, 2900), (2400, 2400), (1750, 1900), (1450, 1450)))
    assert v.verdict == "mislabelled"
    assert (v.best.kind, v.best.printed) == ("speed", 1900.0)
    assert v.best.agrees == pytest.approx(1750, rel=0.01)


def test_diameters_at_two_speeds_are_one_family():
    cs = []
    for n in (2900.0, 1450.0):
        for d in (340, 320, 300):
            c = curve(d)
            q, h = affinity.carry(c.flow, c.value, n / 2900)
            cs.append(FamilyCurve(id=f"{d}@{n:.0f}", flow=q, value=h, sigma=0.1 * (n / 2900) ** 2, diameter_mm=float(d), speed_rpm=n))
    v = judge_family(cs)
    assert v.verdict == "sound"
    assert set(v.exponents) == {"diameter", "speed"}
    assert v.exponents["speed"]["value"][0] == pytest.approx(2.0, abs=0.03)


def test_drooping_heads_are_no_contradiction():
    def droop(d):
        r = d / 340
        q = np.linspace(2, 100, 80)
        return FamilyCurve(id=f"{d}", flow=q * r, value=r**2 * (40 + 0.12 * q - 0.0025 * q**2), sigma=0.1, diameter_mm=float(d))

    assert judge_family([droop(d) for d in (340, 320, 300, 280)]).verdict == "sound"


def test_smallest_error_that_would_show():
    v = judge_family([curve(d) for d in (340, 320, 300, 280)])
    assert 0.005 < v.detectable < 0.03
    true = 300 * np.exp(-1.5 * v.detectable)
    assert judge_family([curve(340), curve(320), curve(true, 300), curve(280)]).verdict != "sound"


def test_thinning_keeps_the_mean():
    q, v = thin(np.arange(100.0), np.arange(100.0) * 2, 10)
    assert q == pytest.approx(np.arange(4.5, 100, 10), abs=1) and v == pytest.approx(2 * q)


@pytest.mark.parametrize(
    ("flow", "value"), [([1.0], [2.0]), ([1.0, 2.0], [1.0]), ([1.0, float("nan")], [1.0, 2.0]), ([3.0, 3.0], [1.0, 2.0])]
)
def test_points_that_make_no_curve_are_refused(flow, value):
    with pytest.raises(LawError):
        thin(flow, value)


def test_families_that_are_none_are_refused():
    with pytest.raises(LawError, match="no family"):
        judge_family([curve(340), curve(340)])
    with pytest.raises(LawError, match="two or more"):
        joint_scales([curve(340)], [0], [0])
    with pytest.raises(LawError, match="No family rule"):
        judge_family([curve(340), curve(320)], quantity="noise")
    c = curve(340)
    flat = FamilyCurve(id="flat", flow=c.flow, value=np.zeros_like(c.flow), sigma=0.1, diameter_mm=320.0)
    with pytest.raises(LawError, match="no value above zero"):
        judge_family([c, flat])


@pytest.mark.parametrize("module", [affinity, joint, labels, power, specific, suction, system, trim])
def test_examples_in_docstrings(module):
    failed, run = doctest.testmod(module)
    assert run > 0 and failed == 0


def test_the_package_loads_nothing_by_itself():
    from pathlib import Path

    import curvebank.laws

    lines = Path(curvebank.laws.__file__).read_text(encoding="utf-8").splitlines()
    assert not [line for line in lines if line.startswith(("import ", "from "))]


@pytest.mark.parametrize("printed", [31.0, 3100.0, 130.0, 103.0, 410.0])
def test_a_slip_of_the_keys_is_found_however_far_it_is(printed):
    v = judge_family([curve(340), curve(325), curve(310, printed, name="x"), curve(295), curve(280)])
    assert v.verdict == "mislabelled" and v.scales.curves[v.best.curve].id == "x"
    assert v.best.agrees == pytest.approx(310, rel=0.01)


def test_more_than_one_label_off_is_said_to_be_unexplained():
    v = judge_family([curve(340), curve(325, 332), curve(310), curve(295, 289), curve(280)])
    assert v.unexplained and v.verdict in ("mislabelled", "one of these")


def test_labels_of_several_quantities_can_be_added_up():
    v = judge_family([curve(340), curve(325), curve(310, 319), curve(295), curve(280)])
    assert v.gain_of("diameter", v.best.curve, v.best.shift) == pytest.approx(v.best.gain, abs=0.05)
    assert v.gain_of("diameter", v.best.curve, 0.0) == pytest.approx(0.0, abs=1e-9)
