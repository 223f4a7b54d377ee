"""How near a traced line comes to the Cramer-Rao bound, on isolated lines of known width, blur and noise; and the bound itself.

A small count of what ``tests/bench/bound.py`` measures with 400 seeds.
"""

import sys
from pathlib import Path

import numpy as np
import pytest

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "bench"))

import bound  # noqa: E402


def test_pixel_sum_meets_the_closed_form_of_one_row() -> None:
    """A narrow bar blurred by s is a Gaussian profile of height width / (s sqrt(2 pi)): information a row = 1 / one_row_bound^2."""
    width, s, noise = 0.2, 1.2, 0.05
    d = np.arange(-12, 13) + 0.31
    height = width / (s * np.sqrt(2 * np.pi))
    information = (bound.profile_slope(d, width, s) ** 2).sum() / (noise * height) ** 2
    assert information**-0.5 == pytest.approx(bound.one_row_bound(np.hypot(s, width / np.sqrt(12)), noise), rel=2e-3)


def test_published_figure() -> None:
    """Localising a line: 1.06225 (noise / height) sqrt(s) from one row; s = 1.2, noise 0.05 give 0.0582 px."""
    assert bound.one_row_bound(1.2, 0.05) == pytest.approx(0.0582, abs=5e-5)


def test_bound_of_the_spline_space_is_the_one_row_bound_shared_out() -> None:
    """Averaged along the line, DOF coefficients share the information of all rows: variance about DOF x (one row) / rows."""
    c = bound.Condition(3.0, 0.7, 0.05)
    at = np.linspace(0, 1, 400)
    d = np.linspace(-8, 8, 3201)
    a_row = (c.sigma / c.height) ** 2 / ((bound.profile_slope(d, c.width, c.blur) ** 2).sum() * (d[1] - d[0]))
    length = np.hypot(*np.diff(bound.true_line(np.zeros(2))[0], axis=0).T).sum()
    assert (bound.bound(c, at) ** 2).mean() == pytest.approx(bound.DOF * a_row / length, rel=0.1)


@pytest.mark.parametrize("width", [3.0, 1.5])
def test_tracer_is_near_the_bound(width: float, capsys: pytest.CaptureFixture[str]) -> None:
    """Standard deviation within 1.5 of the bound and bias below 0.01 px, both printed; the benchmark has more conditions and seeds."""
    found = bound.measure(bound.Condition(width, 0.7, 0.05), seeds=24)
    words = f"sd / bound {found['ratio']:.2f}, bias {found['bias_px']:.4f} px, worst {found['bias_worst_px']:.4f} px"
    with capsys.disabled():
        print(f"\n  line {width} px wide: {words}")
    assert found["lost"] == 0
    assert found["ratio"] < 1.5
    assert found["bias_px"] < 0.01
