"""A two-point axis held against the linear propagation of the `uncertainties` package (and its closed form, JCGM 100 eq. 10)."""

import numpy as np
import pytest

from curvebank.axes import plane
from curvebank.axes.marks import AxisMarks
from curvebank.axes.panelmap import PanelMap, Scale
from curvebank.records import GridReport


def test_two_point_axis():
    """v from 0 to 200 between x = 100 and 900, each mark +-0.5 px, the point read +-0.3 px."""
    uncertainties = pytest.importorskip("uncertainties")
    marks = AxisMarks("q", "$", "flow", "m3/h", False, 1.0, np.array([[100.0, 0.0], [900.0, 0.0]]), np.array([0.0, 200.0]))
    # The plane pixel = o + u e1 + v e2 with u = (value - 100) / 100: o = middle of the marks, e1 = half their distance.
    theta = np.array([500.0, 0.0, 400.0, 0.0, 0.0, 1.0])
    covariance = np.zeros((6, 6))
    covariance[0, 0] = 0.5**2 / 2
    covariance[2, 2] = 0.5**2 / 2
    m = PanelMap(
        "p",
        theta,
        covariance,
        {"q": Scale(marks, 0, 100.0, 100.0, None)},
        plane_size=6,
        shift=np.zeros(2),
        size=1.0,
        outline=np.zeros((3, 2)),
        mark_residuals={"q": np.zeros(2)},
        click_sigma_px=0.5,
        grid=GridReport(used=False, lines=0, residual_px=None, why="two marks"),
    )
    p1, p2 = uncertainties.ufloat(100, 0.5), uncertainties.ufloat(900, 0.5)
    for x, published in ((500.0, 0.115920), (100.0, 0.145774), (1000.0, 0.160139)):
        at = np.array([[x, 0.0]])
        value = m.from_pixels(at, ("q", "q"))[0, 0]
        reading = 0.3 * m.pixel_size(at, ("q", "q"))[0, 0, 0]
        u = np.hypot(np.sqrt(m.covariance(at, ("q", "q"))[0, 0, 0]), reading)
        oracle = 200 * (uncertainties.ufloat(x, 0.3) - p1) / (p2 - p1)
        assert value == pytest.approx(oracle.nominal_value, rel=1e-12)
        assert u == pytest.approx(oracle.std_dev, rel=1e-6)
        assert u == pytest.approx(published, rel=1e-5)


def test_a_homography_takes_four_corners_anywhere():
    """Four point pairs fix a homography (Hartley and Zisserman, ch. 4): the inverse map returns the unit square."""
    theta = np.array([0.1, -0.2, 1.1, 0.05, -0.1, 0.9, 0.2, -0.15])
    square = np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]])
    there = plane.pixels(theta, square)
    np.testing.assert_allclose(plane.coordinates(theta, there), square, atol=1e-12)
    by_theta, by_uv = plane.pixel_derivatives(theta, square)
    for k in range(8):
        step = np.zeros(8)
        step[k] = 1e-6
        np.testing.assert_allclose(
            by_theta[:, :, k], (plane.pixels(theta + step, square) - plane.pixels(theta - step, square)) / 2e-6, atol=1e-8
        )
    for k in range(2):
        step = np.zeros(2)
        step[k] = 1e-6
        np.testing.assert_allclose(
            by_uv[:, :, k], (plane.pixels(theta, square + step) - plane.pixels(theta, square - step)) / 2e-6, atol=1e-8
        )
