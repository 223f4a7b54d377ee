"""Records: read-only arrays, finding keys, the fitted polynomial's value and uncertainty."""

import hashlib

import numpy as np
import pytest

from curvebank.records import Curve, Finding, Fit, frozen


def line_fit():
    # head = 40 - 0.1 (q - 50) on 0..100: t = (q - 50) / 50, scaled (40, -5)
    return Fit(
        order=1,
        lo=0.0,
        hi=100.0,
        mid=50.0,
        half=50.0,
        scaled=frozen([40.0, -5.0]),
        covariance=frozen([[0.04, 0.0], [0.0, 0.09]]),
        plain=frozen([45.0, -0.1]),
        sigma=0.3,
        max_miss=0.1,
        max_miss_pct=0.2,
    )


def test_frozen_arrays_are_copies_and_read_only():
    source = np.arange(4.0)
    a = frozen(source, (2, 2))
    source[0] = 9
    assert a[0, 0] == 0 and a.dtype == np.float64
    with pytest.raises(ValueError, match="read-only"):
        a[0, 0] = 1


def test_fit_value_and_uncertainty():
    """u^2 = phi V phi' (JCGM 100, eq. 13): at mid 0.2, at the ends sqrt(0.04 + 0.09)."""
    fit = line_fit()
    assert fit.value([0, 50, 100]) == pytest.approx([45, 40, 35])
    assert fit.uncertainty(np.array([50.0, 100.0])) == pytest.approx([0.2, np.sqrt(0.13)])


def test_finding_key_binds_rule_and_subject():
    a = Finding(rule="family-order", severity="error", subject="curve:H-320", message="…")
    assert a.key == hashlib.sha256(b"family-order\ncurve:H-320").hexdigest()[:16]


def test_curve_defaults_are_a_failed_curve():
    curve = Curve(id="H", quantity="head")
    assert curve.points.shape == (0, 2) and curve.sigma.shape == (0,) and not curve.is_contour
    assert Curve(id="e", quantity="efficiency_contour", level=0.8).is_contour
