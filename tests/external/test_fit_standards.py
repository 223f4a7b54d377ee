"""Fits held against certified and exact results (NIST StRD, GUM example H.3, rational arithmetic)."""

from pathlib import Path

import numpy as np
import pytest

from curvebank.fit import fit_curve, polynomial

X = np.arange(21.0)
WAMPLER_D = np.array(
    [759, -2048, 2048, -2048, 2523, -2048, 2048, -2048, 1838, -2048, 2048, -2048, 1838, -2048, 2048, -2048, 2523, -2048, 2048, -2048, 759.0]
)
SMOOTH = sum(X**k for k in range(6))
# NIST StRD, linear regression, Wampler1 to Wampler5: https://www.itl.nist.gov/div898/strd/lls/lls.shtml (data by their generating formula).
WAMPLER = {
    1: (SMOOTH, np.ones(6), 8.0, None),
    2: (np.round(sum((X / 10) ** k for k in range(6)), 5), 10.0 ** -np.arange(6), 8.0, None),
    3: (SMOOTH + WAMPLER_D, np.ones(6), 8.0, 2360.14502379268),
    4: (SMOOTH + 100 * WAMPLER_D, np.ones(6), 8.0, 236014.502379268),
    5: (SMOOTH + 10000 * WAMPLER_D, np.ones(6), 6.5, 23601450.2379268),
}


def digits(found, certified):
    """Log relative error of the worst coefficient: correct digits, 15 at most."""
    miss = np.max(np.abs(np.asarray(found) - certified) / np.abs(certified))
    return 15.0 if miss == 0 else min(15.0, -np.log10(miss))


@pytest.mark.parametrize("number", WAMPLER)
def test_wampler(number):
    y, certified, least, sd = WAMPLER[number]
    fit = polynomial(X, y, 5)
    assert digits(fit.coefficients, certified) >= least
    if sd is not None:
        assert fit.residual_sd == pytest.approx(sd, rel=1e-12)


def test_norris():
    """NIST StRD Norris; the data file ships inside scipy's tests. Certified values from the same file."""
    scipy_stats = pytest.importorskip("scipy.stats")
    file = Path(scipy_stats.__file__).parent / "tests/data/nist_linregress/Norris.dat"
    y, x = np.loadtxt(file, skiprows=60, max_rows=36, unpack=True)
    fit = polynomial(x, y, 1)
    assert digits(fit.coefficients, [-0.262323073774029, 1.00211681802045]) >= 11
    assert digits(np.sqrt(np.diag(fit.covariance)), [0.232818234301152, 0.429796848199937e-3]) >= 11
    assert fit.residual_sd == pytest.approx(0.884796396144373, rel=1e-12)


def test_exact_quadratic():
    """Rational normal equations give 279/7 + 16/35 Q - Q^2 and a residual sum of 12/35."""
    q, head = np.arange(6.0), np.array([40.0, 39.0, 37.0, 32.0, 26.0, 17.0])
    fit = polynomial(q, head, 2)
    np.testing.assert_allclose(fit.coefficients, [279 / 7, 16 / 35, -1.0], rtol=1e-12)
    assert fit.rss == pytest.approx(12 / 35, rel=1e-12)
    assert fit.residual_sd == pytest.approx(0.338061702, rel=1e-8)
    np.testing.assert_allclose(fit_curve(q, head, order=2).plain, [279 / 7, 16 / 35, -1.0], rtol=1e-12)


def test_efficiency_through_the_origin():
    """Rational normal equations: eta = 47/2000 Q - 7/40000 Q^2, best at 67.142857 m3/h."""
    q, eta = np.array([20.0, 40.0, 60.0, 80.0, 100.0]), np.array([0.40, 0.66, 0.78, 0.76, 0.60])
    fit = fit_curve(q, eta, order=2, through_zero=True)
    np.testing.assert_allclose(fit.plain, [0.0, 47 / 2000, -7 / 40000], rtol=1e-12, atol=1e-15)
    best = -fit.plain[1] / (2 * fit.plain[2])
    assert best == pytest.approx(67.142857, rel=1e-7)
    assert float(fit.value(best)) == pytest.approx(0.788928571, rel=1e-8)


def test_gum_h3_calibration_line():
    """JCGM 100:2008 example H.3 (thermometer correction); data and published results from memory, each reproduced by the formulas there."""
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])
    fit = polynomial(t - 20.0, b, 1)
    u = np.sqrt(np.diag(fit.covariance))
    assert fit.coefficients[0] == pytest.approx(-0.1712, abs=5e-5)
    assert fit.coefficients[1] == pytest.approx(0.00218, abs=5e-6)
    assert u[0] == pytest.approx(0.0029, abs=5e-5)
    assert u[1] == pytest.approx(0.00067, abs=5e-6)
    assert fit.covariance[0, 1] / (u[0] * u[1]) == pytest.approx(-0.930, abs=5e-4)
    assert fit.residual_sd == pytest.approx(0.0035, abs=5e-5)
    line = fit_curve(t - 20.0, b, order=1)
    assert float(line.value(10.0)) == pytest.approx(-0.1494, abs=5e-5)
    assert float(line.uncertainty(10.0)) == pytest.approx(0.0041, abs=5e-5)
