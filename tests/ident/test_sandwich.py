"""Least squares under coloured noise against the dense formula, a Monte Carlo, and Student's t from scipy."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.sandwich import autocovariance, draw_normal, sandwich_covariance
from gainwright.ident.whiten import Colour
from scipy.linalg import block_diag, toeplitz
from scipy.stats import t as student


def lags(count, rho, c):
    """Autocovariance of e[k] = rho e[k-1] + w[k] + c w[k-1] from its moving-average form, summed to rounding."""
    weights = np.concatenate([[1.0], (rho + c) * rho ** np.arange(5000.0)])
    return np.array([float(weights[: len(weights) - k] @ weights[k:]) for k in range(count)])


@pytest.mark.parametrize(("rho", "c"), [(0.0, 0.0), (0.9, 0.0), (0.95, -0.5), (-0.4, 0.1), (0.6, 0.3)])
def test_autocovariance_is_that_of_the_moving_average_form(rho, c):
    """60 lags to rounding, and fewer where fewer are asked for."""
    expected = lags(60, rho, c)
    assert autocovariance(Colour(rho, c), 60) == pytest.approx(expected, abs=1e-10)
    assert autocovariance(Colour(rho, c), 1) == pytest.approx(expected[:1])


def test_the_covariance_is_the_dense_textbook_formula_across_lost_samples():
    """(X'X)^-1 X'VX (X'X)^-1, its size such that the residual has the sum of squares that V leaves it on average."""
    rng = np.random.default_rng(2)
    rho, c = 0.9, -0.3
    columns, residual = rng.standard_normal((70, 4)) * [1.0, 100.0, 1e-3, 5.0], rng.standard_normal(70)
    noise = block_diag(toeplitz(lags(40, rho, c)), toeplitz(lags(1, rho, c)), toeplitz(lags(29, rho, c)))
    bread = np.linalg.inv(columns.T @ columns)
    left = np.eye(70) - columns @ bread @ columns.T
    size = float(residual @ residual) / float(np.trace(left @ noise @ left))
    expected = size * bread @ columns.T @ noise @ columns @ bread
    got = sandwich_covariance(columns, residual, [slice(0, 40), slice(40, 41), slice(41, 70)], Colour(rho, c))
    assert got == pytest.approx(expected, rel=1e-8)


def test_the_covariance_is_what_many_records_show():
    """Spread of 400 least-squares estimates under rho = 0.8; it errs by 3.5 %, and four times that is allowed.

    Each record's own residual gives the size, as in use.
    """
    rng = np.random.default_rng(7)
    columns = np.column_stack([np.ones(200), 1 - np.exp(-np.maximum(np.arange(200.0) - 20, 0) / 15)])
    noise = np.array([step_sums.coloured(rng, 200, 1.0, 0.8) for _ in range(400)])
    estimates = noise @ np.linalg.pinv(columns).T
    residuals = noise - estimates @ columns.T
    own = [np.diag(sandwich_covariance(columns, r, [slice(0, 200)], Colour(0.8))) for r in residuals]
    assert np.sqrt(np.mean(own, axis=0)) == pytest.approx(np.std(estimates, axis=0), rel=0.14)


def test_draws_have_the_spread_of_students_t_and_the_correlation_asked_for():
    """2.5 and 97.5 % points at 6 degrees of freedom from scipy.stats.t; 2 % is what 2048 even points leave."""
    covariance = np.array([[4.0, -0.3], [-0.3, 0.09]])
    draws = draw_normal(np.array([10.0, -1.0]), covariance, 6.0, 2048, 3)
    for column, centre, std in zip(draws.T, (10.0, -1.0), (2.0, 0.3), strict=True):
        low, high = np.quantile(column, [0.025, 0.975])
        assert (high - centre) / std == pytest.approx(student.ppf(0.975, 6), rel=0.03)
        assert (low - centre) / std == pytest.approx(student.ppf(0.025, 6), rel=0.03)
    assert np.corrcoef(draws.T)[0, 1] == pytest.approx(-0.5, abs=0.05)


def test_draws_of_a_singular_covariance_stay_finite():
    """A parameter that does not vary stays where it is."""
    draws = draw_normal(np.array([1.0, 2.0]), np.diag([0.0, 1.0]), 10.0, 64, 0)
    assert np.all(draws[:, 0] == 1.0)
    assert np.all(np.isfinite(draws))
