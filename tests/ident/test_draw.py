"""Drawn dead times and lags against a posterior summed by brute force on a grid, in closed forms of the test's own."""

import numpy as np
import pytest
import step_sums
from gainwright.ident.catalogue import LAG
from gainwright.ident.draw import draw
from gainwright.ident.polish import polish
from gainwright.ident.profile import profile_dead_time
from gainwright.ident.regression import Regression
from gainwright.ident.run import Run
from gainwright.ident.start import first_guesses
from gainwright.ident.whiten import Colour
from scipy.linalg import toeplitz
from scipy.stats import t as student

COUNT = 50


def record(rho, dead_time, seed):
    """One step of a lag of 4 samples, gain 2, level 1, noise 4 % of the step; command held."""
    rng = np.random.default_rng(seed)
    time = np.arange(float(COUNT))
    command = step_sums.steps(time, [(6.0, 1.0), (30.0, 0.3)], 0.0)
    clean = step_sums.response(step_sums.lag(4.0), 2.0, dead_time, time, command, 0.0)
    noisy = 1.0 + clean + step_sums.coloured(rng, COUNT, 0.08, rho)
    return Run("log", time, command, noisy, command_before=0.0, at_rest=True)


def brute_force(run, rho, lags, dead_times):
    """(len(lags), len(dead_times)) posterior density under flat priors on log lag, dead time, gain, level and log size.

    Gain, level and size are integrated out in closed form: |X'X|^(-1/2) RSS^(-(n - 2)/2), after whitening by Cholesky.
    """
    root = np.linalg.cholesky(toeplitz(rho ** np.arange(float(COUNT))))
    y, one = np.linalg.solve(root, run.response), np.linalg.solve(root, np.ones(COUNT))
    log_density = np.empty((len(lags), len(dead_times)))
    for i, slow in enumerate(lags):
        unit = np.column_stack(
            [step_sums.response(step_sums.lag(slow), 1.0, d, run.time, run.command, 0.0) for d in dead_times]
        )
        white = np.linalg.solve(root, unit)
        aa, ab, bb = np.einsum("ij,ij->j", white, white), one @ white, one @ one
        ya, yb = y @ white, y @ one
        determinant = aa * bb - ab**2
        explained = (bb * ya**2 - 2 * ab * ya * yb + aa * yb**2) / determinant
        log_density[i] = -0.5 * np.log(determinant) - 0.5 * (COUNT - 2) * np.log(y @ y - explained)
    return np.exp(log_density - log_density.max())


@pytest.mark.parametrize(
    ("rho", "dead_time", "seed"), [(0.0, 3.4, 1), (0.0, 0.1, 2), (0.8, 3.4, 3), (0.8, 3.02, 5)],
    ids=["white", "white, hardly any dead time", "coloured", "coloured, arriving just after a sample"],
)  # fmt: skip
def test_drawn_dead_times_and_lags_follow_the_posterior_summed_by_brute_force(rho, dead_time, seed):
    """Largest distance of the distribution functions below 5 %.

    Half a grid cell and 1024 even points leave 1 to 2 %. The lag is drawn by a t about its best at each dead time,
    where the true conditional is a little skewed in its logarithm.
    """
    run = record(rho, dead_time, seed)
    problem = Regression((run,), LAG, 0.0, False)
    colour = Colour(rho)
    theta, _ = min((polish(problem, g, colour) for g in first_guesses(problem)), key=lambda end: end[1].cost)
    draws = draw(profile_dead_time(problem, theta, colour, float(COUNT - 4)), 1024, 0)
    lags, dead_times = np.geomspace(1.5, 10, 60), np.linspace(0, 7, 211)
    density = brute_force(run, rho, lags, dead_times)
    assert density[0].max() < 1e-4 > density[-1].max()  # the grid holds all of it
    by_dead_time = np.cumsum(density.sum(axis=0)) / density.sum()
    drawn = np.searchsorted(np.sort(draws[:, 1]), dead_times + 0.5 * dead_times[1]) / 1024
    assert np.max(np.abs(drawn - by_dead_time)) < 0.05
    by_lag = np.cumsum(density.sum(axis=1)) / density.sum()
    drawn = np.searchsorted(np.sort(np.exp(draws[:, 0])), lags * (lags[1] / lags[0]) ** 0.5) / 1024
    assert np.max(np.abs(drawn - by_lag)) < 0.05


def test_the_level_alone_is_drawn_as_students_t():
    """A dead time and lag that are sharp leave gain and level of a linear regression: t with n - 4 degrees of freedom.

    Noise a thousandth of the step makes the problem linear; spread from the textbook covariance of all four parameters.
    """
    rng = np.random.default_rng(9)
    time = np.arange(float(COUNT))
    command = step_sums.steps(time, [(6.0, 1.0), (30.0, 0.3)], 0.0)
    clean = step_sums.response(step_sums.lag(4.0), 2.0, 3.4, time, command, 0.0)
    run = Run("log", time, command, 1.0 + clean + 2e-3 * rng.standard_normal(COUNT), command_before=0.0, at_rest=True)
    problem = Regression((run,), LAG, 0.0, False)
    theta, solved = polish(problem, np.array([np.log(4.0), 3.4]), tolerance=1e-12)

    def model(log_lag, dead_time, gain, level):
        return level + step_sums.response(step_sums.lag(np.exp(log_lag)), gain, dead_time, time, command, 0.0)

    centre = np.array([theta[0], theta[1], *solved.coefficients])
    slopes = [(model(*(centre + h)) - model(*(centre - h))) / 2e-5 for h in 1e-5 * np.eye(4)]
    covariance = solved.cost / (COUNT - 4) * np.linalg.inv(np.array(slopes) @ np.array(slopes).T)
    draws = draw(profile_dead_time(problem, theta, Colour(), COUNT - 4.0), 2048, 1)
    for i, std in enumerate(np.sqrt(np.diag(covariance))):
        low, high = np.quantile(draws[:, i], [0.025, 0.975])
        assert (high - low) / std == pytest.approx(2 * student.ppf(0.975, COUNT - 4), rel=0.04)
