"""The penalised spline against the same sums done plainly with whole matrices."""

import numpy as np
import pytest

from curvebank.trace import smooth


@pytest.mark.parametrize("periodic", [False, True])
@pytest.mark.parametrize("pieces", [6, 30])
def test_banded_solution_is_the_whole_matrix_solution(periodic, pieces):
    rng = np.random.default_rng(pieces)
    t = np.sort(rng.uniform(0, 1, 150))
    y, w = np.sin(6.28 * t) + rng.normal(0, 0.1, 150), rng.uniform(0.2, 2.0, 150)
    b = smooth.basis(t, pieces, periodic)
    system = smooth.Design(t, pieces, periodic).system(y[:, None], w)
    lam = 3.0
    got, logdet = system.solve(lam)
    lhs = (b * w[:, None]).T @ b + lam * smooth.penalty(b.shape[1], periodic)
    assert np.allclose(got[:, 0], np.linalg.solve(lhs, (b * w[:, None]).T @ y), atol=1e-4)
    assert logdet == pytest.approx(np.linalg.slogdet(lhs)[1], rel=1e-4)
    assert np.allclose(system.inverse(), np.linalg.inv(lhs), rtol=1e-3, atol=1e-6)
    assert system.freedom() == pytest.approx(np.trace(np.linalg.solve(lhs, (b * w[:, None]).T @ b)), rel=1e-3)


@pytest.mark.parametrize("periodic", [False, True])
def test_smoothness_is_where_the_restricted_likelihood_is_greatest(periodic):
    """Against a fine search over the likelihood written with whole matrices and eigenvalues."""
    rng = np.random.default_rng(5)
    pieces, n = 25, 200
    t = (np.arange(n) + 0.5) / n
    y = np.sin(2 * np.pi * t) + rng.normal(0, 0.05, n)
    y -= y.mean()
    b = smooth.basis(t, pieces, periodic)
    p, gram, right = smooth.penalty(b.shape[1], periodic), b.T @ b, b.T @ y
    rank = np.linalg.matrix_rank(p)

    def likelihood(lam):
        rss = y @ y - right @ np.linalg.solve(gram + lam * p, right)
        return (n - len(p) + rank) * np.log(rss) + np.linalg.slogdet(gram + lam * p)[1] - rank * np.log(lam)

    lams = 10.0 ** np.arange(-6, 10, 0.05)
    best = lams[np.argmin([likelihood(lam) for lam in lams])]
    got = smooth.fit(t, y, pieces=pieces, periodic=periodic, cut=0)
    assert abs(np.log10(got.system.lam / best)) < 0.2


def test_sigma_is_the_covariance_carried_to_the_curve():
    t = np.linspace(0, 1, 60)
    for periodic in (False, True):
        got = smooth.fit(t, np.cos(6 * t) + np.random.default_rng(1).normal(0, 0.1, 60), pieces=9, periodic=periodic)
        b = smooth.basis(t, 9, periodic)
        assert np.allclose(got.sigma(t), np.sqrt(np.diag(b @ got.covariance @ b.T)))


@pytest.mark.parametrize("steep", [0.0, 1e4])
def test_far_and_steep_values_do_not_spoil_a_very_smooth_fit(steep):
    t = np.linspace(0, 1, 400)
    y = 5e3 + steep * t + 300 * t**2 + np.random.default_rng(2).normal(0, 1e-3, 400)
    got = smooth.fit(t, y, pieces=80, cut=0)
    assert np.abs(got.value(t)[:, 0] - 5e3 - steep * t - 300 * t**2).max() < 2e-3
