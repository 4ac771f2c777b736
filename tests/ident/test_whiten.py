"""Whitening against the dense covariance matrix, and what restricted likelihood makes of short records."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.noise import effective_samples, estimate_colour, restricted_loss
from gainwright.ident.whiten import Colour, log_determinant, stretches_of, whiten
from scipy.linalg import block_diag, toeplitz


def covariance(count, rho, c):
    """Of e[k] = rho e[k-1] + w[k] + c w[k-1] for unit w, from its moving-average form, summed to rounding."""
    weights = np.concatenate([[1.0], (rho + c) * rho ** np.arange(6000)])
    lags = [float(weights[: len(weights) - k] @ weights[k:]) for k in range(count)]
    return toeplitz(lags)


def dense(valid, rho, c):
    """Of stretches that start afresh, as the lost samples leave them."""
    return block_diag(*(covariance(part.stop - part.start, rho, c) for part in stretches_of(valid)))


LOST = np.array([True] * 25 + [False] * 3 + [True] * 17 + [False] + [True] + [False] * 2 + [True] * 14)


@pytest.mark.parametrize("rho", [-0.4, 0.3, 0.9, 0.99])
def test_first_order_noise_is_whitened_exactly_across_lost_samples(rho):
    """Quadratic form and log determinant equal those of the dense covariance matrix to rounding."""
    rng = np.random.default_rng(3)
    columns = rng.standard_normal((int(LOST.sum()), 3))
    matrix = dense(LOST, rho, 0.0)
    white = whiten(columns, stretches_of(LOST), Colour(rho))
    assert white.T @ white == pytest.approx(columns.T @ np.linalg.solve(matrix, columns), rel=1e-9)
    assert log_determinant(stretches_of(LOST), Colour(rho)) == pytest.approx(np.linalg.slogdet(matrix)[1], rel=1e-9)


@pytest.mark.parametrize(("rho", "c"), [(0.9, -0.3), (0.97, -0.6), (0.99, -0.9), (0.7, 0.2)])
def test_noise_with_a_moving_average_part_is_whitened_but_for_the_start_of_each_stretch(rho, c):
    """The stated approximation: what is lost is bounded by the start, so it doesn't grow with the record.

    Left out is the spread of the first innovation that the first sample doesn't settle, c^2 (1 - w/e variance); it dies
    as c^(2k). Summed over a stretch: c^2/(1 - c^2) (1 - 1/ratio) of log determinant, twice over for second order.
    """
    colour = Colour(rho, c)
    bound = 2 * c * c / (1 - c * c) * (1 - 1 / colour.variance_ratio)
    gaps = []
    for count in (60, 240):
        valid = np.ones(count, dtype=bool)
        exact = np.linalg.slogdet(covariance(count, rho, c))[1]
        gaps.append(abs(log_determinant(stretches_of(valid), colour) - exact))
    assert max(gaps) < bound
    # the mean of the quadratic form over the noise itself is its count; the same start is all that is missed
    unit = whiten(np.eye(240), [slice(0, 240)], colour)
    missed = float(np.trace(unit @ covariance(240, rho, c) @ unit.T)) - 240
    assert abs(missed) < bound


def test_white_noise_is_left_alone():
    """No colour, no change, whatever the stretches."""
    columns = np.arange(12.0).reshape(6, 2)
    assert np.array_equal(whiten(columns, [slice(0, 2), slice(2, 6)], Colour()), columns)


def test_stretches_number_the_valid_samples_only():
    """Lost at both ends, in the middle, and one alone."""
    valid = np.array([False, True, True, False, True, False, False, True, True, True, False])
    assert stretches_of(valid) == [slice(0, 2), slice(2, 3), slice(3, 6)]
    assert stretches_of(np.zeros(4, dtype=bool)) == []


def test_restricted_loss_is_the_textbook_likelihood_of_the_error_contrasts():
    """Differences between colours equal those of -2 log density of A'y, A an orthonormal basis of the contrasts.

    Harville (1974) shows that the choice of contrasts doesn't matter (from memory); the size is profiled out in both.
    """
    rng = np.random.default_rng(8)
    n, valid = 60, np.ones(60, dtype=bool)
    valid[20:24] = False
    n = int(valid.sum())
    columns, y = rng.standard_normal((n, 3)), rng.standard_normal(n)
    contrasts = np.linalg.qr(columns, mode="complete")[0][:, 3:]

    def textbook(rho):
        matrix = contrasts.T @ dense(valid, rho, 0.0) @ contrasts
        seen = contrasts.T @ y
        return (n - 3) * np.log(seen @ np.linalg.solve(matrix, seen)) + np.linalg.slogdet(matrix)[1]

    def ours(rho):
        return restricted_loss(np.column_stack([columns, y]), stretches_of(valid), Colour(rho))

    for rho in (-0.3, 0.5, 0.95):
        assert ours(rho) - ours(0.0) == pytest.approx(textbook(rho) - textbook(0.0), abs=1e-8)


def test_the_colour_of_a_short_residual_comes_without_the_bias_of_plain_likelihood():
    """80 samples of rho = 0.8 beside five columns, 120 records: plain maximum likelihood falls short by 0.16.

    The mean of 120 estimates that spread by 0.12 has a standard error of 0.011; restricted likelihood keeps within
    0.04, plain likelihood, written out here on a grid, is low by more than 0.1 on the same records.
    """
    rng = np.random.default_rng(21)
    time = np.arange(80.0)
    columns = np.column_stack([time**0, time, np.cos(time / 12), np.sin(time / 12), 1 - np.exp(-time / 20)])
    grid = np.linspace(0.0, 0.995, 80)
    restricted, plain = [], []
    for _ in range(120):
        noise = step_sums.coloured(rng, 80, 1.0, 0.8)
        # first-order noise only in both, so that they differ in the likelihood alone
        both = np.column_stack([columns, noise])
        restricted.append(grid[np.argmin([restricted_loss(both, [slice(0, 80)], Colour(r)) for r in grid])])
        losses = []
        for r in grid:
            white = np.vstack([both[:1] * np.sqrt(1 - r * r), both[1:] - r * both[:-1]])
            left = white[:, -1] - white[:, :-1] @ np.linalg.lstsq(white[:, :-1], white[:, -1], rcond=None)[0]
            losses.append(80 * np.log(left @ left) - np.log(1 - r * r))
        plain.append(grid[np.argmin(losses)])
    assert np.mean(plain) < 0.70
    assert np.mean(restricted) == pytest.approx(0.8, abs=0.04)


@pytest.mark.parametrize(("rho", "c"), [(0.0, 0.0), (0.8, 0.0), (0.9, -0.2), (0.95, -0.3)])
def test_the_search_never_ends_above_the_truth(rho, c):
    """A minimum can't lie above the loss at the true colour; 1.5 is left for the second valley of weak colours."""
    rng = np.random.default_rng(4)
    columns = np.column_stack([np.ones(400), 1 - np.exp(-np.arange(400) / 40)])
    for _ in range(12):
        noise = step_sums.coloured(rng, 400, 1.0, rho, c)
        both = np.column_stack([columns, noise])
        found = estimate_colour(columns, noise, [slice(0, 400)])
        stretches = [slice(0, 400)]
        assert restricted_loss(both, stretches, found) < restricted_loss(both, stretches, Colour(rho, c)) + 1.5


@pytest.mark.parametrize(("rho", "c"), [(0.8, 0.0), (0.95, -0.5)])
def test_effective_samples_are_what_the_mean_of_the_noise_is_worth(rho, c):
    """Variance over variance of the mean, from the dense covariance; the formula is its limit for long records."""
    matrix = covariance(2000, rho, c)
    worth = matrix[0, 0] / (matrix.sum() / 2000**2)
    assert effective_samples(2000, Colour(rho, c)) == pytest.approx(worth, rel=0.03)  # 2 rho/(1 - rho)/n at the ends
