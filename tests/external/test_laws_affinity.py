"""Affinity and trim against closed forms and published rules. Row numbers are not used: each check names its source."""

import numpy as np
import pytest

from curvebank.errors import LawError
from curvebank.laws import affinity, trim


def test_trim_350_to_300_by_the_simple_law():
    """Arithmetic on the simple law Q~r, H~r^2, P~r^3 (seen in a trade-journal article; accuracy is common practice, no source)."""
    r = affinity.ratio_of(300.0, 350.0)
    q, h = affinity.carry_quantity("head", 100.0, 50.0, r, affinity.TRIM)
    _, p = affinity.carry_quantity("power", 100.0, 20.0, r, affinity.TRIM)
    assert q == pytest.approx(85.7142857142857, rel=1e-9)
    assert h == pytest.approx(36.7346938775510, rel=1e-9)
    assert p == pytest.approx(12.5947521865889, rel=1e-9)


def test_geometric_similarity_is_not_a_trim():
    """Dimensional analysis: all sizes scaled gives Q~D^3, H~D^2, P~D^5 (White, Fluid Mechanics ch. 11, from memory)."""
    r = 300 / 350
    q, h = affinity.carry_quantity("head", 1.0, 1.0, r, affinity.GEOMETRIC)
    _, p = affinity.carry_quantity("power", 1.0, 1.0, r, affinity.GEOMETRIC)
    assert [float(q), float(h), float(p)] == pytest.approx([0.629737609, 0.734693878, 0.462664366], rel=1e-8)


def test_published_trim_rules_spread_the_head_factor():
    """Gülich's m from 2 to 3 (from memory) for both flow and head at r = 300/350: 0.7347, 0.6802, 0.6297."""
    r = 300 / 350
    factors = [float(affinity.carry(1.0, 1.0, r, flow_exponent=m, value_exponent=m)[1]) for m in (2.0, 2.5, 3.0)]
    assert factors == pytest.approx([0.7347, 0.6802, 0.6297], abs=5e-5)


def test_coefficients_of_a_carried_curve():
    """Closed form h_k' = h_k r^(b - a k), derived from V'(Q) = r^b V(Q / r^a)."""
    carried = affinity.carried_coefficients([50.0, -0.05, -0.0015], 0.9)
    assert carried == pytest.approx([40.5, -0.045, -0.0015], rel=1e-12)
    assert carried[2] == -0.0015 or carried[2] == pytest.approx(-0.0015, rel=1e-15), "the square term does not change under the simple law"


@pytest.mark.parametrize(("a", "b"), [(1.0, 2.0), (1.0, 3.0), (1.0, 0.0), (1.3, 2.2), (2.5, 2.5)])
def test_carried_coefficients_and_carried_points_are_one_curve(a, b):
    """The same closed form, held against points carried one by one."""
    h = np.array([50.0, -0.05, -0.0015, 2e-6])
    q = np.linspace(0, 120, 25)
    q2, v2 = affinity.carry(q, np.polynomial.polynomial.polyval(q, h), 0.87, flow_exponent=a, value_exponent=b)
    again = np.polynomial.polynomial.polyval(q2, affinity.carried_coefficients(h, 0.87, flow_exponent=a, value_exponent=b))
    assert again == pytest.approx(v2, rel=1e-12)


def test_trim_for_a_duty_with_a_linear_term():
    """50 r^2 - 3.5 r - 37.35 = 0 gives r = 0.9 exactly (derived by hand)."""
    assert 350 * trim.ratio_for_duty([50.0, -0.05, -0.0015], 70.0, 30.0) == pytest.approx(315.0, rel=1e-9)


def test_trim_for_a_duty_without_a_linear_term():
    """r = sqrt((30 + 0.002 70^2) / 50), and the parabola method: 70 / sqrt(50 / (30 / 4900 + 0.002)) (derived by hand)."""
    r = trim.ratio_for_duty([50.0, 0.0, -0.002], 70.0, 30.0)
    assert 350 * r == pytest.approx(312.2659123, rel=1e-9)
    assert r == pytest.approx(70 / np.sqrt(50 / (30 / 4900 + 0.002)), rel=1e-12)


@pytest.mark.parametrize(("trimmed", "ratio"), [(335.0, 0.942424143), (300.0, 0.803902048)])
def test_iso_annex_ratio_by_blade_inlet_diameter(trimmed, ratio):
    """R = sqrt((Dr^2 - D1^2) / (Dt^2 - D1^2)), ISO 9906 informative annex on reduction of impeller diameter (from memory)."""
    assert trim.iso_trim_ratio(350.0, trimmed, 175.0) == pytest.approx(ratio, rel=1e-9)


def test_speed_3500_to_1700():
    """400 US gal/min, 126 ft, 17.5 hp: 194.2857 seen in a public notebook, the rest arithmetic on Q~n, H~n^2, P~n^3."""
    r = 1700 / 3500
    q, h = affinity.carry_quantity("head", 400.0, 126.0, r)
    _, p = affinity.carry_quantity("power", 400.0, 17.5, r)
    assert [float(q), float(h), float(p)] == pytest.approx([194.285714, 29.7257143, 2.00530612], rel=1e-8)


def test_points_of_equal_efficiency_lie_on_a_parabola_under_a_change_of_speed():
    """H / Q^2 is the same at r = 1, 0.9 and 0.857 (exact under the speed laws)."""
    for r in (1.0, 0.9, 0.857):
        q, h = affinity.carry(100.0, 30.0, r)
        assert h / q**2 == pytest.approx(0.003, rel=1e-12)
        assert affinity.homologous_head(q, 100.0, 30.0) == pytest.approx(float(h), rel=1e-12)


def test_homologous_path_is_straight_where_both_exponents_agree():
    """a = b = m gives H / Q constant (Gülich's rule, from memory)."""
    assert affinity.homologous_head(50.0, 100.0, 30.0, flow_exponent=2.5, head_exponent=2.5) == pytest.approx(15.0)


@pytest.mark.parametrize("bad", [0.0, -1.0, float("nan"), float("inf")])
def test_a_ratio_must_be_a_positive_number(bad):
    with pytest.raises(LawError, match="above zero"):
        affinity.carry(1.0, 1.0, bad)


def test_duty_that_no_trim_meets():
    with pytest.raises(LawError, match="No diameter"):
        trim.ratio_for_duty([50.0, 0.0, -0.002], 70.0, 45.0)
    with pytest.raises(LawError, match="above zero"):
        trim.ratio_for_duty([50.0, 0.0, -0.002], -70.0, 45.0)
    with pytest.raises(LawError, match="below both"):
        trim.iso_trim_ratio(350.0, 300.0, 320.0)
