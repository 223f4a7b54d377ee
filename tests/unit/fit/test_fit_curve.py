"""The fitted curve: exact data give exact coefficients, noise gives honest uncertainty, bad input is refused."""

import numpy as np
import pytest

from curvebank.errors import FitError
from curvebank.fit import fit_curve
from curvebank.fit.uncertainty import shared_sigma, stack

Q = np.linspace(8.0, 186.0, 900)
HEAD = 52.0 - 0.02 * Q - 6e-4 * Q**2 - 1.2e-6 * Q**3


def test_a_cubic_comes_back_in_plain_powers():
    fit = fit_curve(Q, HEAD, order=3)
    np.testing.assert_allclose(fit.plain, [52.0, -0.02, -6e-4, -1.2e-6], rtol=1e-9)
    assert (fit.lo, fit.hi) == (8.0, 186.0)
    assert fit.max_miss < 1e-12


@pytest.mark.parametrize("order", range(1, 9))
def test_plain_and_scaled_forms_agree_over_the_domain(order):
    fit = fit_curve(Q, HEAD + 0.3 * np.sin(Q / 25), order=order)
    a = np.polynomial.polynomial.polyval(Q, fit.plain)
    assert np.abs(a - fit.value(Q)).max() <= 1e-9 * np.abs(fit.value(Q)).max()


@pytest.mark.parametrize("correlation", [1.0, 12.0])
def test_auto_finds_the_order_of_a_known_polynomial(correlation):
    rng = np.random.default_rng(3)
    orders = []
    for _ in range(20):
        noise = np.repeat(rng.normal(size=900), int(correlation))[: len(Q)]
        orders.append(fit_curve(Q, HEAD + 0.02 * noise, 0.02, correlation_px=correlation).order)
    assert sorted(orders)[10] == 3
    assert max(orders) <= 5


@pytest.mark.parametrize(
    ("flow", "value", "kwargs", "code"),
    [
        ([1.0, 2.0, np.nan], [1.0, 2.0, 3.0], {}, "not-a-number"),
        ([1.0, 2.0], [1.0, 2.0, 3.0], {}, "shape"),
        ([1.0], [1.0], {}, "too-few-points"),
        ([2.0, 2.0, 2.0], [1.0, 2.0, 3.0], {}, "one-flow"),
        ([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], {"order": 5}, "too-few-points"),
        ([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], {"order": 9}, "order"),
        ([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], {"order": 0}, "order"),
        ([1.0, 2.0, 3.0], [1.0, 2.0, 3.0], {"sigma": [0.1, -0.1, 0.1]}, "not-a-number"),
        ([-5.0, 2.0, 3.0], [1.0, 2.0, 3.0], {"through_zero": True}, "through-zero"),
    ],
)
def test_what_cannot_be_fitted_is_refused_with_a_code(flow, value, kwargs, code):
    with pytest.raises(FitError) as caught:
        fit_curve(flow, value, **kwargs)
    assert caught.value.code == code
    assert caught.value.message.endswith(".")


def test_a_line_that_turns_back_in_flow_is_no_function_of_flow():
    angle = np.linspace(0, 1.5 * np.pi, 400)
    with pytest.raises(FitError) as caught:
        fit_curve(50 + 20 * np.cos(angle), 30 + 5 * np.sin(angle))
    assert caught.value.code == "not-single-valued"


def test_a_wavering_line_and_a_reversed_line_are_still_functions():
    rng = np.random.default_rng(5)
    wavering = Q + rng.normal(scale=0.0005, size=len(Q))
    assert fit_curve(wavering, HEAD, order=3).order == 3
    np.testing.assert_allclose(fit_curve(Q[::-1], HEAD[::-1], order=3).plain, fit_curve(Q, HEAD, order=3).plain, rtol=1e-9)


def test_a_few_outliers_do_not_bend_the_curve_but_show_as_miss():
    rng = np.random.default_rng(7)
    noisy = HEAD + rng.normal(scale=0.02, size=len(Q))
    noisy[300:315] += 3.0
    fit = fit_curve(Q, noisy, 0.02, order=3)
    assert np.abs(fit.value(Q) - HEAD).max() < 0.02
    assert fit.max_miss > 2.5


def test_the_reading_uncertainty_covers_its_own_scatter():
    rng = np.random.default_rng(11)
    error, sigma = [], []
    for _ in range(300):
        noise = np.repeat(rng.normal(size=90), 10)
        fit = fit_curve(Q, HEAD + 0.05 * noise, 0.05, order=3, correlation_px=10)
        error.append(fit.value(60.0) - (52.0 - 0.02 * 60 - 6e-4 * 3600 - 1.2e-6 * 216000))
        sigma.append(fit.uncertainty(60.0))
    assert 0.9 < np.std(error) / np.mean(sigma) < 1.1


def test_the_shared_part_is_not_averaged_away():
    shift = (np.ones((len(Q), 1)), np.array([[0.3**2]]))
    fit = fit_curve(Q, HEAD, 0.01, shift, order=3)
    np.testing.assert_allclose(fit.uncertainty(Q), 0.3, rtol=0.01)
    both = stack(shift, (Q[:, None] / 100, np.array([[0.1**2]])))
    np.testing.assert_allclose(shared_sigma(both), np.hypot(0.3, 0.001 * Q), rtol=1e-12)


def test_a_full_covariance_gives_the_same_as_its_low_rank_form():
    q = Q[::30]
    j = np.stack([np.ones(len(q)), q / 100], axis=1)
    v = np.array([[0.04, 0.01], [0.01, 0.09]])
    h = np.interp(q, Q, HEAD)
    a, b = fit_curve(q, h, 0.1, (j, v), order=3), fit_curve(q, h, 0.1, j @ v @ j.T, order=3)
    np.testing.assert_allclose(a.covariance, b.covariance, rtol=1e-8, atol=1e-12)


def test_orders_that_plain_powers_cannot_carry_are_not_chosen():
    q = np.linspace(1000.0, 1004.0, 500)
    h = np.sin((q - 1000) * 2)
    fit = fit_curve(q, h)
    plain = np.polynomial.polynomial.polyval(q, fit.plain)
    assert np.abs(plain - fit.value(q)).max() <= 1e-6 * np.abs(fit.value(q)).max()
    with pytest.raises(FitError) as caught:
        fit_curve(q, h, order=8)
    assert caught.value.code == "plain-powers"


def test_efficiency_through_zero_is_zero_at_zero_flow():
    eta = 0.0235 * Q * (1 - Q / 250)
    fit = fit_curve(Q, eta, 0.002, through_zero=True)
    assert fit.through_zero
    assert abs(float(fit.value(0.0))) < 1e-12
    assert fit.plain[0] == 0.0
